"""Charge and energy over a stretch of time: the interval rule, its gaps and its uncertainty.

Two neighbouring readings no further apart than the gap limit make an interval; longer stretches are unobserved and
nothing is invented for them. An interval is cut at the ends of the window, so that the sums over adjoining windows are
the sum over the whole, and where the current changes sign, so that charge and discharge do not cancel.

Two rules for what happens inside an interval:

``trapezoid``
    Values change linearly from one reading to the next. Right for nodes: they sample, at a fixed interval, a current
    that wanders with the sun, and a sample says as much about the time before it as about the time after it. The error
    at a step that falls between two samples is as often positive as negative.
``hold``
    The later reading's value held since the earlier one. Right for bench logs whose rows close a stretch of constant
    current: a trapezoid would draw a ramp through every unsampled step (on a tester's own logs up to 8 % of a
    discharge, where ``hold`` is within 0.02 %). Where a tester holds the voltage and lets the current fade, the
    trapezoid is the better one there too.

Energy is the integral of voltage times current with both linear inside the interval (exact, Simpson's rule).
"""

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from hub.battery.spec import NodeSpec, Rule
from hub.series import Floats, Series, Times

HOUR_S = 3600.0
LONGEST_GAP_S = 900.0  # record interval of IEC 61724: at most 15 min
GAP_INTERVALS = 3.0
JITTER = 1.2


def gap_limit_ms(interval_s: float) -> int:
    """Longest distance of two readings that still belong together: 3 intervals, at most 15 min.

    A node slower than 12.5 min is allowed 1.2 times its own interval, or it would never be observed.
    """
    limit = min(GAP_INTERVALS * interval_s, max(LONGEST_GAP_S, JITTER * interval_s))
    return round(1000.0 * limit)


@dataclass(frozen=True, slots=True)
class Intervals:
    """Observed intervals inside a window.

    Attributes
    ----------
    seconds
        Shape (m,): length of each.
    first, last
        Shape (k, m): values of the k quantities at both ends.
    """

    seconds: Floats
    first: Floats
    last: Floats

    @property
    def observed_s(self) -> float:
        """Observed time in all."""
        return float(self.seconds.sum())


def intervals(
    time_ms: Times, columns: list[Floats], start_ms: int, end_ms: int, gap_ms: int, rule: Rule = "trapezoid"
) -> Intervals:
    """Intervals between neighbouring readings that have all of the quantities, cut to ``[start_ms, end_ms]``.

    Parameters
    ----------
    time_ms
        Shape (n,), strictly increasing.
    columns
        Quantities of shape (n,), NaN where missing.
    start_ms, end_ms
        The window; readings outside it only help to cut.
    gap_ms
        Longest interval.
    rule
        See the module's text.
    """
    usable = np.isfinite(columns[0])
    for column in columns[1:]:
        usable &= np.isfinite(column)
    if not usable.all():
        time_ms, columns = time_ms[usable], [column[usable] for column in columns]
    # The readings inside, and the one on each side of them.
    inside = np.searchsorted(time_ms, [start_ms, end_ms])
    near = slice(max(int(inside[0]) - 1, 0), int(inside[1]) + 1)
    t = time_ms[near]
    values = np.array([column[near] for column in columns], dtype=np.float64)
    if t.size == 0:
        return Intervals(np.empty(0), np.empty((len(columns), 0)), np.empty((len(columns), 0)))
    length = np.diff(t)
    first, last = values[:, :-1], values[:, 1:]
    if rule == "hold":
        first = last
    opened = np.maximum(start_ms - t[:-1], 0)
    closed = np.minimum(end_ms - t[:-1], length)
    keep = (length <= gap_ms) & (closed > opened)
    opened, closed, length = opened[keep], closed[keep], length[keep]
    first, last = first[:, keep], last[:, keep]
    cut = np.flatnonzero((opened > 0) | (closed < length))
    if cut.size:
        change = last[:, cut] - first[:, cut]
        begin = first[:, cut] + change * (opened[cut] / length[cut])
        last = last.copy()
        last[:, cut] = first[:, cut] + change * (closed[cut] / length[cut])
        first = first.copy()
        first[:, cut] = begin
    return Intervals((closed - opened) / 1000.0, first, last)


@dataclass(frozen=True, slots=True)
class Signed:
    """An integral over time, its positive and its negative part apart, both as positive numbers.

    ``rising_s`` and ``falling_s`` are the times over which the integrand was positive and negative.
    """

    positive: float
    negative: float
    rising_s: float
    falling_s: float


def signed(seconds: Floats, first: Floats, last: Floats, factor: tuple[Floats, Floats] | None = None) -> Signed:
    """Integral of a quantity that is linear in each interval, times a second one where ``factor`` is given.

    The sign is that of the first quantity: energy goes where its current goes.
    """
    crossing = np.flatnonzero(first * last < 0.0)
    if crossing.size:
        # Cut these intervals where the quantity passes through zero.
        a, b = first[crossing], last[crossing]
        share = a / (a - b)
        zero = np.zeros(crossing.size)
        if factor is not None:
            at = factor[0][crossing] + share * (factor[1][crossing] - factor[0][crossing])
            factor = (
                np.concatenate((factor[0], at)),
                np.concatenate((_put(factor[1], crossing, at), factor[1][crossing])),
            )
        whole = seconds[crossing]
        seconds = np.concatenate((_put(seconds, crossing, share * whole), (1.0 - share) * whole))
        first, last = np.concatenate((first, zero)), np.concatenate((_put(last, crossing, zero), b))
    sign = first + last
    amount = (0.5 * sign if factor is None else mean_product(first, last, *factor)) * seconds
    up, down = sign > 0.0, sign < 0.0
    return Signed(
        positive=float(amount[up].sum()),
        negative=0.0 - float(amount[down].sum()),
        rising_s=float(seconds[up].sum()),
        falling_s=float(seconds[down].sum()),
    )


def _put(values: Floats, where: npt.NDArray[np.intp], new: Floats) -> Floats:
    changed = values.copy()
    changed[where] = new
    return changed


def mean_product(first: Floats, last: Floats, a: Floats, b: Floats) -> Floats:
    """Mean over an interval of the product of two linear quantities (Simpson's rule, exact)."""
    mean: Floats = (first * (2.0 * a + b) + last * (a + 2.0 * b)) / 6.0
    return mean


@dataclass(frozen=True, slots=True)
class Count:
    """Charge and energy of a window.

    ``None`` where nothing was observed. ``charging_s`` and ``discharging_s`` are the times with current in either
    direction, ``sampling_ah`` the standard uncertainty from changes of current between readings.
    """

    charge_ah: float | None
    discharge_ah: float | None
    charge_wh: float | None
    discharge_wh: float | None
    observed_s: float
    charging_s: float
    discharging_s: float
    sampling_ah: float


def count(series: Series, start_ms: int, end_ms: int, node: NodeSpec) -> Count:
    """Charge and energy into and out of the pack, from ``pack_current`` in A and ``pack_voltage`` in V."""
    gap = gap_limit_ms(node.interval_s)
    current, volts = series.get("pack_current"), series.get("pack_voltage")
    seen = intervals(series.time_ms, [current], start_ms, end_ms, gap, node.integration)
    if not seen.observed_s:
        return Count(None, None, None, None, 0.0, 0.0, 0.0, 0.0)
    ah = signed(seen.seconds, seen.first[0], seen.last[0])
    both = intervals(series.time_ms, [current, volts], start_ms, end_ms, gap, node.integration)
    wh = signed(both.seconds, both.first[0], both.last[0], (both.first[1], both.last[1])) if both.observed_s else None
    # A step of dI somewhere inside an interval is misplaced by the trapezoid by up to half of dI * dt, evenly spread.
    steps = (seen.last[0] - seen.first[0]) * seen.seconds
    return Count(
        charge_ah=ah.positive / HOUR_S,
        discharge_ah=ah.negative / HOUR_S,
        charge_wh=wh.positive / HOUR_S if wh else None,
        discharge_wh=wh.negative / HOUR_S if wh else None,
        observed_s=seen.observed_s,
        charging_s=ah.rising_s,
        discharging_s=ah.falling_s,
        sampling_ah=math.sqrt(float(steps @ steps) / 12.0) / HOUR_S,
    )


def uncertainty_ah(amount_ah: float, flowing_s: float, unseen_s: float, counted: Count, node: NodeSpec) -> float:
    """Standard uncertainty of a charge or a discharge, combined in the manner of JCGM 100:2008, 5.1.2.

    Parameters
    ----------
    amount_ah, flowing_s
        The charge, and the time over which it flowed.
    unseen_s
        Time of the window that neither readings nor running totals cover: there the current lay between nothing and
        what it was on average while it flowed, evenly spread.
    counted
        For what sampling left uncertain.
    node
        Gain and offset of its sensor.
    """
    mean_a = amount_ah * HOUR_S / flowing_s if flowing_s else 0.0
    return math.hypot(
        node.current_gain_error * amount_ah,
        node.current_offset_a * flowing_s / HOUR_S,
        counted.sampling_ah,
        mean_a * unseen_s / HOUR_S / math.sqrt(3.0),
    )


def observed_s(series: Series, start_ms: int, end_ms: int, node: NodeSpec) -> float:
    """Time of a window that lies between neighbouring readings of any kind, in seconds."""
    gap = gap_limit_ms(node.interval_s)
    return intervals(series.time_ms, [np.zeros(len(series))], start_ms, end_ms, gap).observed_s


def load_wh(series: Series, start_ms: int, end_ms: int, node: NodeSpec) -> float | None:
    """Energy the load took, in Wh: from its own sensor, or from the assumed load of a node that does not see it.

    ``None`` where neither is there, or no voltage.
    """
    load = series.get("load_current")
    if not np.isfinite(load).any():
        if node.current_sensing == "net" or node.standing_load_a <= 0.0:
            return None
        load = np.where(np.isfinite(series.get("pack_current")), node.standing_load_a, np.nan)
    gap = gap_limit_ms(node.interval_s)
    seen = intervals(series.time_ms, [load, series.get("pack_voltage")], start_ms, end_ms, gap, node.integration)
    if not seen.observed_s:
        return None
    taken = signed(seen.seconds, seen.first[0], seen.last[0], (seen.first[1], seen.last[1]))
    return (taken.positive - taken.negative) / HOUR_S
