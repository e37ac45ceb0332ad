import json

import numpy as np
import pytest
from battery import pack_model as pm
from builders import DAY_MS, START_MS, a_node, a_pack, a_window, days, every

from hub.battery.charges import Memory, charges
from hub.battery.flow import flow
from hub.battery.fullness import Known

HOUR_MS = 3_600_000


def found_in(series, window, open_since_ms=None, load_known=True):
    running = flow(series.between(0, window.end_ms), a_node())
    return charges(running, window, a_node(), a_pack(), Memory(open_since_ms, None, Known()), load_known=load_known)


def test_a_session_has_its_sums():
    series = every(
        60,
        24,
        pack_current=lambda t: np.where((t >= 8 * 3600) & (t <= 12 * 3600), 0.2, -0.01),
        pack_voltage=5.5,
        pack_temperature=21.0,
    )
    (session,), memory = found_in(series, a_window())
    assert (session.start_ms, session.end_ms) == (START_MS + 8 * HOUR_MS, START_MS + 12 * HOUR_MS)
    assert session.charge_ah == pytest.approx(0.8)
    assert session.charge_wh == pytest.approx(4.4)
    assert session.mean_rate_it == pytest.approx(0.1)
    assert session.peak_temperature_c == 21.0
    assert session.full_at_ms is session.overcharge_ah is None
    assert memory.open_since_ms is None
    json.dumps(session.evidence, allow_nan=False)


def test_an_open_session_is_returned_open_and_begins_again_from_its_start():
    series = every(
        60, 48, pack_current=lambda t: np.where((t >= 20 * 3600) & (t <= 28 * 3600), 0.2, -0.01), pack_voltage=5.5
    )
    (first,), memory = found_in(series, a_window(0, 24))
    assert (first.end_ms, first.ended_by) == (None, None)
    assert memory.open_since_ms == first.start_ms == START_MS + 20 * HOUR_MS
    (second,), after = found_in(series, a_window(24, 48), memory.open_since_ms)
    assert (second.start_ms, second.end_ms) == (first.start_ms, START_MS + 28 * HOUR_MS)
    assert second.charge_ah == pytest.approx(1.6)
    assert after.open_since_ms is None


def test_an_open_session_keeps_its_beginning_when_the_current_is_corrected_since():
    series = every(
        60, 48, pack_current=lambda t: np.where((t >= 20 * 3600) & (t <= 28 * 3600), 0.2, -0.01), pack_voltage=5.5
    )
    weak = np.where(series.time_ms == START_MS + 20 * HOUR_MS, 0.015, series.get("pack_current"))
    corrected = type(series)(series.time_ms, {**series.columns, "pack_current": weak})
    (session,), _ = found_in(corrected, a_window(24, 48), START_MS + 20 * HOUR_MS)
    assert session.start_ms == START_MS + 20 * HOUR_MS


def test_a_session_that_ended_is_not_told_again():
    series = every(
        60, 48, pack_current=lambda t: np.where((t >= 8 * 3600) & (t <= 12 * 3600), 0.2, -0.01), pack_voltage=5.5
    )
    assert found_in(series, a_window(24, 48))[0] == []


def test_a_flicker_at_dawn_is_no_session():
    series = every(
        60, 24, pack_current=lambda t: np.where((t >= 8 * 3600) & (t <= 8 * 3600 + 120), 0.03, -0.01), pack_voltage=5.5
    )
    assert found_in(series, a_window())[0] == []


def test_a_pack_that_leaves_closes_its_session():
    series = every(60, 12, pack_current=0.2, pack_voltage=5.5)
    (session,), memory = found_in(series, a_window(0, 10, pack_leaves=True))
    assert session.end_ms == START_MS + 10 * HOUR_MS - 60_000
    assert session.ended_by == "unknown"
    assert memory.open_since_ms is None


def test_the_charge_after_full_is_the_models():
    # Acceptance scenario 11: about C/12, nothing that stops it, clear summer days, a closed box. Charge after full to
    # within 5 %.
    pack = pm.Pack(acceptance_from=0.95, cooling_s=3000.0)
    site = pm.Site(panel_a=2.0 / 8.0, sunrise_h=4.5, sunset_h=20.0, air_mean_c=26.0, air_swing_c=7.0, load_a=0.02)
    run = pm.simulate(pack, site, days=8, level=0.7)
    assert max(run.series.get("pack_temperature")) > 40.0
    result = days(run.series, a_node(), a_pack(), 8)
    told = [session.overcharge_ah for day in result for session in day.sessions]
    truth = run.over_ah
    assert len(told) == len(truth) == 8
    assert sum(told) == pytest.approx(sum(truth), rel=0.05)
    assert all(session.evidence["overcharge"]["met"] for day in result for session in day.sessions)


def test_a_small_trickle_on_a_cool_full_pack_is_not_flagged():
    # VARTA Microbattery's handbook allows a tenth of the capacity a day into a full pack (intermittent trickle charge).
    site = pm.Site(panel_a=2.0 / 40.0, air_mean_c=18.0, load_a=0.012)
    run = pm.simulate(site=site, days=3, level=0.97)
    result = days(run.series, a_node(), a_pack(), 3)
    flagged = [s.evidence.get("overcharge", {}).get("met", False) for day in result for s in day.sessions]
    assert flagged
    assert not any(flagged)


def test_a_cut_of_a_full_pack_ends_its_session_though_charging_comes_back():
    run = pm.simulate(
        pm.Pack(acceptance_from=0.93), pm.Site(panel_a=0.8), charger=pm.Charger("temperature", limit_c=38.0), level=0.6
    )
    stop_ms = START_MS + round(1000.0 * run.stopped_at_s[0])
    again = (run.series.time_ms > stop_ms + HOUR_MS) & (run.series.time_ms < stop_ms + 3 * HOUR_MS)
    current = np.where(again, 0.3, run.series.get("pack_current"))
    series = type(run.series)(run.series.time_ms, {**run.series.columns, "pack_current": current})
    first, second = found_in(series, a_window())[0]
    assert first.end_ms == pytest.approx(stop_ms, abs=120_000)
    assert first.full_at_ms is not None
    assert second.start_ms > stop_ms + HOUR_MS


def test_a_trickle_after_the_cut_belongs_to_the_session_and_is_overcharge():
    run = pm.simulate(
        pm.Pack(acceptance_from=0.93), pm.Site(panel_a=0.8), charger=pm.Charger("temperature", limit_c=38.0), level=0.6
    )
    stop_ms = START_MS + round(1000.0 * run.stopped_at_s[0])
    later = (run.series.time_ms > stop_ms) & (run.series.time_ms < START_MS + 17 * HOUR_MS)
    current = np.where(later, 0.06, run.series.get("pack_current"))
    series = type(run.series)(run.series.time_ms, {**run.series.columns, "pack_current": current})
    (session,), _ = found_in(series, a_window())
    assert session.end_ms == pytest.approx(START_MS + 17 * HOUR_MS, abs=120_000)
    assert session.ended_by != "sun-ended"
    trickle_ah = 0.06 * (session.end_ms - stop_ms) / HOUR_MS
    assert session.overcharge_ah >= trickle_ah - 0.01


def test_without_a_view_of_the_load_there_is_no_balance_to_judge_by():
    run = pm.simulate(site=pm.Site(panel_a=0.2), level=0.4)
    (session,), _ = found_in(run.series, a_window(), load_known=False)
    assert not {"charge-returned", "charge-held"} & set(session.evidence)
    assert session.start_ms < START_MS + DAY_MS
