"""Panels and chargers."""

import numpy as np
import pytest

from hub.demo.cell import FULL_ACCEPTANCE, Pack, PackDesign
from hub.demo.charger import DIODE_V, Charger, Delivery, Direct, EndRule, Lit, Panel, Regulated, Tuning

PANEL = Panel(20.0, 21.5, 1.25, tilt_deg=50.0, facing_deg=180.0)


def test_a_panel_meets_its_label() -> None:
    lit = PANEL.lit(1000.0, 25.0 - PANEL.rise_k * 1.25)
    volts = np.linspace(0.0, 22.0, 400)
    amps = np.array([lit.current(v) for v in volts])
    assert amps[0] == pytest.approx(1.25, rel=0.001)
    assert lit.open_v == pytest.approx(21.5, rel=0.001)
    assert (volts * amps).max() == pytest.approx(20.0, rel=0.06)
    assert (np.diff(amps) <= 0.0).all()


def test_a_warm_panel_has_less_voltage() -> None:
    # Silicon loses about 0.3 % of its voltage per kelvin (typical, from memory).
    cold, warm = PANEL.lit(800.0, 0.0), PANEL.lit(800.0, 40.0)
    assert cold.open_v / warm.open_v - 1.0 == pytest.approx(0.13, abs=0.03)


def test_a_dark_panel_gives_nothing_and_takes_nothing() -> None:
    assert PANEL.lit(0.0, 20.0).current(-1.0) == 0.0
    assert PANEL.lit(300.0, 20.0).current(30.0) == 0.0


def test_a_diode_charges_where_panel_and_pack_meet() -> None:
    lit = Panel(2.0, 8.0, 0.3, 40.0, 180.0).lit(700.0, 15.0)
    given = Direct().deliver(lit, 6.0, 0.3, 0.05, 60.0)
    assert given.panel_a == given.charge_a == pytest.approx(lit.current(given.panel_v), abs=1e-3)
    assert given.panel_v == pytest.approx(6.0 + DIODE_V + 0.3 * (given.charge_a - 0.05), abs=1e-6)
    assert given.duty is given.target_a is None


def test_a_diode_blocks_when_the_pack_is_higher() -> None:
    lit = Panel(2.0, 8.0, 0.3, 40.0, 180.0).lit(700.0, 15.0)
    assert Direct().deliver(lit, 9.5, 0.3, 0.0, 60.0) == Delivery(0.0, lit.open_v, 0.0)
    assert Direct().deliver(Lit(0.0, 0.0, 0.5), 6.0, 0.3, 0.0, 60.0) == Delivery(0.0, 0.0, 0.0)


BRIGHT, DIM = Lit(1.2, 20.0, 1.2), Lit(0.2, 18.0, 1.2)


def currents(charger: Regulated, lights: list[Lit], dt_s: float = 10.0, load_a: float = 0.05) -> np.ndarray:
    return np.array([charger.deliver(lit, 8.0, 0.2, load_a, dt_s).charge_a - load_a for lit in lights])


def test_a_well_tuned_regulator_holds_its_target_for_the_pack() -> None:
    amps = currents(Regulated(0.5, Tuning()), [BRIGHT] * 60)
    assert amps[-10:] == pytest.approx(0.5, abs=0.005)
    assert amps.max() < 0.65


def test_a_regulator_cannot_give_more_than_the_panel() -> None:
    charger = Regulated(0.5, Tuning())
    assert currents(charger, [DIM] * 30)[-1] == pytest.approx(0.2 - 0.05, abs=0.002)
    assert charger.deliver(DIM, 8.0, 0.2, 0.05, 10.0).duty == 1.0


def test_a_slow_gain_with_a_delay_hunts() -> None:
    steady = currents(Regulated(0.5, Tuning(period_s=60.0, integral=0.3, proportional=0.0)), [BRIGHT] * 200, 60.0)
    hunting = Regulated(0.5, Tuning(period_s=60.0, integral=1.1, proportional=0.0, delay=1, slew=0.12))
    swing = currents(hunting, [BRIGHT] * 200, 60.0)[100:]
    assert np.ptp(steady[100:]) < 0.01
    assert np.ptp(swing) > 0.15
    crossings = np.count_nonzero(np.diff(np.sign(swing - 0.5)))
    assert 10 < crossings < 60


def test_an_integral_that_winds_up_overshoots_after_a_cloud() -> None:
    lights = [BRIGHT] * 100 + [DIM] * 60 + [BRIGHT] * 100
    wound = currents(Regulated(0.5, Tuning(windup=2.5)), lights)
    held = currents(Regulated(0.5, Tuning(windup=1.0)), lights)
    assert (wound[160:] > 0.6).sum() > (held[160:] > 0.6).sum() + 2
    assert wound[-1] == pytest.approx(0.5, abs=0.01)


def test_the_regulator_runs_at_its_own_period() -> None:
    fine = currents(Regulated(0.5, Tuning(period_s=60.0)), [BRIGHT] * 360, 10.0)
    coarse = currents(Regulated(0.5, Tuning(period_s=60.0)), [BRIGHT] * 60, 60.0)
    assert fine.reshape(-1, 6).mean(1) == pytest.approx(coarse, abs=1e-9)


def charge(charger: Charger, pack: Pack, hours: float, lit: Lit = BRIGHT) -> list[float]:
    amps = []
    for _ in range(round(hours * 60)):
        given = charger.deliver(lit, *pack.source(), 0.0, 60.0)
        pack.step(given.charge_a, 20.0, 60.0)
        charger.watch(pack.voltage_v, pack.temperature_c, given.charge_a, lit.light_a == 0.0, 60.0)
        amps.append(given.charge_a)
    return amps


def fresh() -> Pack:
    return Pack(PackDesign(6, 2.0, loss_w_per_k=0.012), 0.4)


NEVER = {"drop_v": 9.0, "slope_c_per_min": 99.0, "hot_c": 99.0, "timer_s": 1e9}


@pytest.mark.parametrize(
    "rule",
    [{"drop_v": 0.006}, {"slope_c_per_min": 0.5}, {"hot_c": 36.0}, {"timer_s": 1.2 * 3600.0}],
    ids=["voltage drop", "temperature slope", "temperature", "timer"],
)
def test_a_charger_ends_by_its_rule(rule: dict[str, float]) -> None:
    pack = fresh()
    charger = Regulated(1.0, Tuning(), EndRule(6, 2.0, **(NEVER | rule)))
    amps = charge(charger, pack, 4.0)
    assert charger.ended
    assert amps[-1] < 0.01
    if "timer_s" not in rule:
        assert pack.level > 0.93
    assert pack.overcharge_ah < 0.5


def test_a_charger_that_misses_the_end_goes_on() -> None:
    pack = fresh()
    charger = Regulated(0.4, Tuning(), EndRule(6, 2.0, drop_v=0.040))
    amps = charge(charger, pack, 9.0)
    assert not charger.ended
    assert amps[-1] == pytest.approx(0.4, abs=0.02)
    assert pack.acceptance < FULL_ACCEPTANCE
    assert pack.overcharge_ah > 1.5


def test_a_cut_charger_trickles_and_starts_again_after_a_night() -> None:
    pack = fresh()
    charger = Regulated(1.0, Tuning(), EndRule(6, 2.0, drop_v=0.006, trickle_a=0.05))
    assert charge(charger, pack, 4.0)[-1] == pytest.approx(0.05, abs=0.005)
    charge(charger, pack, 0.5, Lit(0.0, 0.0, 1.2))
    assert charger.ended
    charge(charger, pack, 0.6, Lit(0.0, 0.0, 1.2))
    assert not charger.ended
    assert max(charge(charger, pack, 0.2)) > 0.5
