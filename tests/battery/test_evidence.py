import json

import numpy as np
import pytest
from builders import START_MS, a_node, a_pack, every

from hub.battery import evidence as ev
from hub.battery.balance import Balance
from hub.battery.curve import Curve
from hub.battery.flow import flow
from hub.battery.heat import Heat

HOUR_MS = 3_600_000
MV = 0.001


def a_curve(hours=2.0, step_s=30.0, rate=0.5, cell=1.45, temperature=np.nan, air=np.nan, current=None, **changes):
    """A session of a 2 Ah pack; ``cell``, ``temperature``, ``air`` and ``current`` may be functions of minutes."""
    n = round(hours * 3600.0 / step_s)
    minutes = (np.arange(n) + 0.5) * step_s / 60.0

    def column(value):
        return value(minutes) if callable(value) else np.full(n, float(value))

    amps = column(2.0 * rate if current is None else current)
    made = {
        "time_ms": START_MS + np.round(60_000.0 * minutes).astype(np.int64),
        "step_s": step_s,
        "current_a": amps,
        "power_w": amps * 5.6,
        "temperature_c": column(temperature),
        "air_c": column(air),
        "cell_v": column(cell),
        "charge_ah": np.cumsum(amps) * step_s / 3600.0,
        "resistance_ohm": 0.2,
        "noise_v": 0.1 * MV,
    }
    return Curve(**(made | changes))


def peak_at(minute, fall_per_min, rise=0.05):
    return lambda m: np.where(m < minute, 1.45 + rise * (m / minute - 1.0), 1.45 - fall_per_min * (m - minute))


def at_min(found):
    return (found.at_ms - START_MS) / 60_000.0


class TestVoltageDrop:
    def test_a_fall_of_5_mv_from_the_peak_is_the_end(self):
        # 5 mV a cell: a cell maker's sheet; handbooks 5 to 10 mV.
        found = ev.voltage_drop(a_curve(cell=peak_at(90, 0.5 * MV)), a_pack())
        assert found.met
        assert found.weight == ev.DROP_WEIGHT
        assert at_min(found) == pytest.approx(90.0, abs=1.0)

    def test_a_smaller_fall_is_not(self):
        found = ev.voltage_drop(a_curve(cell=peak_at(90, 0.15 * MV)), a_pack())
        assert not found.met
        assert found.weight == 0.0
        assert found.value == pytest.approx(4.4 * MV, abs=0.5 * MV)

    def test_the_first_ten_minutes_do_not_count(self):
        # Hold-off up to 10 min: a maker's handbook, because rested cells show a false drop.
        early = lambda m: np.where(m < 4, 1.40 + 0.01 * m, np.where(m < 8, 1.44 - 0.005 * (m - 4), 1.42 + 0.0003 * m))  # noqa: E731
        assert not ev.voltage_drop(a_curve(cell=early), a_pack()).met

    def test_a_fall_with_the_current_is_the_clouds(self):
        clouds = lambda m: np.where((m // 12).astype(int) % 2 == 0, 1.0, 0.4)  # noqa: E731
        dips = lambda m: 1.40 + 0.0002 * m + np.where((m // 12).astype(int) % 2 == 0, 0.0, -0.012)  # noqa: E731
        assert not ev.voltage_drop(a_curve(cell=dips, current=clouds), a_pack()).met

    def test_a_fall_that_warmer_air_explains_is_not_the_end(self):
        # About -3 mV a kelvin under charge: 4 K of warmer air are 12 mV.
        air = lambda m: 18.0 + 4.0 * m / 120.0  # noqa: E731
        assert not ev.voltage_drop(a_curve(cell=lambda m: 1.45 - 0.0001 * m, air=air), a_pack()).met
        assert ev.voltage_drop(a_curve(cell=lambda m: 1.45 - 0.0001 * m), a_pack()).met

    def test_below_a_third_of_it_a_drop_does_not_stand_alone(self):
        # "Reliable from C/2, marginal at C/3": a charger maker's application note.
        found = ev.voltage_drop(a_curve(hours=8, rate=0.15, cell=peak_at(300, 0.2 * MV)), a_pack())
        assert found.met
        assert not found.decisive
        assert found.weight < ev.DROP_WEIGHT
        assert ev.voltage_drop(a_curve(hours=8, rate=0.08, cell=peak_at(300, 0.2 * MV)), a_pack()) is None

    def test_noise_raises_the_limit(self):
        found = ev.voltage_drop(a_curve(cell=peak_at(90, 0.3 * MV), noise_v=4 * MV), a_pack())
        assert found.limit == pytest.approx(16 * MV)
        assert not found.met


class TestTemperatureSlope:
    def test_the_slope_of_the_makers_sheet_is_the_end(self):
        # 0.8 °C/min at 0.5 It (a cell maker's sheet).
        warm = lambda m: 25.0 + np.maximum(m - 60.0, 0.0) * 0.9  # noqa: E731
        found = ev.temperature_slope(a_curve(temperature=warm, air=20.0), a_pack())
        assert found.met
        assert found.limit == pytest.approx(0.8)
        assert at_min(found) == pytest.approx(63.0, abs=2.0)

    def test_a_gentle_warming_is_not(self):
        warm = lambda m: 25.0 + 0.2 * m  # noqa: E731
        assert not ev.temperature_slope(a_curve(temperature=warm, air=20.0), a_pack()).met

    @pytest.mark.parametrize(
        "changes", [{"rate": 0.2, "temperature": 25.0}, {"rate": 0.5}, {"hours": 0.04, "temperature": 25.0}]
    )
    def test_it_needs_a_rate_a_thermometer_and_time(self, changes):
        assert ev.temperature_slope(a_curve(**changes), a_pack()) is None


class TestPlateau:
    def test_a_knee_and_then_no_more_is_a_plateau(self):
        knee = lambda m: 1.36 + 0.06 / (1.0 + np.exp(-(m - 500.0) / 30.0))  # noqa: E731
        found = ev.plateau(a_curve(hours=12, step_s=120, rate=0.08, cell=knee), a_pack())
        assert found.met
        assert 520 < at_min(found) < 620
        assert found.value == pytest.approx((720 - at_min(found)) / 60 * 0.08, abs=0.01)

    def test_a_voltage_that_still_rises_speaks_against_full(self):
        found = ev.plateau(a_curve(hours=8, step_s=120, rate=0.08, cell=lambda m: 1.36 + 0.0004 * m), a_pack())
        assert not found.met
        assert found.weight < 0.0

    def test_a_flat_voltage_without_a_knee_is_the_middle_of_the_charge(self):
        found = ev.plateau(a_curve(hours=8, step_s=120, rate=0.08, cell=lambda m: 1.36 + 0.00001 * m), a_pack())
        assert not found.met
        assert found.weight == 0.0

    def test_without_a_voltage_there_is_none(self):
        assert ev.plateau(a_curve(cell=np.nan), a_pack()) is None


class TestLevel:
    def test_1_41_volt_at_20_degrees_can_fill(self):
        # "Needs at least 1.41 V per cell at 20 °C to fill" at C/10: a battery supplier's note. With 0.2 ohm in four
        # cells 0.1 It adds 10 mV.
        assert ev.level(a_curve(cell=1.401, temperature=20.0), a_pack()).met
        assert not ev.level(a_curve(cell=1.395, temperature=20.0), a_pack()).met

    def test_a_warm_cell_needs_less(self):
        assert ev.level(a_curve(cell=1.380, temperature=30.0), a_pack()).met
        assert ev.level(a_curve(cell=1.380, air=30.0), a_pack()).met
        assert not ev.level(a_curve(cell=1.380), a_pack()).met

    def test_a_half_charged_cell_speaks_against_full(self):
        assert ev.level(a_curve(cell=1.33, temperature=20.0), a_pack()).weight < -2.0
        assert ev.level(a_curve(cell=np.nan), a_pack()) is None


class TestReturned:
    def found(self, hours, balance, factor=None, current=0.2):
        running = flow(every(60, hours, pack_current=current), a_node())
        return ev.returned(balance, running, 0, len(running.series) - 1, factor, a_pack(), a_node())

    def since_full(self, removed, returned=0.0):
        return Balance(START_MS, START_MS - 12 * HOUR_MS, START_MS - 12 * HOUR_MS, removed, returned)

    def test_less_than_was_removed_is_not_full(self):
        found = self.found(2, self.since_full(1.0))
        assert (found.rule, found.met) == ("charge-returned", False)
        assert found.weight == ev.BALANCE_WEIGHTS[0]

    def test_the_charge_factor_decides_when(self):
        found = self.found(8, self.since_full(1.0), factor=1.2)
        assert found.met
        # 1.2 Ah at 0.2 A are 6 h, and self-discharge of half a day wants its share.
        assert at_min(found) == pytest.approx(360.0, abs=10.0)
        assert self.found(5, self.since_full(1.0), factor=1.2).met is False

    def test_of_a_pack_of_unknown_level_only_the_brim_is_known(self):
        unknown = Balance(START_MS, START_MS)
        assert self.found(5, unknown).weight == 0.0
        certain = self.found(16, unknown)
        assert (certain.rule, certain.met) == ("charge-held", True)
        assert certain.weight > 2.0

    def test_time_without_readings_weakens_it(self):
        blind = Balance(START_MS, START_MS - 12 * HOUR_MS, START_MS - 12 * HOUR_MS, 0.6, 0.0, 8 * 3600.0)
        assert self.found(2, blind).weight > self.found(2, self.since_full(0.6)).weight

    def test_more_missing_than_a_pack_can_hold_is_not_believed(self):
        assert self.found(2, self.since_full(5.0)).weight == 0.0

    def test_without_a_view_of_the_load_there_is_no_balance(self):
        assert self.found(2, None) is None


class TestHeating:
    def heat(self, k, **changes):
        k = np.asarray(k, float)
        made = {
            "time_ms": START_MS + np.arange(k.size) * 300_000,
            "k_per_w": k,
            "before_k_per_w": float(k[0]),
            "limit_k_per_w": float(k[-1]),
            "possible_k": 1.0,
            "rise_k": float(k[-1] - k[0]),
            "lag_s": 1800.0,
            "explained": 0.95,
        }
        return Heat(**(made | changes))

    def test_all_power_as_heat_is_full(self):
        curve = a_curve(hours=5, step_s=300)
        found = ev.heating(curve, self.heat(np.where(np.arange(60) < 30, 1.0, 12.0)), 12.0, a_pack())
        assert found.met
        assert found.value == pytest.approx(1.0)
        assert found.weight == ev.HEAT_WEIGHT
        assert at_min(found) == 150.0

    def test_a_small_share_speaks_against_it(self):
        found = ev.heating(a_curve(hours=5, step_s=300), self.heat(np.full(60, 1.5)), 12.0, a_pack())
        assert not found.met
        assert found.weight == -ev.HEAT_WEIGHT

    def test_what_a_full_pack_does_can_show_itself_within_a_session(self):
        risen = self.heat(np.where(np.arange(60) < 30, 1.0, 12.0))
        assert ev.rose_to_rest(risen)
        assert ev.heating(a_curve(hours=5, step_s=300), risen, None, a_pack()).weight == ev.HEAT_WEIGHT

    def test_otherwise_mass_and_time_constant_give_a_weaker_guess(self):
        # 8 Ah of cells at 15 J/K an Ah: 120 J/K; 1800 s make 15 K/W.
        flat = self.heat(np.full(60, 15.0))
        assert not ev.rose_to_rest(flat)
        found = ev.heating(a_curve(hours=5, step_s=300), flat, None, a_pack())
        assert found.value == pytest.approx(1.0)
        assert found.weight == 0.5 * ev.HEAT_WEIGHT

    def test_heat_that_cannot_be_seen_says_nothing(self):
        assert ev.heating(a_curve(), self.heat(np.full(24, 1.0), possible_k=0.05), 12.0, a_pack()) is None
        assert ev.heating(a_curve(), None, 12.0, a_pack()) is None


def test_evidence_leaves_as_plain_values():
    found = ev.Evidence("voltage-drop", True, 0.0061234, 0.005, "V per cell", 4.5, START_MS, 20.0)
    assert json.loads(json.dumps(found.as_json())) == {
        "met": True,
        "value": 0.00612,
        "limit": 0.005,
        "unit": "V per cell",
        "weight": 4.5,
        "at_ms": START_MS,
    }


def test_the_usual_current_of_nothing_is_zero():
    assert ev.usual_a(a_curve(current=np.nan)) == 0.0
