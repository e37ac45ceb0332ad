import numpy as np
import pytest
from builders import START_MS, a_pack

from hub.battery.curve import Curve
from hub.battery.heat import fit

STEP_S = 120.0


def session(share, lag_s=2400.0, k_per_w=12.0, hours=8.0, cloudy=False, air_swing=6.0, start_above=-1.0):
    """A curve whose pack obeys the heat balance of a lump: C dT/dt = share * P - (T - air) / R, R = k, C = lag / k."""
    n = round(hours * 3600.0 / STEP_S)
    t = np.arange(n) * STEP_S
    rng = np.random.default_rng(3)
    power = 1.2 * np.sin(np.pi * (t + STEP_S) / (t[-1] + 2 * STEP_S))
    if cloudy:
        power *= np.repeat(rng.choice([0.25, 1.0], n), 3)[:n]
    air = 18.0 + air_swing * np.sin(np.pi * t / t[-1] / 1.4)
    charge = np.cumsum(power / 5.6) * STEP_S / 3600.0
    share = share(charge) if callable(share) else np.broadcast_to(share, (n,))
    temperature = np.empty(n)
    now = air[0] + start_above
    fine = 12
    for k in range(n):
        for _ in range(fine):
            now += STEP_S / fine / lag_s * (k_per_w * share[k] * power[k] - (now - air[k]))
        temperature[k] = now
    return Curve(
        time_ms=START_MS + np.round(1000.0 * t).astype(np.int64),
        step_s=STEP_S,
        current_a=power / 5.6,
        power_w=power,
        temperature_c=np.round((temperature + rng.normal(0.0, 0.03, n)) / 0.0625) * 0.0625,
        air_c=np.round((air + rng.normal(0.0, 0.03, n)) / 0.0625) * 0.0625,
        cell_v=np.full(n, 1.4),
        charge_ah=charge,
        resistance_ohm=0.2,
        noise_v=0.0,
    )


@pytest.mark.parametrize("cloudy", [False, True])
@pytest.mark.parametrize("lag_s", [900.0, 2400.0])
def test_a_sudden_end_is_found_with_its_size_its_time_and_the_packs_own_numbers(cloudy, lag_s):
    at_ah = 0.6
    curve = session(lambda q: np.where(q < at_ah, 0.1, 1.0), lag_s=lag_s, cloudy=cloudy)
    heat = fit(curve, a_pack())
    assert heat is not None
    assert heat.before_k_per_w == pytest.approx(1.2, abs=0.6)
    assert heat.limit_k_per_w == pytest.approx(12.0, rel=0.15)
    assert heat.lag_s == pytest.approx(lag_s, rel=0.45)
    truth = curve.time_ms[int(np.argmax(curve.charge_ah >= at_ah))]
    found = heat.time_ms[int(np.argmax(heat.k_per_w >= 0.5 * heat.limit_k_per_w))]
    assert abs(int(found - truth)) < 15 * 60_000
    assert heat.explained > 0.9


def test_a_gradual_end_is_followed():
    curve = session(lambda q: 0.1 + 0.9 * (1.0 - np.exp(-np.maximum(q - 0.4, 0.0) / 0.16)), cloudy=True)
    heat = fit(curve, a_pack())
    truth = 12.0 * (0.1 + 0.9 * (1.0 - np.exp(-np.maximum(curve.charge_ah - 0.4, 0.0) / 0.16)))
    found = np.interp(curve.time_ms, heat.time_ms, heat.k_per_w)
    strong = curve.power_w > 0.3
    assert found[strong] == pytest.approx(truth[strong], abs=1.5)


def test_a_pack_that_stores_what_it_gets_shows_no_change():
    heat = fit(session(0.1, cloudy=True), a_pack())
    assert heat.k_per_w[-1] == pytest.approx(1.2, abs=0.6)
    assert heat.rise_k < 0.5


def test_a_pack_that_is_full_all_along_shows_its_full_heat():
    heat = fit(session(1.0), a_pack(), lag_s=2400.0)
    assert heat.k_per_w[-1] == pytest.approx(12.0, rel=0.1)


def test_warmer_air_is_not_taken_for_heat():
    heat = fit(session(0.05, air_swing=15.0, start_above=-4.0), a_pack())
    assert heat.rise_k < 0.7


def test_without_temperatures_power_or_time_there_is_no_fit():
    curve = session(0.5)
    nan = np.full(curve.time_ms.size, np.nan)
    for missing in ({"air_c": nan}, {"temperature_c": nan}, {"power_w": 0.0 * curve.power_w}, {"power_w": nan}):
        fields = {name: getattr(curve, name) for name in Curve.__slots__} | missing
        assert fit(Curve(**fields), a_pack()) is None
    short = {
        name: value[:5] if isinstance(value := getattr(curve, name), np.ndarray) else value for name in Curve.__slots__
    }
    assert fit(Curve(**short), a_pack()) is None


def test_a_charge_of_many_times_the_capacity_is_no_accident():
    curve = session(1.0)
    heat = fit(curve, a_pack(rated_capacity_ah=0.01), lag_s=2400.0)
    assert np.isfinite(heat.k_per_w).all()
    assert heat.k_per_w[-1] == pytest.approx(12.0, rel=0.15)
