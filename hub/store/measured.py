"""Readings as they are to be used: screened, then calibrated. What was sent stays as it is."""

from collections.abc import Sequence

import numpy as np
from sqlalchemy import Connection

from hub.series import Series
from hub.store import readings
from hub.store.inventory import Calibration
from hub.telemetry.screening import Finding, Screened, screen

# Screening judges a value by its surroundings; this much of them is read on each side.
SURROUNDINGS_MS = 3 * readings.HOUR_MS


def read(
    connection: Connection,
    node_id: int,
    start_ms: int,
    end_ms: int,
    calibrations: Sequence[Calibration] = (),
    full_scale_current_a: float | None = None,
) -> Screened:
    """A node's readings of a stretch, with what screening found and kept out.

    Screening comes first: a sensor's codes and the end of its range are known in what it said, not in what a
    calibration makes of it.
    """
    wide = readings.read(connection, node_id, start_ms - SURROUNDINGS_MS, end_ms + SURROUNDINGS_MS)
    found = _cut(screen(wide, full_scale_current_a=full_scale_current_a), start_ms, end_ms)
    return Screened(calibrated(found.series, calibrations), found.findings, found.saturated)


def calibrated(series: Series, calibrations: Sequence[Calibration]) -> Series:
    """Values after the calibrations in force at their instants."""
    columns = dict(series.columns)
    for quantity in sorted({c.quantity for c in calibrations} & set(columns)):
        steps = sorted((c for c in calibrations if c.quantity == quantity), key=lambda c: c.start_ms)
        starts = np.array([c.start_ms for c in steps], np.int64)
        which = np.searchsorted(starts, series.time_ms, side="right")
        gain = np.array([1.0, *(c.gain for c in steps)])
        offset = np.array([0.0, *(c.offset for c in steps)])
        columns[quantity] = columns[quantity] * gain[which] + offset[which]
    return Series(series.time_ms, columns)


def _cut(found: Screened, start_ms: int, end_ms: int) -> Screened:
    a, b = (int(i) for i in np.searchsorted(found.series.time_ms, [start_ms, end_ms]))
    findings = tuple(
        Finding(f.quantity, f.reason, inside)
        for f in found.findings
        if (inside := f.time_ms[(f.time_ms >= start_ms) & (f.time_ms < end_ms)]).size
    )
    saturated = {name: mask[a:b] for name, mask in found.saturated.items()}
    return Screened(found.series.between(start_ms, end_ms), findings, saturated)
