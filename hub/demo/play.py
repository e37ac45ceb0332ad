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
from hub.demo.outbox import Outbox
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


def play(  # noqa: C901 - the order of events, told once from top to bottom
    host: str,
    port: int,
    root: str,
    credentials: Mapping[str, Login] | None,
    *,
    clock: Clock = time.time,
    history_days: int = scenario.HISTORY_DAYS,
    live: bool = True,
    stop: threading.Event | None = None,
    progress: Progress | None = None,
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
    clock
        Seconds since 1970. The history ends where the clock stands at the beginning.
    progress
        Called with readings taken so far and in all, while the history is made.
    speed
        Seconds that pass on ``clock`` in a second of waiting; above 1 only with a clock that runs as fast.
    settle_s
        How long to wait after the history for receipts still missing.

    Raises
    ------
    BrokerError
        A node cannot connect; the text says which, and what the broker said.
    """
    stop = stop or threading.Event()
    now = dt.datetime.fromtimestamp(clock(), dt.UTC)
    nodes = [scenario.build(name, now, history_days, seed) for name in credentials or scenario.NAMES]
    changed = threading.Event()
    links = [Link(node, root, (credentials or {}).get(node.name), changed) for node in nodes]
    readings = 0
    try:
        for link in links:
            link.open(host, port)
        _wait_for_connections(links, host, port, changed, stop)
        makers = {id(link): history(link.node, history_days) for link in links}
        total = len(links) * history_days * 1440
        while not stop.is_set() and (makers or _busy(links)):
            changed.clear()
            for link in links:
                maker = makers.get(id(link))
                if maker is not None and link.node.outbox.waiting < _AHEAD:
                    stretch = next(maker, None)
                    if stretch is None:
                        del makers[id(link)]
                    else:
                        link.node.post(stretch)
                        readings += stretch.time_ms.size
                        if progress is not None:
                            progress(readings, total)
            if not _pump(links, clock) and not any(link.node.outbox.waiting < _AHEAD for link in links if id(link) in makers):
                changed.wait(0.05)
        _settle(links, clock, changed, stop, settle_s)
        if live:
            readings += _live(links, clock, changed, stop, speed)
    finally:
        for link in links:
            link.close()
    return Played(
        readings,
        sum(link.sent for link in links),
        sum(link.repeats for link in links),
        sum(len(link.node.outbox) for link in links),
        tuple(failure for link in links for failure in link.failures),
    )
