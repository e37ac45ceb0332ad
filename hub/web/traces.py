"""Reduced traces of nodes by UTC day, remembered until their readings change."""

import threading
from collections import OrderedDict
from collections.abc import Callable, Hashable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from hub.series import Series
from hub.web.reduction import Binned, binned
from hub.web.words import DAY_MS, HOUR_MS

NAMES = ("pack_voltage", "pack_current", "pack_temperature", "air_temperature")
STEP_MS = 15 * 60_000
A_DAY = DAY_MS // STEP_MS
# Screening judges a value by what lies around it, so a change nearby may move a day's trace.
SURROUNDINGS_MS = 3 * HOUR_MS
# About 3 kB each.
MOST_DAYS = 8192

Revision = Callable[[int, int], int]
Read = Callable[[int, int], Series]


@dataclass(frozen=True, slots=True)
class _Kept:
    revision: int
    conditions: Hashable
    extremes: npt.NDArray[np.float32]  # shape (len(NAMES), 2, A_DAY)


class Traces:
    """The memory. It may be asked from several threads."""

    def __init__(self) -> None:
        self._days: OrderedDict[tuple[int, int], _Kept] = OrderedDict()
        self._spans: dict[int, tuple[int, int, int, Hashable]] = {}
        self._lock = threading.Lock()

    def get(
        self, node_id: int, start_ms: int, end_ms: int, *, revision: Revision, read: Read, conditions: Hashable = None
    ) -> dict[str, Binned]:
        """Traces of a node in columns of 15 min that cover a span.

        Parameters
        ----------
        revision
            Tells the newest change of the node's readings in a stretch.
        read
            Reads a stretch, calibrated and screened.
        conditions
            What else the readings' use depends on (calibrations); a change of it makes what is remembered void.
        """
        first_day, last_day = start_ms // DAY_MS, (end_ms - 1) // DAY_MS
        newest = revision(first_day * DAY_MS - SURROUNDINGS_MS, (last_day + 1) * DAY_MS + SURROUNDINGS_MS)
        asked = (first_day, last_day, newest, conditions)
        unchanged = self._spans.get(node_id) == asked
        days = [
            self._day(node_id, day, revision, read, conditions, unchanged=unchanged)
            for day in range(first_day, last_day + 1)
        ]
        self._spans[node_id] = asked
        whole = np.concatenate(days, axis=2).astype(np.float64)
        first = start_ms // STEP_MS - first_day * A_DAY
        last = -(-end_ms // STEP_MS) - first_day * A_DAY
        begin = (first_day * A_DAY + first) * STEP_MS
        return {
            name: Binned(begin, STEP_MS, whole[i, 0, first:last], whole[i, 1, first:last])
            for i, name in enumerate(NAMES)
        }

    def _day(
        self, node_id: int, day: int, revision: Revision, read: Read, conditions: Hashable, *, unchanged: bool
    ) -> npt.NDArray[np.float32]:
        key = (node_id, day)
        start, end = day * DAY_MS, (day + 1) * DAY_MS
        with self._lock:
            kept = self._days.get(key)
            if kept is not None:
                self._days.move_to_end(key)
        if kept is not None and unchanged:
            return kept.extremes
        newest = revision(start - SURROUNDINGS_MS, end + SURROUNDINGS_MS)
        if kept is not None and kept.revision == newest and kept.conditions == conditions:
            return kept.extremes
        extremes = _extremes(read(start, end), start) if newest else _nothing()
        with self._lock:
            self._days[key] = _Kept(newest, conditions, extremes)
            while len(self._days) > MOST_DAYS:
                self._days.popitem(last=False)
        return extremes


def _nothing() -> npt.NDArray[np.float32]:
    return np.full((len(NAMES), 2, A_DAY), np.nan, np.float32)


def _extremes(series: Series, start_ms: int) -> npt.NDArray[np.float32]:
    found = _nothing()
    for i, name in enumerate(NAMES):
        if name in series.columns:
            trace = binned(series.time_ms, series.columns[name], start_ms, STEP_MS, A_DAY)
            found[i, 0], found[i, 1] = trace.low, trace.high
    return found
