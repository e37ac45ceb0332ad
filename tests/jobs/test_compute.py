import json

import numpy as np
import pytest

from hub.battery.day import Carried
from hub.jobs.compute import compute, subject_of
from hub.jobs.windows import DayWindow
from hub.series import EMPTY, Series
from hub.solar.clearsky import ClearSky
from hub.store.inventory import Calibration, Fitting, Inventory, Node, Pack, Site
from hub.telemetry.screening import Finding, Screened

DAY = DayWindow(0, 86_400_000, "1970-01-01", "R-07")
KNOWN = Inventory(
    (Site("ridge", 51.2, -1.9, 210.0, "UTC"),),
    (
        Node("ridge-east", "ridge", 60.0, panel_power_w=10.0, panel_tilt_deg=35.0, panel_azimuth_deg=180.0),
        Node("ridge-west", "ridge", 60.0, current_gain_error=0.02),
    ),
    (Pack("R-07", "HR6", 8, 1, 2.4),),
    (Fitting("R-07", "ridge-east", 0, 86_400_000),),
    (
        Calibration("ridge-east", "pack_current", 5, 2.0),
        Calibration("ridge-east", "pack_current", 86_400_000, 3.0),
        Calibration("ridge-west", "pack_current", 5, 4.0),
    ),
)


def subject(node="ridge-east", window=DAY, newest_ms=10**12):
    return subject_of(KNOWN, KNOWN.node(node), window, newest_ms)


def constant(hours=24, current=0.1, extra=None):
    time_ms = np.arange(0, hours * 60 + 1, dtype=np.int64) * 60_000
    values = {"pack_current": current, "pack_voltage": 10.0, "panel_voltage": 18.0, "panel_current": 0.5}
    return Series(time_ms, {k: np.full(time_ms.size, v) for k, v in values.items()} | (extra or {}))


def test_a_subject_holds_what_applies_to_the_window_and_no_more():
    found = subject()
    assert found.pack.rated_capacity_ah == 2.4
    assert found.pack_leaves
    assert [c.gain for c in found.calibrations] == [2.0]
    assert found.panel.power_w == 10.0
    assert subject("ridge-west").panel is None


def test_stated_accuracies_are_used_and_others_keep_their_defaults():
    assert subject("ridge-west").node.current_gain_error == 0.02
    assert subject("ridge-east").node.current_gain_error == pytest.approx(0.0082)


def test_a_window_without_readings_has_nothing_to_say_and_hands_on_what_it_got():
    carried = Carried(pack="R-07", offset_a=0.001)
    result = compute(Screened(EMPTY), subject(), carried, None)
    assert result.day is None
    assert result.carried == carried
    assert not result.charges


def test_a_constant_current_gives_the_charge_that_one_reckons_by_hand():
    result = compute(Screened(constant()), subject(), Carried(), None)
    # 0.1 A for 24 h at 10 V: 2.4 Ah and 24 Wh; 0.5 A at 18 V from the panel: 216 Wh.
    assert result.day["charge_ah"] == pytest.approx(2.4)
    assert result.day["charge_wh"] == pytest.approx(24.0)
    assert result.day["panel_wh"] == pytest.approx(216.0)
    assert result.day["coverage"] == pytest.approx(1.0)
    assert result.day["clear_sky_wh"] is None
    assert [json.loads(row["evidence"]) for row in result.charges]


def test_what_has_not_happened_yet_is_not_missing():
    half = subject(newest_ms=12 * 3_600_000)
    result = compute(Screened(constant(hours=12)), half, Carried(), None)
    assert result.day["coverage"] == pytest.approx(1.0)
    assert result.newest_ms == 12 * 3_600_000


def test_the_clear_sky_is_held_against_the_panel_only_while_the_pack_is_not_full():
    sky = ClearSky(
        np.arange(150_000, 86_400_000, 300_000, dtype=np.int64), np.full(288, 9.0), np.full(288, 300.0), 10.0
    )
    result = compute(Screened(constant()), subject(), Carried(), sky)
    assert result.day["clear_sky_wh"] == pytest.approx(216.0)
    ratio = result.day["harvest_ratio"]
    assert ratio is None or ratio == pytest.approx(1.0, rel=0.01)


def test_findings_are_counted_inside_the_window_only():
    times = np.array([-5, 10, 20, 86_400_000], np.int64)
    found = Screened(constant(), (Finding("pack_temperature", "power-on", times),))
    assert compute(found, subject(), Carried(), None).findings == [
        {"quantity": "pack_temperature", "reason": "power-on", "count": 2, "first_ms": 10, "last_ms": 20}
    ]
