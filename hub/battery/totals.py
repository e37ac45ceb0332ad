"""Running totals a node keeps by itself: they carry the count over gaps in its readings.

``charge_in`` and ``charge_out`` only grow, until the node starts again at zero. A total that is smaller than before
is such a new start: at least what it shows now has flowed since.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from hub.series import Floats, Series

# The catalogue keeps six decimals of a total; less than that is rounding, not a new start.
RESOLUTION_AH = 2e-6
KEPT = ("pack_current", "pack_voltage", "charge_in", "charge_out")


@dataclass(frozen=True, slots=True)
class Last:
    """The newest reading with a current: what the next window needs of it, should a gap follow."""

    at_ms: int
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Bridge:
    """A gap that running totals reach over. What flowed counts where the gap ends: only then is it known."""

    start_ms: int
    end_ms: int
    in_ah: float | None
    out_ah: float | None
    voltage_v: float | None
    restarted: bool


def newest(series: Series, before_ms: int) -> Last | None:
    """The newest reading with a current before an instant."""
    usable = np.flatnonzero(np.isfinite(series.get("pack_current")) & (series.time_ms < before_ms))
    if usable.size == 0:
        return None
    k = int(usable[-1])
    values = {name: float(series.get(name)[k]) for name in KEPT}
    return Last(int(series.time_ms[k]), {name: value for name, value in values.items() if np.isfinite(value)})


def preceded(series: Series, last: Last | None) -> Series:
    """The series with an earlier window's newest reading in front of it, where it begins after that."""
    if last is None or (len(series) and last.at_ms >= series.time_ms[0]):
        return series
    names = set(series.columns) | set(last.values)
    columns = {name: np.concatenate(([last.values.get(name, np.nan)], series.get(name))) for name in sorted(names)}
    return Series(np.concatenate((np.array([last.at_ms], np.int64), series.time_ms)), columns)


def bridges(series: Series, start_ms: int, end_ms: int, gap_ms: int) -> list[Bridge]:
    """Gaps between readings with a current that end inside ``[start_ms, end_ms)`` and that totals reach over.

    Parameters
    ----------
    series
        Readings of the window and before it.
    gap_ms
        Two readings further apart than this have a gap between them.
    """
    usable = np.isfinite(series.get("pack_current"))
    t = series.time_ms[usable]
    gaps = np.flatnonzero((np.diff(t) > gap_ms) & (t[1:] >= start_ms) & (t[1:] < end_ms))
    if gaps.size == 0:
        return []
    into, out, volts = (series.get(name)[usable] for name in ("charge_in", "charge_out", "pack_voltage"))
    found = []
    for k in gaps.tolist():
        (in_ah, in_new), (out_ah, out_new) = _increment(into, k), _increment(out, k)
        if in_ah is not None or out_ah is not None:
            both = volts[k : k + 2][np.isfinite(volts[k : k + 2])]
            mean = float(both.mean()) if both.size else None
            found.append(Bridge(int(t[k]), int(t[k + 1]), in_ah, out_ah, mean, in_new or out_new))
    return found


def bridged_s(found: Sequence[Bridge], start_ms: int, end_ms: int) -> float:
    """Time of a window that bridges cover."""
    return sum(max(0, min(b.end_ms, end_ms) - max(b.start_ms, start_ms)) for b in found) / 1000.0


def _increment(column: Floats, k: int) -> tuple[float | None, bool]:
    before, after = float(column[k]), float(column[k + 1])
    if not np.isfinite(before) or not np.isfinite(after):
        return None, False
    if after < before - RESOLUTION_AH:
        return after, True
    return max(after - before, 0.0), False
