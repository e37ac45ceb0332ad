"""Weather of one region: sun, drifting clouds and air temperature, the same for neighbours but for the cloud's travel.

Everything is a function of seed, place and instant, so a node can ask for any stretch of time in any order.
"""

from dataclasses import dataclass
from math import cos, hypot, radians
from typing import Final

import numpy as np
import numpy.typing as npt

from hub.demo import noise, sun

Floats = npt.NDArray[np.float64]

_KM_PER_DEGREE: Final = 111.2
_DAY_S: Final = 86400.0
_YEAR_S: Final = 365.2425 * _DAY_S


@dataclass(frozen=True, slots=True)
class Place:
    """Where a node stands."""

    latitude: float
    longitude: float
    altitude_m: float = 0.0


@dataclass(frozen=True, slots=True)
class Light:
    """What the sky gives at instants, each of shape (n,): °, °, W/m², W/m² and °C."""

    elevation_deg: Floats
    azimuth_deg: Floats
    horizontal_w: Floats
    outside_w: Floats
    air_c: Floats

    def on_panel(self, tilt_deg: float, facing_deg: float, horizon_deg: float = 0.0) -> Floats:
        """Irradiance in the plane of a panel, W/m²."""
        return sun.on_plane(
            self.horizontal_w, self.elevation_deg, self.azimuth_deg, self.outside_w, tilt_deg, facing_deg, horizon_deg
        )


@dataclass(frozen=True, slots=True)
class Region:
    """Weather that neighbouring places share.

    Attributes
    ----------
    seed
        Decides everything.
    centre
        The place that clouds are timed by.
    mean_c, season_c, day_c
        Yearly mean at the centre's altitude, half the swing of the seasons, and half the swing of a clear day, °C.
    cloudy
        0 (clear for ever) to 1 (often overcast).
    wind_kmh, wind_from_deg
        How the clouds travel.
    """

    seed: int
    centre: Place
    mean_c: float = 13.0
    season_c: float = 8.5
    day_c: float = 5.5
    cloudy: float = 0.5
    wind_kmh: float = 30.0
    wind_from_deg: float = 260.0

    def light(self, time_s: Floats, place: Place) -> Light:
        """Sun, clouds and air at a place; ``time_s`` is UTC seconds since 1970, shape (n,)."""
        time_s = np.asarray(time_s, np.float64)
        elevation, azimuth = sun.position(time_s, place.latitude, place.longitude)
        clear = sun.haurwitz(elevation) * self.clearness(time_s, place)
        air = self.air_c(time_s, place)
        return Light(elevation, azimuth, clear, sun.outside_atmosphere(time_s), air)

    def cover(self, time_s: Floats) -> Floats:
        """Share of the sky under cloud, 0 to 1: fronts of a few days, and changes within a day."""
        slow = noise.smooth(time_s, 2.3 * _DAY_S, noise.salt(self.seed, "front"))
        hours = noise.smooth(time_s, 0.21 * _DAY_S, noise.salt(self.seed, "hours"))
        return np.clip(1.9 * (0.7 * slow + 0.3 * hours) - 1.2 + self.cloudy, 0.0, 1.0)

    def clearness(self, time_s: Floats, place: Place) -> Floats:
        """Horizontal irradiance over that of a clear sky, 0.15 to 1."""
        along_km, across_km = self._downwind(place)
        here = np.asarray(time_s, np.float64) - along_km / self.wind_kmh * 3600.0
        cover = self.cover(here)
        field = np.zeros(here.shape)
        for share, period_s, width_km in ((0.5, 1500.0, 12.0), (0.3, 420.0, 4.0), (0.2, 130.0, 2.0)):
            seed = noise.salt(self.seed, "cloud", round(period_s))
            field += share * noise.smooth_across(here, period_s, across_km / width_km, seed)
        # Cloud stands where the field lies below a threshold that rises with the cover; edges are soft.
        edge = np.clip((0.15 + 0.75 * cover - field) / 0.10, 0.0, 1.0) * np.clip(cover / 0.08, 0.0, 1.0)
        return 1.0 - edge * (0.50 + 0.35 * cover)

    def air_c(self, time_s: Floats, place: Place) -> Floats:
        """Air temperature, °C: season, weather and the hour by the sun; 6.5 K less per km of altitude."""
        time_s = np.asarray(time_s, np.float64)
        north = 1.0 if place.latitude >= 0.0 else -1.0
        # Coldest about 21 January in the north (mid-latitude climate, common practice, no source).
        season = -north * np.cos(2.0 * np.pi * (time_s / _YEAR_S - 20.0 / 365.2425))
        weather = noise.smooth(time_s, 3.1 * _DAY_S, noise.salt(self.seed, "air")) - 0.5
        hour = time_s / _DAY_S + place.longitude / 360.0
        cover = self.cover(time_s)
        day = -np.cos(2.0 * np.pi * (hour - 3.5 / 24.0)) * self.day_c * (1.0 - 0.65 * cover)
        height = -0.0065 * (place.altitude_m - self.centre.altitude_m)
        return self.mean_c + self.season_c * season + 9.0 * weather + day - 2.0 * (cover - 0.5) + height

    def _downwind(self, place: Place) -> tuple[float, float]:
        """Kilometres from the centre with the wind, and across it."""
        north = (place.latitude - self.centre.latitude) * _KM_PER_DEGREE
        east = (place.longitude - self.centre.longitude) * _KM_PER_DEGREE * cos(radians(self.centre.latitude))
        to = radians(self.wind_from_deg + 180.0)
        unit_east, unit_north = np.sin(to), np.cos(to)
        return float(east * unit_east + north * unit_north), float(north * unit_east - east * unit_north)

    def distance_km(self, one: Place, other: Place) -> float:
        """How far apart two places are."""
        (a, b), (c, d) = self._downwind(one), self._downwind(other)
        return hypot(a - c, b - d)
