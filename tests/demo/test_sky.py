"""Weather of the invented region: its light, and what neighbours share."""

import datetime as dt

import numpy as np
import pytest

from hub.demo import sun
from hub.demo.sky import Place, Region

CENTRE = Place(43.3, 11.9, 240.0)
NEAR = Place(43.35, 11.98, 240.0)
FAR = Place(44.9, 8.0, 240.0)
REGION = Region(11, CENTRE)
START = dt.datetime(2026, 3, 1, tzinfo=dt.UTC).timestamp()
MONTH = START + np.arange(0.0, 60 * 86400.0, 60.0)


def test_any_stretch_can_be_computed_alone() -> None:
    whole = REGION.light(MONTH[:4320], CENTRE)
    parts = [REGION.light(part, CENTRE) for part in np.array_split(MONTH[:4320], 5)]
    assert np.array_equal(np.concatenate([p.horizontal_w for p in parts]), whole.horizontal_w)
    assert np.array_equal(np.concatenate([p.air_c for p in parts]), whole.air_c)
    assert REGION.light(MONTH[777:778], CENTRE).horizontal_w[0] == whole.horizontal_w[777]


def test_another_seed_is_another_weather() -> None:
    assert not np.array_equal(Region(12, CENTRE).clearness(MONTH, CENTRE), REGION.clearness(MONTH, CENTRE))


def test_light_never_exceeds_a_clear_sky_and_nights_are_dark() -> None:
    light = REGION.light(MONTH, CENTRE)
    assert (light.horizontal_w <= sun.haurwitz(light.elevation_deg) + 1e-9).all()
    assert not light.horizontal_w[light.elevation_deg < 0.0].any()
    assert not light.on_panel(60.0, 10.0)[light.elevation_deg < 0.0].any()
    assert REGION.clearness(MONTH, CENTRE).min() >= 0.15


def test_there_are_clear_days_grey_days_and_broken_ones() -> None:
    light = REGION.light(MONTH, CENTRE)
    clear = sun.haurwitz(light.elevation_deg).reshape(-1, 1440).sum(1)
    share = light.horizontal_w.reshape(-1, 1440).sum(1) / clear
    assert (share > 0.95).sum() >= 5
    assert (share < 0.45).sum() >= 3
    assert ((share > 0.5) & (share < 0.9)).sum() >= 8


def test_neighbours_share_clouds_a_little_later_and_strangers_do_not() -> None:
    def likeness(place: Place) -> float:
        """Correlation of the changes within ten minutes with those at the centre, after the cloud's travel."""
        lag_s = REGION._downwind(place)[0] / REGION.wind_kmh * 3600.0
        here, there = REGION.clearness(MONTH, CENTRE), REGION.clearness(MONTH + lag_s, place)
        return float(np.corrcoef(here[10:] - here[:-10], there[10:] - there[:-10])[0, 1])

    assert REGION._downwind(NEAR)[0] / REGION.wind_kmh * 60.0 > 5.0
    # The smallest clouds are two kilometres wide: a field away they are the same, a valley away only the larger ones.
    assert likeness(Place(43.304, 11.906)) > 0.75
    assert likeness(NEAR) > 0.1
    assert abs(likeness(FAR)) < 0.05
    # Without the travel time they already see the same weather, though not the same minute.
    day = REGION.light(MONTH, CENTRE).elevation_deg > 10.0
    assert np.corrcoef(REGION.clearness(MONTH, CENTRE)[day], REGION.clearness(MONTH, NEAR)[day])[0, 1] > 0.7


def test_the_same_place_has_the_same_sky() -> None:
    assert np.array_equal(REGION.clearness(MONTH, CENTRE), REGION.clearness(MONTH, Place(43.3, 11.9, 900.0)))


def test_air_follows_day_season_and_height() -> None:
    year = START + np.arange(0.0, 365 * 86400.0, 1800.0)
    air = REGION.air_c(year, CENTRE)
    assert air.mean() == pytest.approx(13.0, abs=1.5)
    day_of_year = (year / 86400.0) % 365.2425
    winter = air[(day_of_year < 59)].mean()
    summer = air[(day_of_year > 182) & (day_of_year < 244)].mean()
    assert 12.0 < summer - winter < 20.0
    hour = (year / 3600.0 + 11.9 / 15.0) % 24.0
    assert air[(hour > 14) & (hour < 16)].mean() - air[(hour > 2) & (hour < 5)].mean() > 4.0
    assert REGION.air_c(year, Place(43.3, 11.9, 1240.0)).mean() == pytest.approx(air.mean() - 6.5)
    assert REGION.air_c(year[:2], Place(-43.3, 11.9, 240.0))[0] > air[0]


def test_distance() -> None:
    # A degree of latitude is about 111 km, one of longitude that times the cosine of the latitude.
    assert REGION.distance_km(CENTRE, Place(43.4, 11.9)) == pytest.approx(11.1, abs=0.1)
    assert REGION.distance_km(CENTRE, Place(43.3, 12.0)) == pytest.approx(11.1 * 0.728, abs=0.1)
