"""Running charge and energy at every reading: what sessions and balances take their differences from."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from hub.battery.charge import HOUR_S, gap_limit_ms, mean_product
from hub.battery.spec import NodeSpec
from hub.battery.totals import Bridge
from hub.series import Floats, Mask, Series, Times


@dataclass(frozen=True, slots=True)
class Flow:
    """Readings with a finite current, and what has flowed up to each of them.

    Attributes
    ----------
    series
        n readings.
    in_ah, out_ah, in_wh, unseen_s
        Shape (n,), never falling: charge in and out, energy in, and time that nothing covers, since the first reading.
    gap
        Shape (n,): a gap lies before the reading.
    """

    series: Series
    in_ah: Floats
    out_ah: Floats
    in_wh: Floats
    unseen_s: Floats
    gap: Mask

    @property
    def time_ms(self) -> Times:
        """Shape (n,)."""
        return self.series.time_ms

    def index(self, at_ms: int) -> int:
        """The first reading at or after an instant, or the last one."""
        return min(int(np.searchsorted(self.time_ms, at_ms)), len(self.series) - 1)


def flow(series: Series, node: NodeSpec, bridges: Sequence[Bridge] = ()) -> Flow:
    """Running sums over a series; gaps add nothing but what running totals say."""
    usable = np.isfinite(series.get("pack_current"))
    known = series if usable.all() else series.where(usable)
    t = known.time_ms
    length = np.diff(t)
    gap = length > gap_limit_ms(node.interval_s)
    hours = np.where(gap, 0.0, length / (1000.0 * HOUR_S))
    current = known.get("pack_current")
    first, last = current[:-1], current[1:]
    if node.integration == "hold":
        first = last
    up, down = _split(first, last)
    volts = known.get("pack_voltage")
    energy = _energy(first, last, up, volts[:-1], volts[1:]) * hours
    up, down = up * hours, down * hours
    unseen = np.where(gap, length / 1000.0, 0.0)
    for bridge in bridges:
        k = int(np.searchsorted(t, bridge.end_ms)) - 1
        if 0 <= k < length.size and t[k] == bridge.start_ms:
            up[k] = bridge.in_ah or 0.0
            down[k] = bridge.out_ah or 0.0
            energy[k] = up[k] * (bridge.voltage_v or 0.0)
            unseen[k] = 0.0
    return Flow(
        series=known,
        in_ah=_running(up),
        out_ah=_running(down),
        in_wh=_running(energy),
        unseen_s=_running(unseen),
        gap=np.concatenate((np.zeros(min(t.size, 1), np.bool_), gap)),
    )


def _split(first: Floats, last: Floats) -> tuple[Floats, Floats]:
    """Mean positive and mean negative current of intervals over which it changes linearly."""
    mean = 0.5 * (first + last)
    crossing = first * last < 0.0
    span = np.where(crossing, np.abs(first - last), 1.0)
    up = np.where(crossing, 0.5 * np.maximum(first, last) ** 2 / span, np.maximum(mean, 0.0))
    return up, up - mean


def _energy(first: Floats, last: Floats, up: Floats, a: Floats, b: Floats) -> Floats:
    """Mean power into the pack; where the current changes its sign, of its positive part at the mean voltage."""
    exact = np.where(up > 0.0, mean_product(first, last, a, b), 0.0)
    power = np.where(first * last < 0.0, up * 0.5 * (a + b), exact)
    return np.where(np.isfinite(power), power, 0.0)


def _running(parts: Floats) -> Floats:
    return np.concatenate((np.zeros(1), np.cumsum(parts)))
