"""Slowing down whoever guesses passwords: in memory, bounded, by name and by address."""

import threading
from collections import OrderedDict
from dataclasses import dataclass

# Common practice, no source: a person mistypes a few times; a machine does not stop. The wait doubles with each
# further failure.
FREE_TRIES_NAME_AND_ADDRESS = 5
FREE_TRIES_ADDRESS = 20
FREE_TRIES_NAME = 100
FIRST_WAIT_MS = 4_000
LONGEST_WAIT_MS = 15 * 60_000
FORGET_AFTER_MS = 24 * 3_600_000
MOST_KEYS = 10_000

Key = tuple[str, str, str]


@dataclass(slots=True)
class _Record:
    failures: int
    last_ms: int


class Throttle:
    """Failed logins of late. Oldest records make room for new ones, so that guessing cannot fill the memory."""

    def __init__(self) -> None:
        self._records: OrderedDict[Key, _Record] = OrderedDict()
        self._lock = threading.Lock()

    def wait_ms(self, name: str, address: str, now_ms: int) -> int:
        """How long this name at this address must wait before its next try; 0 for not at all."""
        with self._lock:
            return max(self._wait(key, free, now_ms) for key, free in _keys(name, address))

    def failed(self, name: str, address: str, now_ms: int) -> None:
        """Note a failed try."""
        with self._lock:
            for key, _ in _keys(name, address):
                record = self._records.pop(key, None)
                if record is None or now_ms - record.last_ms > FORGET_AFTER_MS:
                    record = _Record(0, now_ms)
                record.failures += 1
                record.last_ms = now_ms
                self._records[key] = record
            while len(self._records) > MOST_KEYS:
                self._records.popitem(last=False)

    def succeeded(self, name: str, address: str) -> None:
        """Forget the failures of this name at this address; those of the address alone stay."""
        with self._lock:
            self._records.pop(("both", name, address), None)

    def _wait(self, key: Key, free: int, now_ms: int) -> int:
        record = self._records.get(key)
        if record is None or record.failures < free:
            return 0
        wait = min(LONGEST_WAIT_MS, FIRST_WAIT_MS << min(record.failures - free, 20))
        # A clock that was set back must not lock anybody out for longer than the wait itself.
        return min(wait, max(0, record.last_ms + wait - now_ms))


def _keys(name: str, address: str) -> tuple[tuple[Key, int], ...]:
    return (
        (("both", name, address), FREE_TRIES_NAME_AND_ADDRESS),
        (("address", "", address), FREE_TRIES_ADDRESS),
        (("name", name, ""), FREE_TRIES_NAME),
    )
