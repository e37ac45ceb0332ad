"""Readings as they are to be used: calibrated, then screened. What was sent stays as it is."""

from collections.abc import Sequence

import numpy as np
from sqlalchemy import Connection

from hub.series import Series
from hub.store import readings
from hub.store.inventory import Calibration
from hub.telemetry.screening import Screened, screen

# Screening judges a value by its surroundings; this much of them is read on each side.
SURROUNDINGS_MS = 3 * 3_600_000


def calibrated(series: Series, calibrations: Sequence[Calibration]) -> Series:
    """Values after the calibrations in force at their instants."""
    columns = dict(series.columns)
    for quantity in {c.quantity for c in calibrations} & set(columns):
        steps = sorted((c for c in calibrations if c.quantity == quantity), key=lambda c: c.start_ms)
        starts = np.array([c.start_ms for c in steps], np.int64)
        which = np.searchsorted(starts, series.time_ms, side="right")
        gain = np.array([1.0, *(c.gain for c in steps)])
        offset = np.array([0.0, *(c.offset for c in steps)])
        columns[quantity] = columns[quantity] * gain[which] + offset[which]
    return Series(series.time_ms, columns)


def read(
    connection: Connection,
    node_id: int,
    start_ms: int,
    end_ms: int,
    calibrations: Sequence[Calibration] = (),
    full_scale_current_a: float | None = None,
) -> Screened:
    """A node's readings of a stretch, with what screening found and kept out."""
    wide = readings.read(connection, node_id, start_ms - SURROUNDINGS_MS, end_ms + SURROUNDINGS_MS)
    return screen(calibrated(wide, calibrations), full_scale_current_a=full_scale_current_a).between(start_ms, end_ms)
