"""Where the sun stands and what it gives to a tilted panel. Arrays in, arrays out; times are UTC seconds since 1970.

Written from the published equations so that the demonstration starts at once; the tests compare it with a reference
library of the trade.
"""

from typing import Final

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

_J2000_S: Final = 946_728_000.0  # 2000-01-01T12:00:00Z
SOLAR_CONSTANT_W: Final = 1361.0
ALBEDO: Final = 0.2


def position(time_s: Floats, latitude_deg: float, longitude_deg: float) -> tuple[Floats, Floats]:
    """True elevation and azimuth (clockwise from north) of the sun, degrees, shape of ``time_s``.

    Michalsky, Solar Energy 40 (1988) 227-235, doi:10.1016/0038-092X(88)90045-X: good to about 0.01° until 2050.
    """
    days = (np.asarray(time_s, np.float64) - _J2000_S) / 86400.0
    anomaly = np.radians(357.528 + 0.9856003 * days)
    mean_longitude = 280.460 + 0.9856474 * days
    ecliptic = np.radians(mean_longitude + 1.915 * np.sin(anomaly) + 0.020 * np.sin(2.0 * anomaly))
    oblique = np.radians(23.439 - 4e-7 * days)
    ascension = np.arctan2(np.cos(oblique) * np.sin(ecliptic), np.cos(ecliptic))
    declination = np.arcsin(np.sin(oblique) * np.sin(ecliptic))
    # Sidereal time in degrees: 18.697374558 h at J2000 and 24.06570982441908 h a day.
    sidereal = np.radians((280.46061837 + 360.98564736629 * days + longitude_deg) % 360.0)
    hour = sidereal - ascension
    latitude = np.radians(latitude_deg)
    sine = np.sin(latitude) * np.sin(declination) + np.cos(latitude) * np.cos(declination) * np.cos(hour)
    east = -np.cos(declination) * np.sin(hour)
    north = np.sin(declination) * np.cos(latitude) - np.cos(declination) * np.sin(latitude) * np.cos(hour)
    elevation = np.degrees(np.arcsin(np.clip(sine, -1.0, 1.0)))
    return elevation, np.degrees(np.arctan2(east, north)) % 360.0


def haurwitz(elevation_deg: Floats) -> Floats:
    """Clear-sky horizontal irradiance, W/m²: 1098 cos θ exp(-0.059 / cos θ), θ from the zenith; 0 below the horizon.

    Haurwitz, J. Meteorology 2 (1945) 154-166 and 3 (1946) 123-124.
    """
    cosine = np.sin(np.radians(elevation_deg))
    up = np.maximum(cosine, 1e-6)
    return np.where(cosine > 0.0, 1098.0 * up * np.exp(-0.059 / up), 0.0)


def outside_atmosphere(time_s: Floats) -> Floats:
    """Irradiance on a plane that faces the sun above the air, W/m²: Spencer, Search 2 (1971) 172, first terms."""
    year_angle = 2.0 * np.pi * (np.asarray(time_s, np.float64) / 86400.0 % 365.2425) / 365.2425
    return SOLAR_CONSTANT_W * (1.00011 + 0.034221 * np.cos(year_angle) + 0.00128 * np.sin(year_angle))


def diffuse(horizontal_w: Floats, elevation_deg: Floats, outside_w: Floats) -> Floats:
    """The part of horizontal irradiance that comes from the whole sky, W/m².

    Erbs, Klein and Duffie, Solar Energy 28 (1982) 293-302, doi:10.1016/0038-092X(82)90302-4.
    """
    sine = np.maximum(np.sin(np.radians(elevation_deg)), 0.065)
    kt = np.clip(horizontal_w / (outside_w * sine), 0.0, 2.0)
    middle = 0.9511 - 0.1604 * kt + 4.388 * kt**2 - 16.638 * kt**3 + 12.336 * kt**4
    share = np.where(kt <= 0.22, 1.0 - 0.09 * kt, np.where(kt > 0.8, 0.165, middle))
    return share * horizontal_w


def on_plane(
    horizontal_w: Floats,
    elevation_deg: Floats,
    azimuth_deg: Floats,
    outside_w: Floats,
    tilt_deg: float,
    facing_deg: float,
    horizon_deg: float = 0.0,
) -> Floats:
    """Irradiance in the plane of a panel, W/m²: direct, isotropic sky (Liu and Jordan 1963) and ground.

    ``horizon_deg`` is a ridge all round: below it the direct part is gone and so is that share of the sky.
    """
    spread = diffuse(horizontal_w, elevation_deg, outside_w)
    up = np.radians(elevation_deg)
    tilt = np.radians(tilt_deg)
    facing = np.radians(azimuth_deg - facing_deg)
    incidence = np.sin(up) * np.cos(tilt) + np.cos(up) * np.sin(tilt) * np.cos(facing)
    beam = (horizontal_w - spread) / np.maximum(np.sin(up), 0.035)
    seen = np.cos(np.radians(horizon_deg)) ** 2
    direct = np.where(elevation_deg > horizon_deg, beam * np.maximum(incidence, 0.0), 0.0)
    sky = spread * seen * (1.0 + np.cos(tilt)) / 2.0
    ground = ALBEDO * horizontal_w * seen * (1.0 - np.cos(tilt)) / 2.0
    return np.where(elevation_deg > 0.0, direct + sky + ground, 0.0)
