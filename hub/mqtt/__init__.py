"""The only package of the hub that speaks MQTT: the collector, its receipts, and the broker it starts."""
