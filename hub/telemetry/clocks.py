"""Clocks of nodes: which device times can be believed, when a node restarted, and when a node without a clock spoke.

A node without a clock tells how often it has restarted (``boot``) and how long it has been up. Its readings are placed
by an interval in which each boot must have begun, drawn from three facts: nothing arrives before it was sent, boots
follow one another, and a node that is on the line delivers its newest message at once.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from math import ceil, floor
from typing import Final, Literal

import numpy as np

from hub.series import Floats
from hub.telemetry.gather import time_problem

Belief = Literal["plausible", "future", "too-old"]

# A 32-bit counter of milliseconds starts over after 49.71 days, which is no restart.
WRAP_S: Final = 2**32 / 1000
WRAP_TOLERANCE_S: Final = 60.0
# An uptime that jitters by less than this has not fallen.
FALL_S: Final = 1.0
# An ordinary crystal is within 100 parts in a million over the temperatures of an outdoor box: 8.64 s a day
# (arithmetic; the figure for crystals is common practice, no source).
DRIFT: Final = 100e-6
# How long the quickest message of a boot is under way at most (common practice, no source).
TRANSIT_MS: Final = 60_000


def classify(time_ms: int, received_ms: int) -> Belief:
    """Whether a device time can be true: not more than 5 min ahead of the hub's clock and not before 2020."""
    problem = time_problem(time_ms, received_ms)
    if problem is None:
        return "plausible"
    return "future" if problem[0] == "future" else "too-old"


def restarts(uptime_s: Floats, boot: Floats | None = None, elapsed_s: Floats | None = None) -> list[int]:
    """Indices of the readings that are the first after a restart, in the order the node sent them.

    Parameters
    ----------
    uptime_s
        Shape (n,), NaN where unknown. A fall is a restart, unless it is the wrap of a 32-bit millisecond counter.
    boot
        Shape (n,), NaN where unknown. Any change is a restart; where two readings tell the same boot, a fall of the
        uptime between them is none.
    elapsed_s
        Shape (n,), times of the readings by whatever clock; needed to recognise the wrap.
    """
    found = []
    last_up = last_boot = last_at = np.nan
    for i, up in enumerate(uptime_s.tolist()):
        now_boot = float(boot[i]) if boot is not None else np.nan
        at = float(elapsed_s[i]) if elapsed_s is not None else np.nan
        changed = now_boot != last_boot and not np.isnan(now_boot) and not np.isnan(last_boot)
        fell = up < last_up - FALL_S and now_boot != last_boot
        wrapped = abs(last_up + (at - last_at) - WRAP_S - up) <= WRAP_TOLERANCE_S
        if changed or (fell and not wrapped):
            found.append(i)
            last_up = last_boot = np.nan
        if not np.isnan(up):
            last_up, last_at = up, at
        if not np.isnan(now_boot):
            last_boot = now_boot
    return found


@dataclass(frozen=True, slots=True)
class Heard:
    """One message of a clockless node: its boot, its uptime when it was written, and when it arrived."""

    boot: int
    uptime_s: float
    received_ms: int


@dataclass(frozen=True, slots=True)
class Start:
    """When a boot began, as an interval in UTC milliseconds.

    ``earliest_ms`` is ``None`` where nothing bounds it: readings of that boot cannot be placed and wait for the
    keeper.
    """

    boot: int
    earliest_ms: int | None
    latest_ms: int


@dataclass(frozen=True, slots=True)
class Placed:
    """An instant and how far the truth may be from it on either side."""

    time_ms: int
    uncertainty_ms: int


def starts(heard: Iterable[Heard], *, transit_ms: int = TRANSIT_MS, drift: float = DRIFT) -> dict[int, Start]:
    """Intervals in which the boots of one node began.

    Parameters
    ----------
    heard
        Messages of one node in any order, repeats included.
    transit_ms
        How long the quickest message of a boot is under way at most. It bounds only boots surely heard from while
        they lasted: by a message that arrived before any later boot can have begun. What a later boot delivers of an
        earlier one bounds nothing from below.
    drift
        Largest relative error of the node's oscillator.

    Returns
    -------
    dict
        Boot to interval. Bounds that contradict each other, as from a node whose boot counter was reset, leave the
        boot without an earliest instant.
    """
    by_boot: dict[int, list[Heard]] = {}
    for message in heard:
        by_boot.setdefault(message.boot, []).append(message)
    order = sorted(by_boot)
    latest = _latest(by_boot, order, drift)
    quick = {
        boot: min(floor(m.received_ms - m.uptime_s * 1000 * (1 + drift)) for m in messages) - transit_ms
        for boot, messages in by_boot.items()
    }
    found: dict[int, Start] = {}
    floor_ms: int | None = None
    for position, boot in enumerate(order):
        bounds = [] if floor_ms is None else [floor_ms]
        next_ms = min((quick[later] for later in order[position + 1 :]), default=None)
        if next_ms is None or any(m.received_ms < next_ms for m in by_boot[boot]):
            bounds.append(quick[boot])
        earliest = max(bounds, default=None)
        if earliest is not None and earliest > latest[boot]:
            earliest = None
        found[boot] = Start(boot, earliest, latest[boot])
        if earliest is not None:
            floor_ms = earliest + floor(_longest(by_boot[boot]) * 1000 * (1 - drift))
    return found


def place(start: Start, uptime_s: float, *, drift: float = DRIFT) -> Placed | None:
    """The instant at ``uptime_s`` after a start, ``None`` where the start is not bounded."""
    if start.earliest_ms is None:
        return None
    low = floor(start.earliest_ms + uptime_s * 1000 * (1 - drift))
    high = ceil(start.latest_ms + uptime_s * 1000 * (1 + drift))
    middle = (low + high) // 2
    return Placed(middle, high - middle)


def _latest(by_boot: dict[int, list[Heard]], order: Sequence[int], drift: float) -> dict[int, int]:
    """No boot began later than its messages allow, nor later than the next boot began less its own length."""
    latest: dict[int, int] = {}
    ceiling: int | None = None
    for boot in reversed(order):
        messages = by_boot[boot]
        bound = min(ceil(m.received_ms - m.uptime_s * 1000 * (1 - drift)) for m in messages)
        if ceiling is not None:
            bound = min(bound, ceil(ceiling - _longest(messages) * 1000 * (1 - drift)))
        latest[boot] = ceiling = bound
    return latest


def _longest(messages: Sequence[Heard]) -> float:
    return max(m.uptime_s for m in messages)
