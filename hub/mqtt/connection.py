"""One connection to a broker, from the first byte to the last. A new one is made each time.

The network is served by turns of our own instead of the library's thread, for three reasons. Acknowledgements are
then sent by the thread that reads, between two reads: none can slip into a later connection, where its number belongs
to another message. When too much waits to be stored, reading simply pauses, and the broker keeps the rest. And many
messages are read in one turn, which takes about half the work of the library's way.
"""

import os
import secrets
import select
import socket
import time
from collections.abc import Callable, Iterable
from contextlib import suppress
from typing import Any, Final

import paho.mqtt.client as paho
from paho.mqtt.enums import MQTTErrorCode

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.buffered import BufferedClient
from hub.mqtt.client import ANSWER_LIMIT_S, new_client, refusal, unreachable
from hub.mqtt.tray import Letter
from hub.telemetry.topics import every_node

KEEPALIVE_S: Final = 30
READS_A_TURN: Final = 200
WRITES_A_TURN: Final = 500
MOST_OUTGOING: Final = 2000
LINGER_S: Final = 1.0

# How long a broker may take to deliver the hub's own test message before something is said about it, and the pause
# between two of them until one arrives.
TEST_LIMIT_S: Final = 10.0

DROPPED_TOPIC: Final = "$SYS/broker/publish/messages/dropped"


class ConnectionLostError(BrokerError):
    """The connection could not be made, was refused or broke; the text is for a person."""


class Connection:
    """A connection with a session that the broker keeps while the hub is away.

    Parameters
    ----------
    access, root
        Where to, and the first level of the topics.
    generation
        The number of this connection; letters carry it.
    deliver
        Given each message. It must not wait.
    now_ms
        The clock.
    asks_dropped
        Whether to ask for the broker's count of dropped messages.

    Attributes
    ----------
    received, acknowledged
        Messages of this connection that want an acknowledgement, and those that got it.
    accepted, ready, session_kept
        Whether the broker let the hub in, confirmed its subscription, and still had its session.
    test_topic
        Where the hub sends a message to itself: a topic that the subscription takes and that is no node's.
    delivers
        Whether the broker is known to deliver what the hub subscribed to; ``None`` while that is open.
    dropped
        The broker's count of messages it dropped, where it tells.
    """

    def __init__(
        self,
        access: Access,
        root: str,
        generation: int,
        deliver: Callable[[Letter], None],
        now_ms: Callable[[], int],
        *,
        asks_dropped: bool,
    ) -> None:
        self.access = access
        self.generation = generation
        self.received = 0
        self.acknowledged = 0
        self.accepted = False
        self.ready = False
        self.session_kept = False
        self.delivers: bool | None = None
        self.dropped: int | None = None
        self.asks_dropped = asks_dropped
        self._root = root
        self._deliver = deliver
        self._now_ms = now_ms
        self._handled = 0
        self._refusal = ""
        self._fault: Exception | None = None
        self.test_topic = f"{root}/hub.{_as_level(access.client_id)}/telemetry"
        self._own_prefix = f"{root}/hub."
        self._test_payload = secrets.token_hex(16).encode()
        self._tests = 0
        self._pending: dict[int, str] = {}
        self._deadline = time.monotonic() + ANSWER_LIMIT_S
        self._awaited = "answers"
        client = new_client(BufferedClient, access, clean=False, manual_ack=True)
        client.max_inflight_messages_set(MOST_OUTGOING)
        client.max_queued_messages_set(2 * MOST_OUTGOING)
        client.on_connect = self._on_connect
        client.on_subscribe = self._on_subscribe
        client.on_message = self._on_message
        # Being told when to write keeps the library from writing at each single packet.
        client.on_socket_register_write = _leave_to_turn
        self._client = client
        self._poll = select.poll()
        self._watched: tuple[int, int] = (-1, 0)

    def open(self, wake: int) -> None:
        """Connect.

        Parameters
        ----------
        wake
            A descriptor whose readability ends the waiting of a turn.

        Raises
        ------
        ConnectionLostError
            It is not possible; the text says why and what to do.
        """
        try:
            self._client.connect(self.access.host, self.access.port, KEEPALIVE_S)
        except (OSError, ValueError) as error:
            problem = error if isinstance(error, OSError) else OSError(str(error))
            raise ConnectionLostError(unreachable(self.access, problem)) from None
        self._poll.register(wake, select.POLLIN)

    def turn(self, wait_s: float, *, read: bool) -> None:
        """Wait for the network and serve it once.

        Raises
        ------
        ConnectionLostError
            The connection is over.
        """
        handle = self._handle()
        mask = (select.POLLIN if read else 0) | (select.POLLOUT if self.wants_write else 0)
        if self._watched != (handle, mask):
            self._poll.register(handle, mask)
            self._watched = (handle, mask)
        here = read and self._held_back()
        happened = dict(self._poll.poll(0 if here else wait_s * 1000)).get(handle, 0)
        if here or happened & ~select.POLLOUT:
            self._read()
        self.write()
        self._check(self._client.loop_misc())
        self._keep_time()

    def acknowledge(self, mids: Iterable[int]) -> None:
        """Tell the broker that messages of this connection are stored. Only for the thread that takes turns."""
        for mid in mids:
            self._client.ack(mid, 1)
            self.acknowledged += 1

    def publish(self, topic: str, payload: bytes) -> bool:
        """Hand out a message at QoS 1; false when the broker has too many unanswered ones to take it now."""
        return self._client.publish(topic, payload, qos=1).rc == paho.MQTT_ERR_SUCCESS

    def write(self) -> None:
        """Send what is to be sent, as far as the network takes it."""
        if self._client.want_write():
            self._check(self._client.loop_write())
        buffer = self._client.buffer
        if buffer is not None and buffer.unsent:
            try:
                buffer.flush()
            except OSError as error:
                raise ConnectionLostError(self._lost(error.strerror or str(error))) from None

    @property
    def wants_write(self) -> bool:
        """Whether something still has to be sent."""
        buffer = self._client.buffer
        return self._client.want_write() or (buffer is not None and buffer.unsent)

    def close(self, *, orderly: bool) -> None:
        """End it; orderly tells the broker so, and waits a moment until it has taken that in.

        A socket that is closed while something unread lies in it makes the other side forget what it has not read
        yet: the last acknowledgements. So whatever still comes is read and dropped until the broker hangs up.
        """
        client = self._client
        found = client.socket()
        if found is None or found.fileno() < 0:
            return
        if not orderly:
            found.close()
            return
        with socket.socket(fileno=os.dup(found.fileno())) as lingering:
            client.disconnect()
            client.loop_write()
            lingering.settimeout(LINGER_S)
            end = time.monotonic() + LINGER_S
            with suppress(OSError):
                while lingering.recv(65_536) and time.monotonic() < end:
                    pass

    # One turn ---------------------------------------------------------------------------------------------------------

    def _read(self) -> None:
        for _ in range(READS_A_TURN):
            before = self._handled
            self._check(self._client.loop_read())
            if self._fault is not None:
                raise self._fault
            if self._handled == before and not self._held_back():
                return

    def _held_back(self) -> bool:
        """Whether bytes have left the network that were not read yet: waiting for the network would miss them."""
        buffer = self._client.buffer
        return buffer is not None and buffer.pending() > 0

    def _handle(self) -> int:
        found = self._client.socket()
        if found is None:
            raise ConnectionLostError(self._refusal or self._lost("it hung up"))
        return found.fileno()

    def _check(self, code: MQTTErrorCode) -> None:
        if self._refusal:
            raise ConnectionLostError(self._refusal)
        if code != paho.MQTT_ERR_SUCCESS:
            raise ConnectionLostError(self._lost(paho.error_string(code).rstrip(".")))

    def _lost(self, reason: str) -> str:
        return f"The connection to the broker at {self.access.place} was lost ({reason}) and is made anew."

    def _keep_time(self) -> None:
        """See that the broker answers, and ask it for the test message until one arrives."""
        if time.monotonic() < self._deadline:
            return
        if not self.ready:
            raise ConnectionLostError(
                f"The broker at {self.access.place} takes the connection and never {self._awaited}. Check that it is "
                "an MQTT broker and not overloaded."
            )
        if self.delivers is not True:
            if self._tests:
                self.delivers = False
            self._send_test()

    def _send_test(self) -> None:
        # QoS 0: some brokers end the connection of a client whose publication they refuse.
        self._tests += 1
        self._client.publish(self.test_topic, self._test_payload, qos=0)
        self._deadline = time.monotonic() + TEST_LIMIT_S

    # What the library calls, inside a turn ----------------------------------------------------------------------------

    def _on_connect(self, client: paho.Client, _data: object, flags: Any, reason: Any, _properties: object) -> None:  # noqa: ANN401
        if reason.is_failure:
            self._refusal = refusal(self.access, reason)
            return
        self.accepted = True
        self.session_kept = bool(flags.session_present)
        # Each time: a broker that lost its store has lost the subscriptions with it.
        filters = [(every_node(self._root, "telemetry"), 1), (every_node(self._root, "presence"), 1)]
        _code, mid = client.subscribe(filters)
        self._pending[mid or 0] = "nodes"
        self._awaited = "confirms the hub's subscription"
        self._deadline = time.monotonic() + ANSWER_LIMIT_S

    def _on_subscribe(self, client: paho.Client, _data: object, mid: int, reasons: Any, _properties: object) -> None:  # noqa: ANN401
        what = self._pending.pop(mid, "")
        if what == "dropped":
            self.asks_dropped = True
        if what != "nodes":
            return
        if any(reason.is_failure for reason in reasons):
            self._refusal = (
                f"The broker at {self.access.place} refuses to give the hub {every_node(self._root, 'telemetry')}. "
                f"Allow the user “{self.access.username}” to read and write {self._root}/#."
            )
            return
        self.ready = True
        self._send_test()
        if self.asks_dropped:
            # A broker that ends the connection over this is not asked again: the answer turns it back on.
            self.asks_dropped = False
            _code, number = client.subscribe(DROPPED_TOPIC, 0)
            self._pending[number or 0] = "dropped"

    def _on_message(self, client: paho.Client, _data: object, message: paho.MQTTMessage) -> None:
        self._handled += 1
        try:
            self._take(client, message)
        except Exception as error:  # noqa: BLE001 - raised by the turn, once the library is out of the way
            self._fault = error

    def _take(self, client: paho.Client, message: paho.MQTTMessage) -> None:
        try:
            topic = message.topic
        except UnicodeDecodeError:
            topic = f"{self._root}/topic that is not UTF-8"
        mid, qos = message.mid, message.qos
        if qos:
            self.received += 1
        if topic.startswith(self._own_prefix) or topic == DROPPED_TOPIC:
            if qos:
                self.acknowledged += 1
                client.ack(mid, qos)
            self._heed(topic, bytes(message.payload))
            return
        if not self.delivers and topic.endswith("/telemetry"):
            self.delivers = True
        self._deliver(Letter(topic, bytes(message.payload), mid, qos, message.retain, self.generation, self._now_ms()))

    def _heed(self, topic: str, payload: bytes) -> None:
        if topic == self.test_topic and payload == self._test_payload:
            self.delivers = True
        elif topic == DROPPED_TOPIC and payload.isdigit():
            self.dropped = int(payload)


def _leave_to_turn(*_arguments: object) -> None:
    """The turn writes."""


def _as_level(client_id: str) -> str:
    """A client's name as one level of a topic."""
    return "".join(c if c.isalnum() or c in "._-" else "_" for c in client_id)
