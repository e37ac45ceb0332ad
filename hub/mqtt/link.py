"""The hub's lasting link to its broker: one connection after another, kept up by one thread."""

import socket
import threading
import time
from collections import deque
from collections.abc import Callable, Sequence
from contextlib import suppress
from dataclasses import dataclass
from typing import Final

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.connection import WRITES_A_TURN, Connection, ConnectionLostError
from hub.mqtt.tray import Tray

TURN_S: Final = 0.25
PAUSED_TURN_S: Final = 0.05
FIRST_WAIT_S: Final = 0.5
LONGEST_WAIT_S: Final = 30.0
# A connection that held this long was sound; the next attempt after it comes soon.
SOUND_S: Final = 10.0
FLUSH_S: Final = 2.0

MINUTE_S: Final = 60.0
# More ends of connections a minute than a bad network has: another hub uses the same name.
RIVAL_ENDS: Final = 3
# A thread that has taken no turn for so long hangs.
HANGS_S: Final = 60.0


@dataclass(frozen=True, slots=True)
class LinkState:
    """How the link is: instants in UTC milliseconds.

    ``problems`` hold what is wrong now; ``last_error`` is the last thing that went wrong, even if all is well again.
    """

    connected: bool
    since_ms: int | None
    generation: int
    unacknowledged: int
    reconnects: int
    ends_last_minute: int
    broker_dropped: int
    problems: tuple[str, ...]
    last_error: str


class Link:
    """Keeps a connection to the broker and fills a tray with what arrives.

    Parameters
    ----------
    access
        How to reach the broker.
    root
        First level of the topics.
    tray
        Where messages go. While it is full, nothing is read.
    now_ms
        The clock.
    first_wait_s
        Pause before the second attempt; it doubles up to half a minute.
    """

    def __init__(
        self,
        access: Access,
        root: str,
        tray: Tray,
        now_ms: Callable[[], int],
        *,
        first_wait_s: float = FIRST_WAIT_S,
    ) -> None:
        self._access = access
        self._root = root
        self._tray = tray
        self._now_ms = now_ms
        self._first_wait_s = first_wait_s
        self._closing = threading.Event()
        self._reading = True
        self._thread: threading.Thread | None = None
        self._connection: Connection | None = None
        self._acknowledgements: deque[tuple[int, Sequence[int]]] = deque()
        self._outgoing: dict[object, tuple[str, bytes]] = {}
        self._lock = threading.Lock()
        self._wake_read, self._wake_write = socket.socketpair()
        self._wake_read.setblocking(False)
        self._wake_write.setblocking(False)
        self._turned = time.monotonic()
        self._generation = 0
        self._since_ms: int | None = None
        self._ends: deque[float] = deque(maxlen=100)
        self._asks_dropped = True
        self._dropped_last: int | None = None
        self._dropped = 0
        self._made = 0
        self._ready_in = 0
        self._renew = ""
        self._trouble = "The connection to the broker is being made."
        self._last_error = ""
        self.stale = 0
        self.faults = 0

    def start(self) -> None:
        """Begin to connect; without end, until ``close``."""
        self._thread = threading.Thread(target=self._run, name="network", daemon=True)
        self._thread.start()

    def ensure_alive(self) -> None:
        """Start the thread again if something ended it that nothing should."""
        thread = self._thread
        if thread is not None and not thread.is_alive() and not self._closing.is_set():
            self.faults += 1
            self._last_error = "The network thread ended unexpectedly and was started again."
            self.start()

    def acknowledge(self, generation: int, mids: Sequence[int]) -> None:
        """Messages that are stored. Those of an earlier connection are dropped: the broker sends them again."""
        self._acknowledgements.append((generation, mids))
        self._nudge()

    def publish(self, key: object, topic: str, payload: bytes) -> None:
        """Hand out a message as soon as there is a connection; a later one of the same key takes its place."""
        with self._lock:
            self._outgoing[key] = (topic, payload)
        self._nudge()

    def renew(self, reason: str) -> None:
        """Make the connection anew, so that the broker sends again what was not acknowledged."""
        self._renew = reason
        self._nudge()

    def stop_reading(self) -> None:
        """Take in nothing more; what is stored can still be acknowledged."""
        self._reading = False
        self._nudge()

    def close(self, timeout_s: float) -> None:
        """Send what is still to be sent, and end."""
        self._closing.set()
        self._nudge()
        if self._thread is not None:
            self._thread.join(timeout_s)
            if self._thread.is_alive():
                return
        self._wake_read.close()
        self._wake_write.close()

    def state(self) -> LinkState:
        """How the link is now."""
        connection = self._connection
        ready = connection is not None and self._ready_in == connection.generation
        ends = self._ends_last_minute()
        return LinkState(
            connected=ready,
            since_ms=self._since_ms if ready else None,
            generation=self._generation,
            unacknowledged=connection.received - connection.acknowledged if connection is not None else 0,
            reconnects=max(self._made - 1, 0),
            ends_last_minute=ends,
            broker_dropped=self._dropped,
            problems=tuple(self._problems(connection, ends)),
            last_error=self._last_error,
        )

    # The thread -------------------------------------------------------------------------------------------------------

    def _run(self) -> None:
        wait = self._first_wait_s
        while not self._closing.is_set():
            began = time.monotonic()
            try:
                self._serve()
            except BrokerError as error:
                self._trouble = self._last_error = str(error)
            except Exception as error:  # noqa: BLE001 - whatever it is, the next connection may do
                self.faults += 1
                self._trouble = self._last_error = (
                    f"The connection was given up over a fault of the hub ({type(error).__name__}: {error}) and is "
                    "made anew; report it."
                )
            if time.monotonic() - began > SOUND_S:
                wait = self._first_wait_s
            self._turned = time.monotonic() + wait
            self._closing.wait(wait)
            wait = min(2 * wait, LONGEST_WAIT_S)

    def _serve(self) -> None:
        """One connection, until it ends."""
        self._generation += 1
        connection = Connection(
            self._access,
            self._root,
            self._generation,
            self._tray.put,
            self._now_ms,
            asks_dropped=self._asks_dropped,
        )
        orderly = False
        try:
            connection.open(self._wake_read.fileno())
            self._connection = connection
            while not self._closing.is_set():
                self._turn(connection)
            self._flush(connection)
            orderly = True
        except ConnectionLostError:
            if connection.accepted:
                self._ends.append(time.monotonic())
            raise
        finally:
            self._connection = None
            self._asks_dropped = connection.asks_dropped
            connection.close(orderly=orderly)

    def _turn(self, connection: Connection) -> None:
        self._turned = time.monotonic()
        read = self._reading and not self._tray.full
        connection.turn(TURN_S if read else PAUSED_TURN_S, read=read)
        if connection.ready and self._ready_in != connection.generation:
            self._made += 1
            self._since_ms = self._now_ms()
            self._trouble = ""
            self._ready_in = connection.generation
        if self._renew:
            reason, self._renew = self._renew, ""
            raise BrokerError(reason)
        self._note_dropped(connection.dropped)
        self._send(connection)

    def _send(self, connection: Connection) -> None:
        """Acknowledgements and messages that others handed in."""
        with suppress(BlockingIOError):
            self._wake_read.recv(4096)
        while self._acknowledgements:
            generation, mids = self._acknowledgements.popleft()
            if generation == connection.generation:
                connection.acknowledge(mids)
            else:
                self.stale += len(mids)
        if self._outgoing and connection.ready:
            self._publish_some(connection)
        connection.write()

    def _publish_some(self, connection: Connection) -> None:
        with self._lock:
            keys = list(self._outgoing)[:WRITES_A_TURN]
        for key in keys:
            with self._lock:
                topic, payload = self._outgoing.pop(key)
            if not connection.publish(topic, payload):
                with self._lock:
                    self._outgoing.setdefault(key, (topic, payload))
                return

    def _flush(self, connection: Connection) -> None:
        end = time.monotonic() + FLUSH_S
        with suppress(ConnectionLostError):
            self._send(connection)
            while (connection.wants_write or (self._outgoing and connection.ready)) and time.monotonic() < end:
                connection.turn(PAUSED_TURN_S, read=False)
                self._send(connection)

    def _nudge(self) -> None:
        # A full pipe has woken the thread already; a closed one belongs to a link that has ended.
        with suppress(BlockingIOError, OSError):
            self._wake_write.send(b"\0")

    # What is wrong ----------------------------------------------------------------------------------------------------

    def _note_dropped(self, count: int | None) -> None:
        if count is None:
            return
        if self._dropped_last is not None:
            # A broker that was started again counts from nothing.
            self._dropped += count - self._dropped_last if count >= self._dropped_last else count
        self._dropped_last = count

    def _ends_last_minute(self) -> int:
        since = time.monotonic() - MINUTE_S
        return sum(end > since for end in tuple(self._ends))

    def _problems(self, connection: Connection | None, ends: int) -> list[str]:
        found = []
        if self._trouble:
            found.append(self._trouble)
        elif connection is not None and connection.delivers is False:
            found.append(
                "The broker does not deliver to the hub: a test message that the hub sent to itself on "
                f"{connection.test_topic} never came back. Allow the user “{self._access.username}” to read and write "
                f"{self._root}/#."
            )
        if ends > RIVAL_ENDS:
            found.append(
                f"The connection was ended {ends} times in the last minute. Most often that is another program with "
                f"the client name “{self._access.client_id}”: give each hub its own broker.client_id."
            )
        if self._dropped:
            found.append(
                f"The broker has dropped {self._dropped} messages since the hub started, because a queue was full. "
                "Nodes that keep their readings until the receipt send them again; raise broker.queue_limit."
            )
        if time.monotonic() - self._turned > HANGS_S and not self._closing.is_set():
            found.append("The network thread hangs. Restart the hub and report it.")
        return found
