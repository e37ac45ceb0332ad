"""Check values: the power-on register of the one-wire digital thermometer (0550h = 85 °C, 0.0625 °C a step; DS18B20
datasheet) and the hard clip of a 12-bit shunt current monitor (±320 mV on 0.1 ohm = ±3.2 A; INA219 datasheet)."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from hub.quantities import BY_NAME
from hub.series import EMPTY, Series
from hub.telemetry.screening import CURRENTS, screen

MINUTE = 60_000
START = 1_780_000_000_000
NAN = float("nan")


def series(step_ms=MINUTE, **columns):
    columns = {name: np.asarray(values, np.float64) for name, values in columns.items()}
    n = len(next(iter(columns.values())))
    return Series(START + step_ms * np.arange(n, dtype=np.int64), columns)


def kept(values, **options):
    """Which pack temperatures are left."""
    found = screen(series(pack_temperature=values, **options)).series.get("pack_temperature")
    return [None if np.isnan(v) else v for v in found.tolist()]


def reasons(screened):
    return {(f.quantity, f.reason): f.time_ms.size for f in screened.findings}


def test_the_register_that_reads_85():
    assert 0x0550 * 0.0625 == 85.0


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        ([22.0, 85.0, 22.1], [22.0, None, 22.1]),
        ([85.0, 22.0, 22.1], [None, 22.0, 22.1]),
        ([22.0, 22.1, 85.0], [22.0, 22.1, None]),
        ([22.0, 85.0, 85.0, 85.0, 22.1], [22.0, None, None, None, 22.1]),
        ([85.0], [None]),
        ([85.0, 85.0], [None, None]),
        ([22.0, NAN, 85.0, NAN, 22.1], [22.0, None, None, None, 22.1]),
        ([-127.0, 85.0, -127.0], [None, None, None]),
    ],
)
def test_85_without_warming_up_is_the_power_on_register(values, expected):
    assert kept(values) == expected


@pytest.mark.parametrize(
    "values",
    [
        [81.0, 83.0, 85.0, 86.5, 88.0],
        [83.0, 85.0, 85.0, 85.0, 84.0],
        [80.0, 85.0],
        [85.0, 80.0],
        [84.9375, 85.0, 85.0625],
        [84.0, 85.125, 22.0],
    ],
)
def test_a_genuine_ramp_through_85_is_kept(values):
    assert kept(values) == values


def test_a_slow_ramp_is_kept_however_rarely_the_node_reports():
    hot = [79.0, 81.0, 83.0, 85.0, 87.0, 89.0]
    for step in (MINUTE, 5 * MINUTE, 15 * MINUTE, 30 * MINUTE):
        assert kept(hot, step_ms=step) == hot


def test_the_first_85_after_a_restart_is_not_believed_even_in_the_heat():
    hot = [83.0, 84.0, 85.0, 84.0]
    assert kept(hot) == hot
    assert kept(hot, uptime=[1000.0, 1060.0, 5.0, 65.0]) == [83.0, 84.0, None, 84.0]
    told = screen(series(pack_temperature=hot), restarts_ms=[START + 90_000])
    assert np.isnan(told.series.get("pack_temperature")).tolist() == [False, False, True, False]


def test_a_box_at_58_is_kept_while_sentinels_are_not():
    """Labelled set: codes strewn into a warm day; nothing but the codes goes."""
    rng = np.random.default_rng(7)
    n = 600
    truth = 40 + 18 * np.sin(np.linspace(0, np.pi, n)) + rng.normal(0, 0.1, n)
    truth = np.round(truth / 0.0625) * 0.0625
    values = truth.copy()
    code = rng.choice(n, 30, replace=False)
    values[code[:15]], values[code[15:]] = 85.0, -127.0
    screened = screen(series(pack_temperature=values))
    left = screened.series.get("pack_temperature")
    assert set(np.flatnonzero(np.isnan(left))) == set(code)
    assert np.nanmax(left) > 57
    assert reasons(screened) == {("pack_temperature", "power-on"): 15, ("pack_temperature", "disconnected"): 15}


def test_values_beyond_the_sensor_are_set_aside():
    assert kept([20.0, -60.0, 126.0, -55.0 + 60, 20.0]) == [20.0, None, None, 5.0, 20.0]
    screened = screen(series(pack_voltage=[10.0, -0.1, 200.0, 10.0], charger_duty=[0.5, 1.0, 1.1, 0.0]))
    assert reasons(screened) == {("pack_voltage", "out-of-range"): 2, ("charger_duty", "out-of-range"): 1}


def test_a_single_value_far_from_both_neighbours_is_a_spike():
    assert kept([20.0, 20.1, 60.0, 20.2]) == [20.0, 20.1, None, 20.2]
    voltage = screen(series(pack_voltage=[10.4, 10.4, 0.0, 10.4, 10.5])).series.get("pack_voltage")
    assert np.isnan(voltage).tolist() == [False, False, True, False, False]


@pytest.mark.parametrize(
    "values",
    [
        [20.0, 20.0, 60.0, 60.0],  # a step that stays
        [20.0, 30.0, 40.0, 30.0],
        [20.0, 60.0],
        [20.0, 21.0, 34.0, 21.0],
    ],
)
def test_steps_that_may_be_true_are_kept(values):
    assert kept(values) == values


def test_neighbours_long_ago_say_nothing_about_a_spike():
    values = [20.0, 60.0, 20.0]
    assert kept(values, step_ms=11 * MINUTE) == values


def test_currents_may_jump_as_loads_do():
    current = [0.1, 0.1, -2.0, 0.1]
    assert screen(series(pack_current=current)).series.get("pack_current").tolist() == current


def test_a_voltage_that_stands_still_while_the_current_moves_is_stuck():
    n = 60
    current = 0.5 + 0.5 * np.sin(np.arange(n))
    voltage = np.full(n, 10.4)
    voltage[:10] += 0.004 * np.arange(10)
    screened = screen(series(pack_voltage=voltage, pack_current=current))
    assert np.flatnonzero(np.isnan(screened.series.get("pack_voltage"))).tolist() == list(range(11, 60))
    assert reasons(screened) == {("pack_voltage", "frozen"): 49}


def test_a_voltage_at_rest_or_from_a_coarse_converter_may_stand_still():
    rest = series(pack_voltage=np.full(60, 10.4), pack_current=np.zeros(60))
    coarse = series(
        pack_voltage=np.repeat([10.4, 10.5], 30),
        pack_current=np.where(np.arange(60) % 2, 0.1, 0.25),
        step_ms=2 * MINUTE,
    )
    short = series(pack_voltage=np.full(25, 10.4), pack_current=np.arange(25.0))
    rare = series(pack_voltage=np.full(9, 10.4), pack_current=np.arange(9.0), step_ms=15 * MINUTE)
    for given_series in (rest, short, rare):
        assert screen(given_series).findings == ()
    # 0.15 A through eight cells of 30 milliohm moves 10.4 V by 37 mV; with steps of 4 mV that must show.
    assert reasons(screen(coarse)) == {("pack_voltage", "frozen"): 58}


def test_a_thermometer_that_flickered_and_stopped_is_stuck():
    n = 300
    flicker = 20 + 0.0625 * (np.arange(n) % 3)
    flicker[150:280] = 20.5
    screened = screen(series(pack_temperature=flicker))
    assert np.flatnonzero(np.isnan(screened.series.get("pack_temperature"))).tolist() == list(range(151, 280))


def test_a_thermometer_is_stuck_where_its_companion_moves_and_not_otherwise():
    still = np.full(200, 20.0)
    assert screen(series(pack_temperature=still, air_temperature=still)).findings == ()
    moving = series(pack_temperature=still, air_temperature=np.linspace(10, 15, 200))
    assert reasons(screen(moving)) == {("pack_temperature", "frozen"): 199}


def test_a_gap_ends_a_run():
    n = 100
    time = START + MINUTE * np.arange(n, dtype=np.int64)
    time[50:] += 6 * 3600 * 1000
    split = Series(time, {"pack_temperature": np.full(n, 20.0), "air_temperature": np.linspace(0, 30, n)})
    assert screen(split).findings == ()


def test_a_clipped_current_stays_and_is_marked_as_at_least():
    assert pytest.approx(3.2) == 0.320 / 0.1
    values = [3.1, 3.2, 3.1999, -3.2, 3.19, NAN]
    screened = screen(series(pack_current=values, panel_current=values), full_scale_current_a=3.2)
    assert screened.saturated["pack_current"].tolist() == [False, True, True, True, False, False]
    assert screened.series.get("pack_current")[:5].tolist() == values[:5]
    # A panel current below -1 A is none; it is set aside and so not "at least" anything.
    assert screened.saturated["panel_current"].tolist() == [False, True, True, False, False, False]
    assert screen(series(pack_current=values)).saturated == {}


def test_screening_leaves_the_given_series_as_it_was():
    raw = series(pack_temperature=[20.0, 85.0, 20.0])
    screen(raw)
    assert raw.get("pack_temperature").tolist() == [20.0, 85.0, 20.0]


def test_an_empty_series():
    screened = screen(EMPTY, full_scale_current_a=3.2, restarts_ms=[START])
    assert len(screened.series) == 0
    assert screened.findings == ()


VALUES = st.one_of(
    st.floats(-150, 150), st.sampled_from([NAN, 85.0, -127.0, 20.0, 20.0625, 3.2, -3.2]), st.floats(allow_nan=True)
)


@given(
    st.integers(0, 40).flatmap(lambda n: st.tuples(*[arrays(np.float64, n, elements=VALUES) for _ in range(4)])),
    st.integers(1, 30),
)
def test_whatever_is_set_aside_is_found_and_nothing_else_changes(columns, minutes):
    names = ("pack_temperature", "pack_voltage", "pack_current", "uptime")
    raw = Series(
        START + minutes * MINUTE * np.arange(columns[0].size, dtype=np.int64), dict(zip(names, columns, strict=True))
    )
    with np.errstate(all="ignore"):
        screened = screen(raw, full_scale_current_a=3.2, restarts_ms=[START, START - 1])
    for name in names:
        before, after = raw.get(name), screened.series.get(name)
        gone = np.isnan(after) & ~np.isnan(before)
        np.testing.assert_array_equal(after[~gone], before[~gone])
        found = [f.time_ms for f in screened.findings if f.quantity == name and f.reason != "saturated"]
        assert sorted(np.concatenate([np.empty(0, np.int64), *found]).tolist()) == raw.time_ms[gone].tolist()
        left = after[~np.isnan(after)]
        assert ((left >= BY_NAME[name].low) & (left <= BY_NAME[name].high)).all()
    again = screen(screened.series, full_scale_current_a=3.2)
    assert {f.reason for f in again.findings if f.quantity in CURRENTS} <= {"saturated"}
