import numpy as np
import pytest
from builders import START_MS, a_node, a_pack, every, readings

from hub.battery.curve import curve, step_resistance
from hub.battery.flow import flow

SEED = 7


def of(series, pack=None, node=None):
    running = flow(series, node or a_node())
    return curve(running, 0, len(running.series) - 1, pack or a_pack(), node or a_node())


def test_steps_are_finer_the_faster_the_pack_fills():
    assert of(every(10, 2, pack_current=1.0, pack_voltage=5.5), node=a_node(interval_s=10.0)).step_s == pytest.approx(
        12.0, rel=0.01
    )
    assert of(every(10, 2, pack_current=0.05, pack_voltage=5.5), node=a_node(interval_s=10.0)).step_s == 120.0
    assert of(every(300, 8, pack_current=1.0, pack_voltage=5.5), node=a_node(interval_s=300.0)).step_s == 300.0


def test_means_of_a_session():
    shape = of(every(60, 4, pack_current=0.2, pack_voltage=5.6, pack_temperature=25.0, air_temperature=20.0))
    assert shape.current_a == pytest.approx(0.2)
    assert shape.power_w == pytest.approx(1.12)
    assert shape.temperature_c == pytest.approx(25.0)
    assert shape.charge_ah[-1] == pytest.approx(0.8, abs=0.01)
    assert shape.time_ms[0] == START_MS + round(500.0 * shape.step_s)
    assert shape.noise_v == pytest.approx(0.0, abs=1e-9)


def test_cloud_steps_show_the_resistance_and_leave_a_smooth_voltage():
    rng = np.random.default_rng(SEED)
    ohm = 0.24
    cloudy = np.repeat(rng.uniform(0.2, 1.0, 200), 4) * 0.4
    t = np.arange(cloudy.size) * 60.0
    rise = 5.2 + 0.3 * t / t[-1]
    volts = rise + ohm * cloudy + rng.normal(0.0, 0.001, t.size)
    shape = of(readings(t, pack_current=cloudy, pack_voltage=volts))
    assert shape.resistance_ohm == pytest.approx(ohm, rel=0.03)
    assert shape.cell_v == pytest.approx(np.interp(shape.time_ms, START_MS + 1000 * t, rise) / 4, abs=0.002)
    assert shape.noise_v == pytest.approx(0.001 / 4, rel=0.6)


def test_a_clear_morning_is_not_taken_for_resistance():
    # Current and voltage rise together for hours: that is the sun and the level, not ohms.
    t = np.arange(0.0, 6 * 3600.0, 60.0)
    current = 0.4 * np.sin(np.pi * t / t[-1] / 2.0) + 0.02
    shape = of(readings(t, pack_current=current, pack_voltage=5.2 + 0.3 * t / t[-1]))
    assert shape.resistance_ohm == pytest.approx(0.10 * 4 / 2.0, rel=0.5)


def test_noise_in_a_steady_current_is_not_taken_for_resistance():
    current = 1.0 + np.random.default_rng(SEED).normal(0.0, 0.05, 2000)
    r = step_resistance(current, 5.5 + 0.0 * current, a_pack())
    assert r == pytest.approx(0.0, abs=0.005)


def test_too_few_steps_leave_the_typical_cell():
    assert step_resistance(np.array([0.3]), np.array([5.4]), a_pack()) == pytest.approx(0.2)
    assert step_resistance(np.full(9, np.nan), np.full(9, np.nan), a_pack()) == pytest.approx(0.2)
    assert step_resistance(np.full(9, 0.3), np.full(9, np.nan), a_pack()) == pytest.approx(0.2)


def test_missing_sensors_are_missing_in_the_curve():
    shape = of(every(60, 1, pack_current=0.2))
    assert np.isnan(shape.cell_v).all()
    assert np.isnan(shape.temperature_c).all()
    assert shape.noise_v == 0.0


def test_one_reading_makes_one_step():
    shape = of(readings([0], pack_current=0.2, pack_voltage=5.0))
    assert shape.time_ms.size == 1
    assert shape.charge_ah.tolist() == [0.0]
