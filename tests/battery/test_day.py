import math
from dataclasses import replace

import numpy as np
import pytest
from battery import pack_model as pm
from builders import DAY_MS, HOUR_MS, START_MS, a_node, a_pack, a_window, days, every, fold, readings
from hypothesis import given, settings
from hypothesis import strategies as st

from hub.battery.day import METHOD_VERSION, Carried, analyse
from hub.series import EMPTY, Series

SUMS = ("charge_ah", "discharge_ah", "charge_wh", "discharge_wh", "observed_s")


@pytest.fixture(scope="module")
def week():
    """Six days of a pack that fills, under a sky that is clear on some of them."""

    def sky(rng, number, step):
        dull = np.arange(int(number * 86_400 / step)) * step % (3 * 86_400) < 86_400
        return np.where(dull, 0.4, 1.0) * pm.clear(rng, number, step)

    return pm.simulate(pm.Pack(acceptance_from=0.94), pm.Site(panel_a=0.25, load_a=0.02), days=6, level=0.5, sky=sky)


def test_a_day_of_steady_currents():
    series = every(
        60,
        26,
        pack_current=lambda t: np.where(t < 12 * 3600, 0.2, -0.1),
        pack_voltage=lambda t: np.where(t < 12 * 3600, 5.6, 5.0),
        pack_temperature=lambda t: 20.0 + t / 3600.0,
    )
    result = analyse(series, a_window(), a_node(), a_pack(), Carried())
    figures = result.figures
    assert figures.coverage == 1.0
    assert figures.charge_ah == pytest.approx(2.4, abs=0.003)
    assert figures.discharge_ah == pytest.approx(1.2, abs=0.003)
    assert figures.charge_wh == pytest.approx(13.44, abs=0.02)
    assert figures.charge_uncertainty_ah == pytest.approx(math.hypot(0.0082 * 2.4, 0.00058 * 12), rel=0.02)
    assert (figures.cell_voltage_min_v, figures.cell_voltage_max_v) == (1.25, 1.4)
    assert figures.pack_temperature_max_c == pytest.approx(20.0 + 24.0 - 1 / 60)
    assert figures.load_wh is None
    assert METHOD_VERSION >= 1


def test_what_cannot_be_known_is_empty():
    figures = analyse(every(60, 24, pack_temperature=21.0), a_window(), a_node(), a_pack(), Carried()).figures
    assert figures.coverage == 1.0
    assert figures.pack_temperature_max_c == 21.0
    for name in ("charge_ah", "discharge_ah", "charge_wh", "charge_uncertainty_ah", "cell_voltage_min_v", "full_at_ms"):
        assert getattr(figures, name) is None


def test_a_load_that_nobody_sees_leaves_discharge_empty():
    node = a_node(current_sensing="charge-only")
    result = analyse(every(60, 24, pack_current=0.1, pack_voltage=5.5), a_window(), node, a_pack(), Carried())
    assert result.figures.charge_ah == pytest.approx(2.4)
    assert result.figures.discharge_ah is result.figures.discharge_uncertainty_ah is result.figures.discharge_wh is None
    assert result.figures.load_wh is None


@pytest.mark.parametrize(
    "series",
    [
        EMPTY,
        readings([3600], pack_current=0.2, pack_voltage=5.5),
        readings([3600], pack_temperature=20.0),
        every(60, 24, pack_current=np.nan, pack_voltage=np.nan, pack_temperature=np.nan),
        every(60, 24, pack_current=0.0, pack_voltage=0.0, pack_temperature=0.0),
        every(60, 24, pack_current=0.2, pack_voltage=5.5, pack_temperature=25.0, air_temperature=25.0),
        readings([0, 20 * 3600], pack_current=0.2, pack_voltage=5.5),
    ],
)
def test_little_or_nothing_is_no_accident(series):
    for pack in (a_pack(), None):
        result = analyse(series, a_window(), a_node(), pack, Carried())
        assert 0.0 <= result.figures.coverage <= 1.0
        assert Carried.from_json(result.carried.to_json()) == result.carried
        again = analyse(series, a_window(24, 48), a_node(), pack, result.carried)
        assert again.figures.coverage in (0.0, pytest.approx(60 / 86_400))


def test_without_a_pack_there_is_only_what_needs_none(week):
    result = analyse(week.series, a_window(), a_node(), None, Carried())
    assert result.figures.charge_ah is not None
    assert result.figures.cell_voltage_min_v is None
    assert result.sessions == []


def test_the_week_fills_on_its_clear_days_only(week):
    result = days(week.series, a_node(), a_pack(), 6)
    full = [day.figures.full_at_ms is not None for day in result]
    assert not full[0]
    assert full[2]
    assert full[5]
    for day in result:
        assert len(day.sessions) == 1
        assert day.sessions[0].ended_by == "sun-ended"


def test_handing_on_through_json_changes_nothing(week):
    direct = days(week.series, a_node(), a_pack(), 6)
    carried = Carried()
    for day, expected in enumerate(direct):
        window = a_window(24 * day, 24 * day + 24)
        carried = Carried.from_json(carried.to_json())
        result = analyse(week.series, window, a_node(), a_pack(), carried)
        assert result == expected
        carried = result.carried


def test_more_context_than_promised_changes_nothing(week):
    direct = days(week.series, a_node(), a_pack(), 3)
    carried = Carried()
    for day, expected in enumerate(direct):
        result = analyse(week.series, a_window(24 * day, 24 * day + 24), a_node(), a_pack(), carried)
        assert result == expected
        carried = result.carried


@settings(max_examples=15, deadline=None)
@given(cuts=st.lists(st.integers(1, 2 * DAY_MS - 1), min_size=1, max_size=3, unique=True))
def test_two_days_cut_anywhere_add_up_and_keep_their_sessions(week, cuts):
    series = week.series.between(START_MS, START_MS + 3 * DAY_MS)
    whole = fold(series, a_node(), a_pack(), [START_MS, START_MS + 2 * DAY_MS])[0]
    edges = [START_MS, *sorted(START_MS + cut for cut in cuts), START_MS + 2 * DAY_MS]
    parts = fold(series, a_node(), a_pack(), edges)
    for name in SUMS:
        total = sum(getattr(part.figures, name) or 0.0 for part in parts)
        assert total == pytest.approx(getattr(whole.figures, name), rel=1e-9)
    latest = {session.start_ms: session for part in parts for session in part.sessions}
    assert set(latest) == {session.start_ms for session in whole.sessions}
    for session in whole.sessions:
        same = latest[session.start_ms]
        assert same.end_ms == session.end_ms
        assert same.charge_ah == pytest.approx(session.charge_ah)
        assert same.full_at_ms == session.full_at_ms


def test_running_totals_reach_over_a_night_without_readings():
    # Twelve hours lost over midnight; the node's own totals say 0.3 Ah in and 0.5 Ah out meanwhile.
    t = np.concatenate((np.arange(0, 18 * 3600, 60), np.arange(30 * 3600, 48 * 3600, 60)))
    lost = t >= 30 * 3600
    series = readings(
        t,
        pack_current=-0.1,
        pack_voltage=5.0,
        charge_in=np.where(lost, 1.3, 1.0),
        charge_out=np.where(lost, 2.5, 2.0) + 0.0 * t,
    )
    first, second = days(series, a_node(), a_pack(), 2)
    assert first.figures.bridged_s == 0.0
    assert first.figures.discharge_ah == pytest.approx(1.8, abs=0.01)
    assert second.figures.bridged_s == 6 * 3600.0
    assert second.figures.charge_ah == pytest.approx(0.3)
    assert second.figures.discharge_ah == pytest.approx(1.8 + 0.5, abs=0.01)
    assert second.figures.charge_wh == pytest.approx(1.5)
    assert second.figures.coverage == pytest.approx(0.75, abs=0.001)
    assert second.carried.removed_since_full_ah == pytest.approx(0.0)
    assert second.figures.discharge_uncertainty_ah < first.figures.discharge_uncertainty_ah


def test_a_gap_makes_a_figure_less_sure_and_never_larger(week):
    window = a_window(24, 48)
    full = analyse(week.series, window, a_node(), a_pack(), Carried()).figures
    t = week.series.time_ms
    holed = week.series.where((t < START_MS + 34 * HOUR_MS) | (t > START_MS + 36 * HOUR_MS))
    less = analyse(holed, window, a_node(), a_pack(), Carried()).figures
    assert less.coverage == pytest.approx(full.coverage - 2 / 24, abs=0.002)
    assert less.charge_ah < full.charge_ah
    assert less.charge_uncertainty_ah > full.charge_uncertainty_ah


def test_an_offset_is_found_at_night_taken_off_and_said(week):
    columns = dict(week.series.columns)
    columns["load_current"] = np.full(len(week.series), 0.02)
    columns["pack_current"] = columns["pack_current"] + 0.0015
    result = analyse(Series(week.series.time_ms, columns), a_window(), a_node(), a_pack(), Carried())
    plain = analyse(week.series, a_window(), a_node(), a_pack(), Carried())
    assert result.figures.offset_removed_a == pytest.approx(0.0015, abs=1e-4)
    assert result.figures.discharge_ah == pytest.approx(plain.figures.discharge_ah, abs=0.002)
    assert result.carried.offset_a == result.figures.offset_removed_a
    assert plain.figures.offset_removed_a is None


def test_another_pack_begins_anew_and_the_charge_of_both_is_that_of_the_node(week):
    swap = START_MS + 35 * HOUR_MS + 630_000
    whole = analyse(week.series, a_window(24, 48), a_node(), a_pack(), Carried())
    first_day = days(week.series, a_node(), a_pack(), 1)[0]
    old = analyse(
        week.series, replace(a_window(24, 48), end_ms=swap, pack_leaves=True), a_node(), a_pack(), first_day.carried
    )
    new = analyse(week.series, replace(a_window(24, 48), start_ms=swap), a_node(), a_pack(label="R-08"), old.carried)
    total = old.figures.charge_ah + new.figures.charge_ah
    assert total == pytest.approx(whole.figures.charge_ah, rel=1e-9)
    assert old.sessions[-1].end_ms is not None
    assert new.carried.pack == "R-08"
    assert new.carried.full_at_ms is None or new.carried.full_at_ms > swap
    assert all(session.start_ms >= swap for session in new.sessions)


def test_twice_the_readings_give_the_same_day(week):
    series = week.series.between(START_MS + DAY_MS, START_MS + 2 * DAY_MS + HOUR_MS)
    t = series.time_ms
    time_ms = np.sort(np.concatenate((t, (t[:-1] + t[1:]) // 2)))
    twice = Series(time_ms, {name: np.interp(time_ms, t, values) for name, values in series.columns.items()})
    one, other = (analyse(s, a_window(24, 48), a_node(), a_pack(), Carried()) for s in (series, twice))
    for name in SUMS:
        assert getattr(other.figures, name) == pytest.approx(getattr(one.figures, name), rel=1e-9)
    assert len(one.sessions) == len(other.sessions) == 1
    assert other.sessions[0].ended_by == one.sessions[0].ended_by
