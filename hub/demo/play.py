"""Play the scenario: the whole history at once, then live readings, from one client a node, as real nodes would."""

import csv
import datetime as dt
import threading
import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np

from hub.demo import scenario
from hub.demo.link import Link
from hub.demo.node import Node, Stretch
from hub.errors import BrokerError
from hub.quantities import BY_NAME

LIVE_S: Final = 10
CONNECT_S: Final = 15.0
# A node makes more history only while its outbox is short: memory stays small and nodes stay side by side.
_AHEAD: Final = 48

Login = tuple[str, str]
Clock = Callable[[], float]
Progress = Callable[[int, int], None]


@dataclass(frozen=True, slots=True)
class Played:
    """What came of it: readings taken, messages sent and among them repeats, and messages still without a receipt."""

    readings: int
    messages: int
    repeats: int
    unreceipted: int
    failures: tuple[str, ...]


def play(
    host: str,
    port: int,
    root: str,
    credentials: Mapping[str, Login] | None,
    *,
    now: dt.datetime | None = None,
    clock: Clock = time.time,
    history_days: int = scenario.HISTORY_DAYS,
    live: bool = True,
    stop: threading.Event | None = None,
    progress: Progress | None = None,
    told_history: Callable[[], None] | None = None,
    speed: float = 1.0,
    seed: int = scenario.SEED,
    settle_s: float = 60.0,
) -> Played:
    """Publish the history of all nodes, then, if ``live``, a reading of each every ten seconds until ``stop``.

    Parameters
    ----------
    host, port, root
        The broker and the first topic level.
    credentials
        Node name to user name and secret; only these nodes play. ``None``: all of them, as anonymous users.
    now
        Where the history ends, for a scenario that was described before; else where the clock stands at the beginning.
    clock
        Seconds since 1970.
    progress
        Called with readings taken so far and in all, while the history is made.
    told_history
        Called once the history is sent.
    speed
        Seconds that pass on ``clock`` in a second of waiting; above 1 only with a clock that runs as fast.
    settle_s
        Without ``live``: how long to wait for receipts still missing.

    Raises
    ------
    BrokerError
        A node cannot connect; the text says which, and what the broker said.
    UsageError
        ``credentials`` names a node that the scenario does not have.
    """
    now = now or dt.datetime.fromtimestamp(clock(), dt.UTC)
    nodes = [scenario.build(name, now, history_days, seed) for name in credentials or scenario.NAMES]
    player = _Player(nodes, root, credentials or {}, clock, stop or threading.Event())
    try:
        player.connect(host, port)
        player.history(history_days, progress)
        if told_history is not None:
            told_history()
        if live:
            player.live(speed)
        else:
            player.settle(settle_s)
    finally:
        player.close()
    return player.played()


class _Player:
    """Nodes with their links, driven from one thread."""

    def __init__(
        self, nodes: list[Node], root: str, logins: Mapping[str, Login], clock: Clock, stop: threading.Event
    ) -> None:
        self._changed = threading.Event()
        self._links = [Link(node, root, logins.get(node.name), self._changed) for node in nodes]
        self._clock, self._stop = clock, stop
        self._readings = 0

    def connect(self, host: str, port: int) -> None:
        for link in self._links:
            link.open(host, port)
        until = time.monotonic() + CONNECT_S
        while not self._stop.is_set():
            self._changed.clear()
            for link in self._links:
                if link.refused is not None:
                    raise BrokerError(
                        f"The broker at {host}:{port} refused the node “{link.node.name}”: {link.refused}. "
                        "Give it a credential of its own and try again."
                    )
            missing = [link.node.name for link in self._links if not link.connected]
            if not missing:
                return
            if time.monotonic() > until:
                raise BrokerError(
                    f"There is no answer from a broker at {host}:{port} for {', '.join(missing)}. "
                    "See that it runs and listens there."
                )
            self._changed.wait(0.2)

    def history(self, days: int, progress: Progress | None) -> None:
        """Make and send the history, node beside node."""
        making = [(link, history(link.node, days)) for link in self._links]
        total = len(making) * days * 1440
        while not self._stop.is_set() and (making or any(link.node.outbox.waiting for link in self._links)):
            self._changed.clear()
            hungry = [m for m in making if m[0].node.outbox.waiting < _AHEAD]
            for link, stretches in hungry:
                stretch = next(stretches, None)
                if stretch is None:
                    making.remove((link, stretches))
                    continue
                self._take(link.node, stretch)
                if progress is not None:
                    progress(self._readings, total)
            if not self._pump() and not hungry:
                self._changed.wait(0.05)

    def live(self, speed: float) -> None:
        """A reading of every node every ten seconds until told to stop."""
        due_s = max(link.node.plant.time_ms for link in self._links) / 1000.0 + LIVE_S
        while not self._stop.is_set():
            self._changed.clear()
            now_s = self._clock()
            if now_s >= due_s:
                # After a busy time several are due: a node would not skip them.
                times = np.arange(due_s, now_s + 1e-6, LIVE_S) * 1000.0
                for link in self._links:
                    for stretch in link.node.run(times.astype(np.int64)):
                        self._take(link.node, stretch)
                due_s += LIVE_S * times.size
            if not self._pump():
                self._changed.wait(min(0.2, max(0.0, due_s - self._clock()) / speed))

    def settle(self, wait_s: float) -> None:
        """Wait for the last receipts."""
        until = time.monotonic() + wait_s
        while not self._stop.is_set() and time.monotonic() < until and any(len(k.node.outbox) for k in self._links):
            self._changed.clear()
            if not self._pump():
                self._changed.wait(0.05)

    def close(self) -> None:
        for link in self._links:
            link.close()

    def played(self) -> Played:
        return Played(
            self._readings,
            sum(link.sent for link in self._links),
            sum(link.repeats for link in self._links),
            sum(len(link.node.outbox) for link in self._links),
            tuple(failure for link in self._links for failure in link.failures),
        )

    def _take(self, node: Node, stretch: Stretch) -> None:
        node.post(stretch)
        self._readings += stretch.time_ms.size

    def _pump(self) -> int:
        now_ms = round(self._clock() * 1000.0)
        return sum(link.pump(now_ms) for link in self._links)


def history(node: Node, days: int) -> Iterator[Stretch]:
    """A node's readings every minute for ``days`` days from where it stands, a day at a time."""
    for _ in range(days):
        begin = node.plant.time_ms
        yield from node.run(begin + np.arange(1, 1441, dtype=np.int64) * (scenario.INTERVAL_S * 1000))


def write_log(
    path: Path,
    name: str,
    start: dt.datetime,
    end: dt.datetime,
    *,
    now: dt.datetime,
    history_days: int = scenario.HISTORY_DAYS,
    seed: int = scenario.SEED,
) -> int:
    """The memory card of a node: its readings from ``start`` to before ``end`` as CSV (RFC 4180); how many lines.

    The readings are those that ``play`` publishes for the same ``now``, days and seed, under the node's own clock.
    A node writes nothing while it has no clock.

    Raises
    ------
    UsageError
        There is no such node, or a time has no zone.
    """
    node = scenario.build(name, now, history_days, seed)
    low_ms, high_ms = (round(t.timestamp() * 1000.0) for t in (start, end))
    lines, headed = 0, False
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        for stretch in history(node, history_days):
            names = list(stretch.columns)
            if not headed:
                writer.writerow(["time", *(BY_NAME[n].column for n in names)])
                headed = True
            inside = (stretch.time_ms >= low_ms) & (stretch.time_ms < high_ms) & stretch.has_clock
            rows = zip(*(stretch.columns[n][inside].tolist() for n in names), strict=True)
            for stamp_s, row in zip(stretch.stamp_s[inside].tolist(), rows, strict=True):
                writer.writerow([f"{dt.datetime.fromtimestamp(stamp_s, dt.UTC):%Y-%m-%dT%H:%M:%SZ}", *row])
                lines += 1
            if node.plant.time_ms >= high_ms:
                break
    return lines
