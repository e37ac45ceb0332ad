import datetime as dt

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hub.solar.clearsky import STEP_MS, ClearSky, Panel, clear_sky, clear_sky_wh, plane_irradiance

pvlib = pytest.importorskip("pvlib")
pytestmark = pytest.mark.filterwarnings("ignore:DatetimeIndex.dayofyear:DeprecationWarning")
DAY_MS = 86_400_000
FLAT = Panel(39.742476, -105.1786, 1830.14, 10.0, 0.0, 180.0)


def at(*when):
    return round(dt.datetime(*when, tzinfo=dt.UTC).timestamp() * 1000)


def a_panel(**changes):
    made = {
        "latitude": 51.2,
        "longitude": -1.9,
        "altitude_m": 210.0,
        "power_w": 10.0,
        "tilt_deg": 35.0,
        "azimuth_deg": 180.0,
    }
    return Panel(**(made | changes))


def test_horizontal_irradiance_is_the_ineichen_model_of_pvlib():
    # Against pvlib's own Location class, which puts position, air mass, turbidity and model together by itself.
    import pandas as pd

    time_ms = at(2026, 3, 20) + np.arange(0, DAY_MS, 3_600_000)
    index = pd.DatetimeIndex(pd.to_datetime(time_ms, unit="ms", utc=True))
    reference = pvlib.location.Location(FLAT.latitude, FLAT.longitude, altitude=FLAT.altitude_m).get_clearsky(index)
    # On the horizontal the transposition is the identity but for its ground term, which is zero at tilt 0.
    assert plane_irradiance(FLAT, time_ms) == pytest.approx(reference["ghi"].to_numpy(), rel=0.005, abs=1.0)


def test_published_values_of_the_model_are_those_of_this_pvlib():
    # pvlib's test-suite: zenith 10°, absolute air mass 1, Linke turbidity 3.
    sky = pvlib.clearsky.ineichen(10.0, 1.0, 3.0)
    assert sky["ghi"] == pytest.approx(1038.159219, abs=1e-4)
    assert sky["dni"] == pytest.approx(942.2081860378344, abs=1e-4)
    # NREL SPA report (Reda and Andreas), its worked case; values by way of the pvlib test-suite.
    import pandas as pd

    sun = pvlib.solarposition.get_solarposition(
        pd.DatetimeIndex(["2003-10-17T19:30:30Z"]), 39.742476, -105.1786, 1830.14, pressure=82000.0, temperature=11.0
    )
    assert sun["apparent_zenith"].iloc[0] == pytest.approx(50.111622, abs=1e-4)
    assert sun["azimuth"].iloc[0] == pytest.approx(194.340241, abs=1e-4)


def test_power_follows_the_pvwatts_model():
    # pvlib's test-suite: 900 W/m², cell at 30 °C, 100 W, -0.3 %/K: 88.65 W.
    assert pvlib.pvsystem.pvwatts_dc(900.0, 30.0, 100.0, -0.003) == pytest.approx(88.65)
    sky = clear_sky(a_panel(), at(2026, 6, 21), at(2026, 6, 22), air_c=15.0)
    plane = plane_irradiance(a_panel(), sky.time_ms)
    noon = int(np.argmax(plane))
    # Faiman: 25 + 6.84 W/m²K at 1 m/s of wind.
    cell = 15.0 + plane[noon] / (25.0 + 6.84)
    assert sky.power_w[noon] == pytest.approx(10.0 * plane[noon] / 1000.0 * (1.0 - 0.004 * (cell - 25.0)), rel=1e-6)


def test_a_clear_june_day_in_southern_england_is_seven_to_eight_sun_hours():
    # Common practice, no source: a clear midsummer day at 51° N gives 7 to 8.5 kWh/m² in a tilted plane.
    assert 6.5 < clear_sky_wh(a_panel(), at(2026, 6, 21), at(2026, 6, 22)) / 10.0 < 8.5


def test_tilt_pays_in_winter_and_the_sun_side_depends_on_the_hemisphere():
    winter = at(2026, 12, 21), at(2026, 12, 22)
    assert clear_sky_wh(a_panel(tilt_deg=65.0), *winter) > 1.5 * clear_sky_wh(a_panel(tilt_deg=0.0), *winter)
    south = {"latitude": -35.0, "longitude": 149.0, "tilt_deg": 40.0}
    june = at(2026, 6, 20, 14), at(2026, 6, 21, 14)
    assert clear_sky_wh(a_panel(azimuth_deg=0.0, **south), *june) > 1.5 * clear_sky_wh(
        a_panel(azimuth_deg=180.0, **south), *june
    )


def test_polar_night_gives_nothing_and_polar_day_does_not_end():
    north = a_panel(latitude=78.2, longitude=15.6, altitude_m=20.0)
    assert clear_sky_wh(north, at(2026, 12, 21), at(2026, 12, 22)) == 0.0
    midsummer = clear_sky(north, at(2026, 6, 21), at(2026, 6, 22))
    assert (midsummer.power_w > 0.0).all()
    assert midsummer.energy_wh > 30.0


def test_a_warm_day_gives_less():
    day = at(2026, 6, 21), at(2026, 6, 22)
    assert clear_sky_wh(a_panel(), *day, air_c=35.0) < clear_sky_wh(a_panel(), *day, air_c=5.0)


@settings(max_examples=10, deadline=None)
@given(cut_ms=st.integers(1, DAY_MS - 1))
def test_a_day_split_anywhere_adds_up(cut_ms):
    start = at(2026, 4, 1)
    whole = clear_sky_wh(a_panel(), start, start + DAY_MS)
    parts = clear_sky_wh(a_panel(), start, start + cut_ms) + clear_sky_wh(a_panel(), start + cut_ms, start + DAY_MS)
    assert parts == pytest.approx(whole, rel=1e-9)


def test_steps_are_those_of_the_clock_cut_at_the_ends():
    sky = clear_sky(a_panel(), at(2026, 4, 1, 12, 2), at(2026, 4, 1, 12, 12))
    assert sky.time_ms.tolist() == [at(2026, 4, 1, 12) + k * STEP_MS + STEP_MS // 2 for k in range(3)]
    assert sky.seconds.tolist() == [180.0, 300.0, 120.0]
    assert clear_sky(a_panel(), at(2026, 4, 1), at(2026, 4, 1)).energy_wh == 0.0


def test_without_the_turbidity_table_a_constant_serves(monkeypatch):
    day = at(2026, 6, 21), at(2026, 6, 22)
    usual = clear_sky_wh(a_panel(), *day)

    def missing(*_, **__):
        raise OSError("no table")

    monkeypatch.setattr(pvlib.clearsky, "lookup_linke_turbidity", missing)
    assert clear_sky_wh(a_panel(), *day) == pytest.approx(usual, rel=0.1)


def test_energy_is_power_times_time():
    sky = ClearSky(np.array([0, 300_000]), np.array([10.0, 20.0]), np.array([300.0, 60.0]), 30.0)
    assert sky.energy_wh == pytest.approx((3000.0 + 1200.0) / 3600.0)
