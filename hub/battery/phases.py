"""Phases: unbroken stretches of charge, discharge or rest.

Thresholds are rates, so that they mean the same for a small and a large pack, with hysteresis, so that a current near
a threshold does not chop a phase. They never lie inside the sensor's own offset.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from hub.battery.charge import gap_limit_ms
from hub.battery.spec import NodeSpec, PackSpec
from hub.series import Floats, Mask, Series

Kind = Literal["charge", "discharge", "rest"]
KINDS: dict[int, Kind] = {1: "charge", 0: "rest", -1: "discharge"}
States = npt.NDArray[np.int8]

# A hundredth of It is the weakest current worth a name: a fifth of a maker's trickle range of 0.05 to 0.1C.
ENTER_IT = 0.01
LEAVE_IT = 0.005
OFFSETS = 3.0


@dataclass(frozen=True, slots=True)
class Phase:
    """One phase, from its first reading to the first reading of the next (or to its last one before a gap)."""

    kind: Kind
    start_ms: int
    end_ms: int


def thresholds_a(pack: PackSpec, node: NodeSpec) -> tuple[float, float]:
    """Current at which a phase of charge or discharge begins, and the smaller one at which it ends."""
    enter = max(ENTER_IT * pack.rated_capacity_ah, OFFSETS * node.current_offset_a)
    return enter, enter * LEAVE_IT / ENTER_IT


def states(current: Floats, enter_a: float, leave_a: float) -> States:
    """1 in charge, -1 in discharge, 0 at rest, for each of the finite currents of shape (n,)."""
    charging = _latched(current >= enter_a, current < leave_a)
    discharging = _latched(current <= -enter_a, current > -leave_a)
    return charging.astype(np.int8) - discharging.astype(np.int8)


def phases(series: Series, pack: PackSpec, node: NodeSpec) -> list[Phase]:
    """All phases of a series in order of time; a gap ends a phase."""
    known = series.where(np.isfinite(series.get("pack_current")))
    if len(known) == 0:
        return []
    t = known.time_ms
    state = states(known.get("pack_current"), *thresholds_a(pack, node))
    gap = np.diff(t) > gap_limit_ms(node.interval_s)
    begins = np.flatnonzero(np.concatenate(([True], (np.diff(state) != 0) | gap)))
    after = np.append(begins[1:], t.size)
    found = []
    for a, b in zip(begins.tolist(), after.tolist(), strict=True):
        joined = b < t.size and not gap[b - 1]
        found.append(Phase(KINDS[int(state[a])], int(t[a]), int(t[b if joined else b - 1])))
    return found


def _latched(on: Mask, off: Mask) -> Mask:
    """True from an ``on`` until the next ``off``."""
    event = np.where(on, 1, np.where(off, -1, 0))
    index = np.maximum.accumulate(np.where(event != 0, np.arange(event.size), -1))
    latched: Mask = (index >= 0) & (event[index] == 1)
    return latched
