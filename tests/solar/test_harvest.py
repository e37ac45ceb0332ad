import csv
import math

import numpy as np
import pytest
from builders import HOUR_MS, START_MS, a_node, a_window, every, readings
from hypothesis import given
from hypothesis import strategies as st

from hub.battery.charges import ChargeSession
from hub.series import EMPTY
from hub.solar.clearsky import ClearSky
from hub.solar.harvest import harvest, harvest_ratio, idle_stretches


def a_sky(power_w=5.0, start_h=8.0, end_h=16.0):
    """A clear sky of constant power between two hours, in steps of 5 min."""
    time_ms = START_MS + 150_000 + 300_000 * np.arange(288)
    hours = (time_ms - START_MS) / HOUR_MS
    power = np.where((hours > start_h) & (hours < end_h), power_w, 0.0)
    return ClearSky(time_ms, power, np.full(288, 300.0), 10.0)


def a_session(start_h, end_h, full_h=None, cut_h=None):
    ms = lambda h: None if h is None else START_MS + round(HOUR_MS * h)  # noqa: E731
    evidence = {} if cut_h is None else {"charger-cut": {"met": True, "at_ms": ms(cut_h)}}
    return ChargeSession(ms(start_h), ms(end_h), 1.0, 5.0, 0.1, 30.0, "sun-ended", ms(full_h), 0.9, None, evidence)


def test_energy_is_voltage_times_current():
    found = harvest(every(60, 24, panel_voltage=6.0, panel_current=0.5), a_window(), a_node())
    assert found.panel_wh == pytest.approx(72.0)
    assert (found.coverage, found.observed_s) == (1.0, 86_400.0)


@pytest.mark.parametrize(
    "series", [EMPTY, every(60, 24, panel_voltage=6.0), readings([0], panel_voltage=6.0, panel_current=1.0)]
)
def test_what_was_not_observed_is_not_known(series):
    found = harvest(series, a_window(), a_node())
    assert (found.panel_wh, found.coverage) == (None, 0.0)


def test_gaps_lower_the_coverage_and_add_nothing():
    t = np.concatenate((np.arange(0, 6 * 3600 + 1, 60), np.arange(12 * 3600, 24 * 3600 + 1, 60)))
    found = harvest(readings(t, panel_voltage=6.0, panel_current=0.5), a_window(), a_node())
    assert found.coverage == pytest.approx(0.75)
    assert found.panel_wh == pytest.approx(54.0)


def irradiance(path):
    """Minutes of a day and global irradiance in W/m², with the station's own accumulated kWh/m²."""
    with path.open() as file:
        rows = list(csv.DictReader(file))
    names = ("Global PSP [W/m^2]", "Global PSP (Accumulated) [kWhr/m^2]")
    return np.arange(len(rows)) * 60.0, *(np.array([float(row[name]) for row in rows]) for name in names)


def test_a_measured_day_agrees_with_the_stations_own_counter(measured):
    # NREL MIDC, 2018-10-14, by way of pvlib's test data (BSD-3): the station's counter ends at 3.0903 kWh/m². Its first
    # row still shows the day before, and thermopiles read a little below zero at night, which counts as nothing.
    t, watts, counter = irradiance(measured / "irradiance-1min" / "midc_20181014.txt")
    assert counter[0] == 4.61923
    assert watts.min() < 0.0
    found = harvest(readings(t, panel_voltage=1.0, panel_current=watts), a_window(), a_node())
    assert found.panel_wh / 1000.0 == pytest.approx(counter[-1], abs=1e-4)
    assert counter[-1] == 3.0903


def test_the_same_day_split_anywhere_adds_up(measured):
    t, watts, _ = irradiance(measured / "irradiance-1min" / "midc_20181014.txt")
    series = readings(t, panel_voltage=1.0, panel_current=watts)
    whole = harvest(series, a_window(), a_node()).panel_wh
    for cut_h in (0.3, 9.123, 13.777, 23.9):
        parts = [harvest(series, window, a_node()).panel_wh for window in (a_window(0, cut_h), a_window(cut_h, 24))]
        assert math.fsum(parts) == pytest.approx(whole, rel=1e-12)


def test_the_ratio_is_over_the_same_stretches_only():
    # Half the sky's 5 W from 8 to 16 h; readings are missing from 10 to 12 h.
    hours = lambda t: t / 3600.0  # noqa: E731
    power = lambda t: np.where((hours(t) > 8) & (hours(t) < 16), 2.5, 0.0)  # noqa: E731
    t = np.arange(0, 24 * 3600 + 1, 60)
    t = t[(t <= 10 * 3600) | (t >= 12 * 3600)]
    series = readings(t, panel_voltage=1.0, panel_current=power)
    assert harvest_ratio(series, a_window(), a_node(), a_sky()) == pytest.approx(0.5, abs=0.01)


def test_a_full_pack_does_not_make_the_panel_look_bad():
    hours = lambda t: t / 3600.0  # noqa: E731
    power = lambda t: np.where((hours(t) > 8) & (hours(t) < 12), 4.0, 0.0)  # noqa: E731
    series = every(60, 24, panel_voltage=1.0, panel_current=power)
    window = a_window()
    assert harvest_ratio(series, window, a_node(), a_sky()) == pytest.approx(0.4, abs=0.01)
    idle = idle_stretches([a_session(8, 12, full_h=12.0)], window)
    assert harvest_ratio(series, window, a_node(), a_sky(), idle) == pytest.approx(0.8, abs=0.01)


def test_without_enough_sun_there_is_no_ratio():
    series = every(60, 24, panel_voltage=1.0, panel_current=0.1)
    assert harvest_ratio(series, a_window(), a_node(), a_sky(end_h=8.15)) is None
    assert harvest_ratio(EMPTY, a_window(), a_node(), a_sky()) is None
    everything = [(START_MS, START_MS + 24 * HOUR_MS)]
    assert harvest_ratio(series, a_window(), a_node(), a_sky(), everything) is None


def test_idle_is_from_full_or_cut_to_the_next_session():
    window = a_window(0, 24)
    sessions = [a_session(13, 17, cut_h=16), a_session(8, 12, full_h=11.0, cut_h=11.5), a_session(18, 19)]
    idle = [((a - START_MS) / HOUR_MS, (b - START_MS) / HOUR_MS) for a, b in idle_stretches(sessions, window)]
    assert idle == [(11.0, 13.0), (16.0, 18.0)]
    assert idle_stretches([a_session(-8, -4, full_h=-5.0)], window) == [(window.start_ms, window.end_ms)]
    assert idle_stretches([], window) == []


@given(st.lists(st.tuples(st.integers(0, 24), st.integers(0, 24)), max_size=4))
def test_idle_stretches_in_any_order_and_overlap_never_count_twice(pairs):
    idle = [(START_MS + a * HOUR_MS, START_MS + b * HOUR_MS) for a, b in pairs if a < b]
    left = 24 - len({hour for a, b in pairs if a < b for hour in range(a, b)})
    series = every(600, 24, panel_voltage=1.0, panel_current=3.0)
    found = harvest_ratio(series, a_window(), a_node(interval_s=600.0), a_sky(6.0, 0.0, 24.0), idle)
    assert found == (pytest.approx(0.5, abs=0.02) if left else None)
