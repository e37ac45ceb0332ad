"""A charge session as a curve: evenly spaced means, with the ohmic part of the voltage taken out.

Under clouds the terminal voltage falls whenever the current does. What falls with it within one step is taken out with
the session's own resistance; what is left is a property of the pack's level and temperature.
"""

from dataclasses import dataclass

import numpy as np

from hub.battery.flow import Flow
from hub.battery.spec import NodeSpec, PackSpec
from hub.series import Floats, Times

# A six-hundredth of the pack's charge passes in one step, but no step is longer than two minutes.
STEP_IT_S = 6.0
SHORTEST_S = 10.0
LONGEST_S = 120.0
# Apparent resistance of a cell times its capacity: 25 mohm at 1 kHz for 2 Ah, and 1.5 to 3 times that over some seconds
# (both from memory), as uncertain as it is large.
TYPICAL_OHM_AH = 0.10
# Currents that count are above a quarter of the usual one.
OF_NOTE = 0.25
LEAST_STEPS = 3


@dataclass(frozen=True, slots=True)
class Curve:
    """Means over steps of equal length; steps without a reading are left out.

    Attributes
    ----------
    time_ms
        Shape (n,): middle of each step.
    step_s
        Length of a step.
    current_a, power_w, temperature_c, air_c
        Shape (n,): means; NaN where there is no such reading.
    cell_v
        Shape (n,): voltage of a cell without the ohmic part.
    charge_ah
        Shape (n,): charge since the session's start, at the middle of the step.
    resistance_ohm
        Of the whole pack, from steps of current between neighbouring steps of the curve.
    noise_v
        Standard deviation of ``cell_v`` within a step, from how it bends between neighbours.
    """

    time_ms: Times
    step_s: float
    current_a: Floats
    power_w: Floats
    temperature_c: Floats
    air_c: Floats
    cell_v: Floats
    charge_ah: Floats
    resistance_ohm: float
    noise_v: float


def curve(flow: Flow, first: int, last: int, pack: PackSpec, node: NodeSpec) -> Curve:
    """The curve of the readings from index ``first`` to ``last`` inclusive."""
    part = slice(first, last + 1)
    t = flow.time_ms[part]
    current = flow.series.get("pack_current")[part]
    volts = flow.series.get("pack_voltage")[part]
    seconds = (t[-1] - t[0]) / 1000.0
    charge = flow.in_ah[part] - flow.in_ah[first]
    rate = max(float(charge[-1]), 1e-9) * 3600.0 / max(seconds, 1.0) / pack.rated_capacity_ah
    step_s = min(max(STEP_IT_S / rate, SHORTEST_S, node.interval_s), max(LONGEST_S, node.interval_s))
    which = ((t - t[0]) / (1000.0 * step_s)).astype(np.int64)
    means = _Means(which)
    mean_a, mean_v = means(current), means(volts)
    middle = t[0] + ((means.steps + 0.5) * step_s * 1000.0).astype(np.int64)
    resistance = step_resistance(mean_a, mean_v, pack)
    cell = (mean_v - resistance * mean_a) / pack.cells_in_series
    bends = np.diff(cell, 2)
    bends = bends[np.isfinite(bends)]
    return Curve(
        time_ms=middle,
        step_s=step_s,
        current_a=mean_a,
        power_w=means(np.maximum(current, 0.0) * volts),
        temperature_c=means(flow.series.get("pack_temperature")[part]),
        air_c=means(flow.series.get("air_temperature")[part]),
        cell_v=cell,
        charge_ah=means(charge),
        resistance_ohm=resistance,
        noise_v=1.4826 * float(np.median(np.abs(bends))) / np.sqrt(6.0) if bends.size else 0.0,
    )


def step_resistance(mean_a: Floats, mean_v: Floats, pack: PackSpec) -> float:
    """Apparent resistance of the pack from its answers to steps of current, in ohm.

    A straight line through second differences of neighbouring means, drawn again without the outliers: differences of
    differences know nothing of a drift that both share on a clear morning. Only currents of note count: below, the
    voltage is no straight line of the current. Where the current hardly steps nothing is known, so the fit starts from
    a typical cell with an uncertainty as large.
    """
    typical = TYPICAL_OHM_AH * pack.cells_in_series / pack.rated_capacity_ah
    known = mean_a[np.isfinite(mean_a)]
    if known.size < LEAST_STEPS:
        return typical
    strong = (mean_a > OF_NOTE * float(np.percentile(known, 90))) & np.isfinite(mean_v)
    use = strong[2:] & strong[1:-1] & strong[:-2]
    di, dv = np.diff(mean_a, 2)[use], np.diff(mean_v, 2)[use]
    if di.size == 0:
        return typical
    r = typical
    for _ in range(3):
        off = dv - r * di
        spread = 1.4826 * float(np.median(np.abs(off))) + 1e-4 * pack.cells_in_series
        keep = np.abs(off) < 3.0 * spread
        weight = (spread / typical) ** 2
        r = float((di[keep] @ dv[keep] + weight * typical) / (di[keep] @ di[keep] + weight))
    return min(max(r, 0.0), 5.0 * typical)


class _Means:
    """Means of readings that fall into the same step."""

    def __init__(self, which: Times) -> None:
        self.steps = np.unique(which)
        self._which = np.searchsorted(self.steps, which)
        self._count = np.bincount(self._which, minlength=self.steps.size).astype(np.float64)

    def __call__(self, values: Floats) -> Floats:
        usable = np.isfinite(values)
        if usable.all():
            mean: Floats = np.bincount(self._which, values, minlength=self.steps.size) / self._count
            return mean
        number = np.bincount(self._which[usable], minlength=self.steps.size).astype(np.float64)
        total = np.bincount(self._which[usable], values[usable], minlength=self.steps.size)
        return np.where(number > 0, total / np.maximum(number, 1.0), np.nan)
