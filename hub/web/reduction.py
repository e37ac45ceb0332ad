"""Fewer points that draw the same picture: the least and the greatest value of each column of the paper.

Nothing a pen would have drawn is lost: the extremes of every stretch are kept, and a stretch without readings stays
empty.
"""

from dataclasses import dataclass

import numpy as np

from hub.series import Floats, Times


@dataclass(frozen=True, slots=True)
class Binned:
    """Extremes of a quantity in equal stretches of time.

    Attributes
    ----------
    start_ms, step_ms
        Begin of the first stretch, and the length of each.
    low, high
        Shape (n,): least and greatest value, NaN where the stretch has none.
    """

    start_ms: int
    step_ms: int
    low: Floats
    high: Floats

    def __len__(self) -> int:
        return int(self.low.size)

    @property
    def end_ms(self) -> int:
        """End of the last stretch."""
        return self.start_ms + self.step_ms * len(self)

    @property
    def known(self) -> bool:
        """Whether there is any value."""
        return bool(np.isfinite(self.low).any())

    def extremes(self) -> tuple[float, float] | None:
        """Least and greatest value of all."""
        return (float(np.nanmin(self.low)), float(np.nanmax(self.high))) if self.known else None

    def folded(self, many: int) -> "Binned":
        """Stretches ``many`` times as long; the last one is filled up with nothing."""
        if many <= 1:
            return self
        spare = -len(self) % many
        low = np.concatenate([self.low, np.full(spare, np.nan)]).reshape(-1, many)
        high = np.concatenate([self.high, np.full(spare, np.nan)]).reshape(-1, many)
        return Binned(self.start_ms, self.step_ms * many, np.fmin.reduce(low, axis=1), np.fmax.reduce(high, axis=1))

    def scaled(self, divisor: Floats) -> "Binned":
        """Each stretch divided by its own divisor (NaN gives nothing)."""
        return Binned(self.start_ms, self.step_ms, self.low / divisor, self.high / divisor)


def binned(time_ms: Times, values: Floats, start_ms: int, step_ms: int, many: int) -> Binned:
    """Extremes of values in ``many`` stretches of ``step_ms`` from ``start_ms``; what lies outside is left out.

    Parameters
    ----------
    time_ms
        Shape (k,), UTC milliseconds in order.
    values
        Shape (k,); NaN is no value.
    """
    low, high = np.full(many, np.nan), np.full(many, np.nan)
    which = (time_ms - start_ms) // step_ms
    usable = np.isfinite(values) & (which >= 0) & (which < many)
    which, values = which[usable], values[usable]
    if which.size:
        firsts = np.flatnonzero(np.append(True, np.diff(which) > 0))
        low[which[firsts]] = np.minimum.reduceat(values, firsts)
        high[which[firsts]] = np.maximum.reduceat(values, firsts)
    return Binned(start_ms, step_ms, low, high)


def joined(binned_: Binned, most_apart: int) -> list[tuple[int, int]]:
    """Runs of stretches that one stroke may draw: first and last index of each.

    Parameters
    ----------
    most_apart
        How many stretches on a value may lie and still be joined; further apart there is a gap.
    """
    at = np.flatnonzero(np.isfinite(binned_.low))
    if not at.size:
        return []
    breaks = np.flatnonzero(np.diff(at) > most_apart)
    firsts = at[np.append(0, breaks + 1)]
    lasts = at[np.append(breaks, at.size - 1)]
    return list(zip(firsts.tolist(), lasts.tolist(), strict=True))
