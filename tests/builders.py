"""Readings for tests, with one keyword for what a test is about."""

from dataclasses import replace
from itertools import pairwise

import numpy as np

from hub.battery.day import Carried, DayResult, analyse
from hub.battery.spec import NodeSpec, PackSpec, Window
from hub.series import Series

START_MS = 1_780_272_000_000  # 2026-06-01T00:00:00Z
HOUR_MS = 3_600_000
DAY_MS = 24 * HOUR_MS


def a_node(**changes) -> NodeSpec:
    """A node that reads once a minute and sees all current of its pack."""
    return replace(NodeSpec("ridge-east", 60.0), **changes)


def a_pack(**changes) -> PackSpec:
    """Four cells of 2 Ah in series."""
    return replace(PackSpec("R-07", 4, 1, 2.0), **changes)


def readings(time_s, **columns) -> Series:
    """Readings at seconds after ``START_MS``; a column may be one value for all, or a function of the seconds."""
    t = np.asarray(time_s, dtype=np.float64)
    made = {}
    for name, values in columns.items():
        made[name] = np.broadcast_to(values(t) if callable(values) else np.asarray(values, np.float64), t.shape).copy()
    return Series(START_MS + np.round(1000.0 * t).astype(np.int64), made)


def every(interval_s, hours, **columns) -> Series:
    """Readings at a fixed interval."""
    return readings(np.arange(0.0, 3600.0 * hours + 0.5 * interval_s, interval_s), **columns)


def a_window(start_h=0.0, end_h=24.0, **changes) -> Window:
    """A window in hours after ``START_MS``."""
    return replace(Window(START_MS + round(HOUR_MS * start_h), START_MS + round(HOUR_MS * end_h)), **changes)


def fold(series, node, pack, edges_ms, carried=None) -> list[DayResult]:
    """Figures of adjoining windows, each with no more context than the contract promises."""
    carried = Carried() if carried is None else carried
    results = []
    for start_ms, end_ms in pairwise(edges_ms):
        from_ms = min(start_ms - HOUR_MS, start_ms if carried.open_since_ms is None else carried.open_since_ms)
        given = series.between(from_ms, end_ms + 15 * 60_000)
        results.append(analyse(given, Window(start_ms, end_ms), node, pack, carried))
        carried = results[-1].carried
    return results


def days(series, node, pack, number, carried=None) -> list[DayResult]:
    """Figures of whole days from ``START_MS``."""
    return fold(series, node, pack, [START_MS + k * DAY_MS for k in range(number + 1)], carried)
