"""Messages between the network and the database: a bounded tray that one thread fills and another empties."""

import threading
import time
from collections import deque
from typing import Final, NamedTuple

BATCH: Final = 500
# Decoded, a message takes several times its bytes.
BATCH_BYTES: Final = 2 * 1024 * 1024
MOST_LETTERS: Final = 10_000
MOST_BYTES: Final = 64 * 1024 * 1024

# A broker sends only so many messages ahead of their acknowledgements (20 by default in mosquitto, 10 in some). When
# at least this many have come and no more follow for a moment, it waits for us: then waiting longer gains nothing.
STALLED: Final = 10
LOOK_S: Final = 0.02


class Letter(NamedTuple):
    """One message as it came from the broker.

    Attributes
    ----------
    topic, payload
        What came.
    mid, qos, retained
        How: packet identifier, quality of service, and whether the broker had kept it.
    generation
        The connection it came on; an acknowledgement belongs to that one alone.
    received_ms
        When, by the hub's clock.
    """

    topic: str
    payload: bytes
    mid: int
    qos: int
    retained: bool
    generation: int
    received_ms: int


class Tray:
    """Bounded by number and by bytes. ``put`` never waits and never refuses: whoever fills it looks at ``full`` first.

    ``received`` counts what was ever laid in; ``last_ms`` is the time of the newest.
    """

    def __init__(self, most_letters: int = MOST_LETTERS, most_bytes: int = MOST_BYTES) -> None:
        self._letters: deque[Letter] = deque()
        self._most_letters = most_letters
        self._most_bytes = most_bytes
        # Two counters with one writer each need no lock.
        self._bytes_in = 0
        self._bytes_out = 0
        self._some = threading.Event()
        self._many = threading.Event()
        self._closed = False
        self.received = 0
        self.last_ms: int | None = None

    def put(self, letter: Letter) -> None:
        """Lay a message in."""
        self.received += 1
        self.last_ms = letter.received_ms
        self._bytes_in += len(letter.payload)
        letters = self._letters
        letters.append(letter)
        if not self._some.is_set():
            self._some.set()
        if len(letters) >= BATCH and not self._many.is_set():
            self._many.set()

    @property
    def full(self) -> bool:
        """Whether no more should be laid in for now."""
        return len(self._letters) >= self._most_letters or self._bytes_in - self._bytes_out >= self._most_bytes

    def __len__(self) -> int:
        return len(self._letters)

    def close(self) -> None:
        """Wait for nothing any more: ``take`` hands out what is there, and then nothing."""
        self._closed = True
        self._some.set()
        self._many.set()

    def take(self, collect_s: float, idle_s: float = 1.0) -> list[Letter]:
        """Messages in the order in which they came, at most ``BATCH`` and about ``BATCH_BYTES``.

        Parameters
        ----------
        collect_s
            How long the first of them may wait for others.
        idle_s
            How long to wait for the first; nothing is returned after that.
        """
        if not self._letters and not self._closed:
            self._some.clear()
            if not self._letters and not self._some.wait(idle_s):
                return []
        self._collect(collect_s)
        taken: list[Letter] = []
        size = 0
        while self._letters and len(taken) < BATCH and size < BATCH_BYTES:
            letter = self._letters.popleft()
            size += len(letter.payload)
            taken.append(letter)
        self._bytes_out += size
        return taken

    def _collect(self, collect_s: float) -> None:
        end = time.monotonic() + collect_s
        before = -1
        while len(self._letters) < BATCH and not self._closed:
            left = end - time.monotonic()
            if left <= 0:
                return
            self._many.clear()
            if len(self._letters) >= BATCH or self._many.wait(min(left, LOOK_S)):
                return
            if before == len(self._letters) >= STALLED:
                return
            if self._bytes_in - self._bytes_out >= BATCH_BYTES:
                return
            before = len(self._letters)
