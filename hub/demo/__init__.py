"""A physical simulator of nodes. It speaks to the hub as real nodes do: MQTT, node logs and an inventory file."""
