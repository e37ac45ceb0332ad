import csv
import math

import numpy as np
import pytest
from builders import START_MS, a_node, every, readings
from hypothesis import given
from hypothesis import strategies as st

from hub.battery.charge import count, gap_limit_ms, intervals, load_wh, mean_product, observed_s, signed, uncertainty_ah
from hub.series import EMPTY, Series

END_MS = START_MS + 24 * 3_600_000


@st.composite
def wandering(draw):
    """Readings with gaps, missing values and currents of both signs; the first one has a current."""
    steps = draw(st.lists(st.integers(1, 400), min_size=2, max_size=60))
    time_s = np.cumsum(steps).astype(float)
    values = st.floats(-3.0, 3.0, allow_nan=False) | st.just(math.nan)
    current = draw(st.lists(values, min_size=len(steps), max_size=len(steps)))
    current[0] = draw(st.floats(-3.0, 3.0))
    volts = draw(st.lists(st.floats(0.0, 12.0), min_size=len(steps), max_size=len(steps)))
    return readings(time_s, pack_current=current, pack_voltage=volts)


def test_constant_current_is_current_times_time():
    counted = count(every(60, 24, pack_current=0.4, pack_voltage=5.0), START_MS, END_MS, a_node())
    assert counted.charge_ah == pytest.approx(9.6)
    assert counted.charge_wh == pytest.approx(48.0)
    assert counted.discharge_ah == counted.discharge_wh == 0.0
    assert counted.observed_s == 86_400.0
    assert counted.sampling_ah == 0.0


def test_charge_and_discharge_of_an_interval_that_crosses_zero_do_not_cancel():
    # From +1 A to -1 A in 60 s: a triangle of 1 A * 30 s / 2 on each side.
    counted = count(readings([0, 60], pack_current=[1.0, -1.0], pack_voltage=4.0), START_MS, END_MS, a_node())
    assert counted.charge_ah == pytest.approx(15.0 / 3600.0)
    assert counted.discharge_ah == pytest.approx(15.0 / 3600.0)
    assert counted.charge_wh == pytest.approx(60.0 / 3600.0)
    assert (counted.charging_s, counted.discharging_s) == (30.0, 30.0)


def test_energy_of_linear_voltage_and_current_is_exact():
    # The integral of (1 + x)(2 + 3 x) over 0..1 is 2 + 5/2 + 1.
    assert mean_product(1.0, 2.0, 2.0, 5.0) == pytest.approx(5.5)


@pytest.mark.parametrize(
    ("interval_s", "limit_s"),
    [(10.0, 30.0), (60.0, 180.0), (299.0, 897.0), (600.0, 900.0), (900.0, 1080.0), (3600.0, 4320.0)],
)
def test_gap_limit(interval_s, limit_s):
    assert gap_limit_ms(interval_s) == limit_s * 1000.0


def test_a_longer_stretch_is_unobserved():
    held = readings([0, 60, 60 + 181, 60 + 241], pack_current=1.0)
    counted = count(held, START_MS, END_MS, a_node())
    assert counted.observed_s == 120.0
    assert counted.charge_ah == pytest.approx(120.0 / 3600.0)


@pytest.mark.parametrize(
    "nothing",
    [
        EMPTY,
        readings([10], pack_current=1.0),
        readings([0, 60], pack_current=math.nan),
        readings([0, 60], pack_voltage=5.0),
    ],
)
def test_what_was_not_observed_is_not_known(nothing):
    counted = count(nothing, START_MS, END_MS, a_node())
    assert (counted.charge_ah, counted.discharge_ah, counted.charge_wh, counted.observed_s) == (None, None, None, 0.0)


def test_energy_is_not_known_without_a_voltage():
    counted = count(every(60, 1, pack_current=1.0), START_MS, END_MS, a_node())
    assert counted.charge_ah == pytest.approx(1.0)
    assert counted.charge_wh is None


@given(wandering(), st.integers(0, 24_000_000))
def test_a_day_split_anywhere_adds_up(series, cut_ms):
    node = a_node()
    end_ms = START_MS + 24_000_000
    whole = count(series, START_MS, end_ms, node)
    parts = [count(series, START_MS, START_MS + cut_ms, node), count(series, START_MS + cut_ms, end_ms, node)]
    for name in ("charge_ah", "discharge_ah", "charge_wh", "discharge_wh", "observed_s"):
        total = sum(getattr(part, name) or 0.0 for part in parts)
        assert total == pytest.approx(getattr(whole, name) or 0.0, rel=1e-9, abs=1e-12)


@given(wandering(), st.floats(0.01, 100.0))
def test_scaling_the_current_scales_the_charge(series, factor):
    node = a_node()
    scaled = Series(series.time_ms, {**series.columns, "pack_current": factor * series.get("pack_current")})
    one, other = (count(s, START_MS, END_MS, node) for s in (series, scaled))
    assert (other.charge_ah or 0.0) == pytest.approx(factor * (one.charge_ah or 0.0), rel=1e-9, abs=1e-12)
    assert (other.discharge_wh or 0.0) == pytest.approx(factor * (one.discharge_wh or 0.0), rel=1e-9, abs=1e-12)


@given(wandering())
def test_a_reading_on_the_line_between_two_changes_nothing(series):
    node = a_node()
    finite = series.where(np.isfinite(series.get("pack_current")))
    t = finite.time_ms
    near = np.diff(t) <= gap_limit_ms(node.interval_s)
    middle = (t[:-1] + (np.diff(t) // 2))[near]
    time_ms = np.unique(np.concatenate((t, middle)))
    twice = Series(time_ms, {name: np.interp(time_ms, t, values) for name, values in finite.columns.items()})
    one, other = (count(s, START_MS, END_MS, node) for s in (finite, twice))
    for name in ("charge_ah", "discharge_ah", "charge_wh", "discharge_wh"):
        assert (getattr(other, name) or 0.0) == pytest.approx(getattr(one, name) or 0.0, rel=1e-9, abs=1e-12)


@given(wandering(), st.integers(1, 58))
def test_a_gap_never_adds_charge(series, lost):
    node = a_node()
    keep = np.ones(len(series), bool)
    keep[1 : min(1 + lost, len(series) - 1)] = False
    thinned = series.where(keep)
    wide = Series(
        np.where(np.arange(len(thinned)) > 0, thinned.time_ms + 10 * 60_000, thinned.time_ms), thinned.columns
    )
    before, after = count(series, START_MS, END_MS, node), count(wide, START_MS, END_MS, node)
    assert (after.charge_ah or 0.0) <= (before.charge_ah or 0.0) + 1e-12
    assert (after.discharge_ah or 0.0) <= (before.discharge_ah or 0.0) + 1e-12


def test_uncertainty_is_gain_offset_sampling_and_gaps_in_quadrature():
    node = a_node(current_gain_error=0.01, current_offset_a=0.001)
    counted = count(every(60, 10, pack_current=0.5), START_MS, END_MS, node)
    known = uncertainty_ah(5.0, 36_000.0, 0.0, counted, node)
    assert known == pytest.approx(math.hypot(0.05, 0.01))
    unseen = uncertainty_ah(5.0, 36_000.0, 7200.0, counted, node)
    assert unseen == pytest.approx(math.hypot(0.05, 0.01, 1.0 / math.sqrt(3.0)))
    assert uncertainty_ah(0.0, 0.0, 7200.0, counted, node) == 0.0


def test_sampling_uncertainty_agrees_with_steps_at_random_instants():
    # Steps of 1 A somewhere inside a minute: the trapezoid's error is spread evenly over 60 A s (Monte Carlo).
    rng = np.random.default_rng(4)
    stated = []
    errors = []
    for _ in range(400):
        steps = np.sort(rng.uniform(0.0, 3600.0, 20))
        series = every(60, 1, pack_current=lambda t, s=steps: (np.searchsorted(s, t) % 2).astype(float))
        truth = np.diff(np.concatenate((steps, [3600.0])))[::2].sum() / 3600.0
        counted = count(series, START_MS, START_MS + 3_600_000, a_node())
        errors.append(counted.charge_ah - truth)
        stated.append(counted.sampling_ah)
    assert np.sqrt(np.mean(np.square(errors))) == pytest.approx(np.sqrt(np.mean(np.square(stated))), rel=0.2)


def test_readings_of_any_kind_are_observed_time():
    series = every(60, 2, pack_temperature=20.0)
    assert observed_s(series, START_MS, END_MS, a_node()) == 7200.0
    assert observed_s(EMPTY, START_MS, END_MS, a_node()) == 0.0


def test_load_energy_comes_from_its_sensor_or_from_the_assumed_load():
    hours = {"pack_voltage": 5.0, "pack_current": 0.2}
    assert load_wh(every(60, 2, load_current=0.1, **hours), START_MS, END_MS, a_node()) == pytest.approx(1.0)
    assumed = a_node(current_sensing="charge-only", standing_load_a=0.05)
    assert load_wh(every(60, 2, **hours), START_MS, END_MS, assumed) == pytest.approx(0.5)
    assert load_wh(every(60, 2, **hours), START_MS, END_MS, a_node(standing_load_a=0.05)) is None
    assert load_wh(every(60, 2, load_current=0.1), START_MS, END_MS, a_node()) is None


def test_signed_parts_of_nothing_are_zero():
    none = intervals(EMPTY.time_ms, [np.empty(0)], START_MS, END_MS, 1000)
    parts = signed(none.seconds, none.first[0], none.last[0])
    assert (parts.positive, parts.negative, none.observed_s) == (0.0, 0.0, 0.0)


def rows_by_cycle(path):
    """Rows of a bench tester by cycle: time s, current A, cumulative charge and discharge Ah."""
    cycles = {}
    with path.open() as file:
        for row in csv.DictReader(file):
            cycles.setdefault(int(row["Cycle_Index"]), []).append(
                [
                    float(row[name])
                    for name in ("Test_Time(s)", "Current(A)", "Charge_Capacity(Ah)", "Discharge_Capacity(Ah)")
                ]
            )
    return {cycle: np.array(rows) for cycle, rows in cycles.items()}


@pytest.mark.parametrize("name", ["CS2_33_10_05_10.csv", "CS2_33_2_2_11.csv", "CS2_33_8_17_10.csv"])
def test_hold_agrees_with_a_testers_own_count(measured, name):
    # CALCE, University of Maryland, cell CS2_33, by way of the DiffCapAnalyzer repository (MIT): the tester's own
    # cumulative ampere-hours of each cycle. A row closes a stretch of constant current, so its value held since the row
    # before. Discharge is such stretches throughout.
    worst = {"hold": 0.0, "trapezoid": 0.0}
    counted_cycles = 0
    for rows in rows_by_cycle(measured / "liion-cycling" / name).values():
        t, current, stated = rows[:, 0] - rows[0, 0], rows[:, 1], rows[-1, 3] - rows[0, 3]
        if stated < 0.05:
            continue
        counted_cycles += 1
        series = readings(t, pack_current=current)
        for rule in ("hold", "trapezoid"):
            # Every row belongs to its neighbour here, however far: the tester wrote when something changed.
            node = a_node(interval_s=2000.0, integration=rule)
            end_ms = int(series.time_ms[-1])
            counted = count(series, START_MS, end_ms, node)
            worst[rule] = max(worst[rule], abs(counted.discharge_ah / stated - 1.0))
    assert counted_cycles >= 1
    assert worst["hold"] < 2e-4
    assert worst["trapezoid"] > 2e-3


def test_trapezoid_agrees_better_where_the_current_fades_smoothly(measured):
    # The same logs: most of a charge at constant voltage is a smooth fall with rows up to ten minutes apart. That is
    # how a node sees the sun, and why its readings are joined by straight lines.
    for cycle, rows in rows_by_cycle(measured / "liion-cycling" / "CS2_33_10_05_10.csv").items():
        if not 2 <= cycle <= 5:
            continue
        series = readings(rows[:, 0] - rows[0, 0], pack_current=rows[:, 1])
        stated = rows[-1, 2] - rows[0, 2]
        trapezoid, hold = (
            count(series, START_MS, int(series.time_ms[-1]), a_node(interval_s=2000.0, integration=rule)).charge_ah
            / stated
            for rule in ("trapezoid", "hold")
        )
        assert trapezoid == pytest.approx(1.0, abs=0.0015)
        assert hold < 0.99
