import numpy as np
import pytest
from store.strategies import DAY

from hub.series import EMPTY, Series
from hub.store import measured
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.inventory import Calibration
from hub.store.layout import DAY_MS

AT = DAY * DAY_MS
MINUTE = 60_000


def ramp(count=6):
    return Series(
        np.arange(count, dtype=np.int64) * 1000, {"pack_current": np.ones(count), "uptime": np.arange(float(count))}
    )


def test_a_calibration_applies_from_its_start_until_the_next_one():
    steps = [Calibration("n", "pack_current", 4000, 3.0), Calibration("n", "pack_current", 2000, 2.0, 0.5)]
    found = measured.calibrated(ramp(), steps)
    assert found.columns["pack_current"].tolist() == [1.0, 1.0, 2.5, 2.5, 3.0, 3.0]
    assert found.columns["uptime"].tolist() == [0.0, 1.0, 2.0, 3.0, 4.0, 5.0]


def test_what_was_sent_stays_as_it_is():
    series = ramp()
    measured.calibrated(series, [Calibration("n", "pack_current", 0, 2.0)])
    assert series.columns["pack_current"].tolist() == [1.0] * 6


@pytest.mark.parametrize("series", [EMPTY, ramp(0), ramp(1)])
def test_short_series_and_quantities_that_are_not_there(series):
    found = measured.calibrated(series, [Calibration("n", "pack_voltage", 0, 2.0), Calibration("n", "uptime", 0, 2.0)])
    assert np.array_equal(found.time_ms, series.time_ms)
    assert "pack_voltage" not in found.columns


def stored(connection, values, quantity="pack_temperature"):
    rows = {AT + n * MINUTE: {quantity: value} for n, value in enumerate(values)}
    append(connection, [Arrival(1, AT, rows)])


def test_codes_are_told_by_what_the_sensor_said_not_by_what_a_calibration_makes_of_it(scratch):
    with scratch() as connection:
        stored(connection, [20.0, 20.1, -127.0, 20.2])
        found = measured.read(connection, 1, AT, AT + DAY_MS, [Calibration("n", "pack_temperature", 0, 1.0, 5.0)])
    column = found.series.columns["pack_temperature"]
    assert np.isnan(column[2])
    assert column[[0, 1, 3]].tolist() == pytest.approx([25.0, 25.1, 25.2])
    assert [(f.quantity, f.reason, f.time_ms.tolist()) for f in found.findings] == [
        ("pack_temperature", "disconnected", [AT + 2 * MINUTE])
    ]


def test_a_stretch_is_judged_by_its_surroundings_and_told_without_them(scratch):
    with scratch() as connection:
        stored(connection, [20.0, 20.1, 60.0, 20.2, -127.0])
        found = measured.read(connection, 1, AT + 2 * MINUTE, AT + 3 * MINUTE)
    # One value alone could be true; between its neighbours it is a spike.
    assert found.series.time_ms.tolist() == [AT + 2 * MINUTE]
    assert np.isnan(found.series.columns["pack_temperature"]).all()
    assert [(f.reason, f.time_ms.tolist()) for f in found.findings] == [("spike", [AT + 2 * MINUTE])]


def test_a_current_at_the_end_of_its_range_is_marked_within_the_stretch(scratch):
    with scratch() as connection:
        stored(connection, [1.0, 3.2, 3.2, 0.5], "pack_current")
        found = measured.read(connection, 1, AT + 2 * MINUTE, AT + DAY_MS, (), 3.2)
    assert found.saturated["pack_current"].tolist() == [True, False]
    assert found.series.columns["pack_current"].tolist() == [3.2, 0.5]


def test_a_node_without_readings(scratch):
    with scratch() as connection:
        found = measured.read(connection, 1, AT, AT + DAY_MS, [Calibration("n", "uptime", 0, 2.0)])
    assert len(found.series) == 0
    assert found.findings == ()
