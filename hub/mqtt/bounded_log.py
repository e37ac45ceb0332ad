"""What a child process says, kept in a file that cannot grow without end, and its last lines at hand."""

import threading
from collections import deque
from collections.abc import Iterable
from pathlib import Path
from typing import Final

LIMIT_BYTES: Final = 1_000_000
LAST_LINES: Final = 30
LONGEST_LINE: Final = 2_000


class BoundedLog:
    """A log of at most twice ``limit`` bytes: the file and one older one beside it, ``….1``."""

    def __init__(self, path: Path, limit: int = LIMIT_BYTES) -> None:
        self._path = path
        self._limit = limit
        self._last: deque[str] = deque(maxlen=LAST_LINES)
        self._lock = threading.Lock()

    def follow(self, lines: Iterable[bytes]) -> None:
        """Take lines until there are no more. A full disk loses lines of the log and nothing else."""
        for raw in lines:
            line = raw[:LONGEST_LINE].decode("utf-8", "replace").rstrip()
            with self._lock:
                self._last.append(line)
            try:
                self._write(line)
            except OSError:
                continue

    def last_lines(self) -> list[str]:
        """The newest lines."""
        with self._lock:
            return list(self._last)

    def forget(self) -> None:
        """Begin anew with the lines at hand; the file keeps what it has."""
        with self._lock:
            self._last.clear()

    def _write(self, line: str) -> None:
        if self._path.exists() and self._path.stat().st_size > self._limit:
            self._path.replace(self._path.with_name(f"{self._path.name}.1"))
        with self._path.open("a", encoding="utf-8") as file:
            file.write(f"{line}\n")
