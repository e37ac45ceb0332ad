"""A node's connection to the broker: presence, telemetry out, receipts in."""

import threading
import time
from collections import deque
from typing import Final

from paho.mqtt.client import Client, ConnectFlags, DisconnectFlags, MQTTMessage
from paho.mqtt.enums import CallbackAPIVersion, MQTTErrorCode
from paho.mqtt.properties import Properties
from paho.mqtt.reasoncodes import ReasonCode

from hub.demo.node import Node
from hub.demo.outbox import Packet

# Publishes a node has on the way to the broker at once, and messages it leaves without a receipt before it waits.
UNACKNOWLEDGED: Final = 8
UNRECEIPTED: Final = 100
# A message goes again after this long without a receipt, then ever more seldom while there are none at all.
AGAIN_S: Final = 20.0
AGAIN_LONGEST_S: Final = 600.0
# A hub that gives no receipt is not waited for longer before the next lot of messages goes out.
PATIENCE_S: Final = 10.0
KEEP_ALIVE_S: Final = 30


class Link:
    """One node on the broker, as its own user.

    The network runs on a thread of its own; ``pump`` is called from one other thread and does all sending.

    Attributes
    ----------
    refused
        Why the broker did not let the node in, once it did not.
    sent, repeats
        Messages published, and those among them that had been published before.
    failures
        What went wrong in a callback; the connection lives on.
    """

    def __init__(self, node: Node, root: str, login: tuple[str, str] | None, changed: threading.Event) -> None:
        self.node = node
        self.refused: str | None = None
        self.sent = self.repeats = 0
        self.failures: list[str] = []
        self._base = f"{root}/{node.name}"
        self._changed = changed
        self._lock = threading.Lock()
        self._receipts: deque[bytes] = deque()
        self._unacknowledged = 0
        self._connected = False
        self._window = UNRECEIPTED
        self._again_s = AGAIN_S
        self._moved_s = self._slowed_s = time.monotonic()
        client = Client(CallbackAPIVersion.VERSION2, client_id=f"node-{node.name}")
        if login is not None:
            client.username_pw_set(*login)
        client.max_inflight_messages_set(UNACKNOWLEDGED)
        client.will_set(f"{self._base}/presence", b"offline", qos=1, retain=True)
        client.reconnect_delay_set(1, 10)
        client.on_connect = self._on_connect
        client.on_disconnect = self._on_disconnect
        client.on_message = self._on_message
        client.on_publish = self._on_publish
        self._client = client

    @property
    def connected(self) -> bool:
        """Whether the broker has let the node in and it has not left since."""
        return self._connected

    def open(self, host: str, port: int) -> None:
        """Start connecting; the network thread goes on trying."""
        self._client.connect_async(host, port, KEEP_ALIVE_S)
        self._client.loop_start()

    def close(self, wait_s: float = 3.0) -> None:
        """Say goodbye, wait a little for what is on the way, and leave."""
        if self._connected:
            self._publish("presence", b"offline", retain=True)
            until = time.monotonic() + wait_s
            while self._unacknowledged and self._connected and time.monotonic() < until:
                time.sleep(0.01)
        self._client.disconnect()
        self._client.loop_stop()

    def pump(self, now_ms: int) -> int:
        """Take receipts in and send what is due; how many messages went out.

        ``now_ms`` is the node's idea of the moment of sending, for readings without a clock.
        """
        now = time.monotonic()
        while self._receipts:
            self.node.outbox.receipt(self._receipts.popleft())
            self._window, self._again_s, self._moved_s = UNRECEIPTED, AGAIN_S, now
        outbox = self.node.outbox
        if outbox.unreceipted < self._window:
            self._moved_s = now
        elif now - self._moved_s > PATIENCE_S:
            self._window, self._moved_s = self._window + UNRECEIPTED, now
        went = 0
        while self._connected and self._unacknowledged < UNACKNOWLEDGED:
            packet = outbox.due(now, self._window, self._again_s)
            if packet is None or not self._send(packet, now, now_ms):
                break
            went += 1
        return went

    def _send(self, packet: Packet, now: float, now_ms: int) -> bool:
        payload = packet.encode(self.node.fitout.form, self.node.urn, now_ms, self.node.outbox.oldest(packet.boot))
        again = self.node.outbox.is_sent(packet)
        if not self._publish("telemetry", payload):
            return False
        self.node.outbox.sent(packet, now)
        self.sent += 1
        self.repeats += again
        if again and now - self._slowed_s > self._again_s:
            self._again_s, self._slowed_s = min(2.0 * self._again_s, AGAIN_LONGEST_S), now
        if not again and self.node.twice(packet) and self._publish("telemetry", payload):
            self.sent += 1
            self.repeats += 1
        return True

    def _publish(self, leaf: str, payload: bytes, retain: bool = False) -> bool:
        with self._lock:
            self._unacknowledged += 1
        info = self._client.publish(f"{self._base}/{leaf}", payload, qos=1, retain=retain)
        # Without a connection paho keeps the message and sends it on the next one: that counts as on the way.
        if info.rc in (MQTTErrorCode.MQTT_ERR_SUCCESS, MQTTErrorCode.MQTT_ERR_NO_CONN):
            return True
        with self._lock:
            self._unacknowledged -= 1
        return False

    def _note(self, where: str, error: Exception) -> None:
        # An exception in a callback would end the network thread without a word.
        self.failures.append(f"{where}: {error!r}")

    def _on_connect(
        self, client: Client, _data: object, _flags: ConnectFlags, reason: ReasonCode, _props: Properties | None
    ) -> None:
        try:
            if reason.is_failure:
                self.refused = str(reason)
            else:
                self.refused = None
                # The broker may have forgotten us: subscribe every time.
                client.subscribe(f"{self._base}/receipt", qos=1)
                self._publish("presence", b"online", retain=True)
                self._connected = True
            self._changed.set()
        except Exception as error:  # noqa: BLE001 - see _note
            self._note("on_connect", error)

    def _on_disconnect(
        self, _client: Client, _data: object, _flags: DisconnectFlags, _reason: ReasonCode, _props: Properties | None
    ) -> None:
        self._connected = False
        self._changed.set()

    def _on_message(self, _client: Client, _data: object, message: MQTTMessage) -> None:
        try:
            self._receipts.append(bytes(message.payload))
            self._changed.set()
        except Exception as error:  # noqa: BLE001 - see _note
            self._note("on_message", error)

    def _on_publish(
        self, _client: Client, _data: object, _mid: int, _reason: ReasonCode, _props: Properties | None
    ) -> None:
        with self._lock:
            self._unacknowledged -= 1
        self._changed.set()
