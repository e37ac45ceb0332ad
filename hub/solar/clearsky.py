"""What a panel would give under a clear sky: the reference its harvest is held against.

Ineichen and Perez clear sky (Solar Energy 73 (2002) 151, doi:10.1016/S0038-092X(02)00045-2) with the monthly Linke
turbidity of the place, Hay and Davies transposition into the panel's plane, Faiman's module temperature
(doi:10.1002/pip.813) and the PVWatts power model (NREL/TP-6A20-62641), all as `pvlib` computes them.
"""

import warnings
from dataclasses import dataclass

import numpy as np

from hub.series import Floats, Times

# Typical crystalline silicon: -0.3 to -0.5 % a kelvin.
TEMPERATURE_COEFFICIENT = -0.004
AIR_C = 20.0
# Linke turbidity of clean mid-latitude air, where the table cannot be read.
TURBIDITY = 3.0
STEP_MS = 300_000


@dataclass(frozen=True, slots=True)
class Panel:
    """A panel and where it stands.

    Attributes
    ----------
    latitude, longitude, altitude_m
        North and east positive.
    power_w
        Rated, at 1000 W/m² and 25 °C (standard test conditions).
    tilt_deg, azimuth_deg
        Tilt from horizontal; azimuth clockwise from north.
    temperature_coefficient
        Of the power, a kelvin.
    """

    latitude: float
    longitude: float
    altitude_m: float
    power_w: float
    tilt_deg: float
    azimuth_deg: float
    temperature_coefficient: float = TEMPERATURE_COEFFICIENT


@dataclass(frozen=True, slots=True)
class ClearSky:
    """Clear-sky power over a window.

    Attributes
    ----------
    time_ms, power_w
        Shape (n,): middle of each step and the power there.
    seconds
        Shape (n,): how much of each step lies in the window.
    rated_power_w
        Of the panel.
    """

    time_ms: Times
    power_w: Floats
    seconds: Floats
    rated_power_w: float

    @property
    def energy_wh(self) -> float:
        """Energy over the window."""
        return float(self.power_w @ self.seconds) / 3600.0


def clear_sky(panel: Panel, start_ms: int, end_ms: int, air_c: float | None = None) -> ClearSky:
    """Clear-sky power in steps of 5 min from ``start_ms`` to ``end_ms``.

    The steps lie on whole five minutes of UTC and are cut at the ends, so that the energies of adjoining windows are
    that of the whole. Polar night and polar day need no special care: the sun's height decides, not its rising.

    Parameters
    ----------
    panel
        The panel.
    start_ms, end_ms
        UTC.
    air_c
        Air temperature; 20 °C where it is not known.
    """
    first = start_ms // STEP_MS
    starts = np.arange(first, max(-(-end_ms // STEP_MS), first), dtype=np.int64) * STEP_MS
    middle = starts + STEP_MS // 2
    inside = np.minimum(starts + STEP_MS, end_ms) - np.maximum(starts, start_ms)
    power = _power_w(panel, middle, AIR_C if air_c is None else air_c) if middle.size else np.empty(0)
    return ClearSky(middle, power, inside / 1000.0, panel.power_w)


def clear_sky_wh(panel: Panel, start_ms: int, end_ms: int, air_c: float | None = None) -> float:
    """Clear-sky energy of the panel over a window, in Wh."""
    return clear_sky(panel, start_ms, end_ms, air_c).energy_wh


def plane_irradiance(panel: Panel, time_ms: Times) -> Floats:
    """Clear-sky irradiance in the panel's plane at UTC instants, in W/m²; 0 while the sun is down."""
    import pandas as pd  # type: ignore[import-untyped, unused-ignore]  # its stubs are not always at hand
    import pvlib

    index = pd.DatetimeIndex(pd.to_datetime(time_ms, unit="ms", utc=True))
    latitude, longitude, altitude = panel.latitude, panel.longitude, panel.altitude_m
    with warnings.catch_warnings():
        # pvlib asks pandas for the day of the year by a name that a later pandas will drop.
        warnings.simplefilter("ignore", DeprecationWarning)
        sun = pvlib.solarposition.get_solarposition(index, latitude, longitude, altitude)
        airmass = pvlib.atmosphere.get_absolute_airmass(
            pvlib.atmosphere.get_relative_airmass(sun["apparent_zenith"]), pvlib.atmosphere.alt2pres(altitude)
        )
        try:
            turbidity = pvlib.clearsky.lookup_linke_turbidity(index, latitude, longitude)
        except (ImportError, OSError):
            turbidity = TURBIDITY
        extra = pvlib.irradiance.get_extra_radiation(index)
        sky = pvlib.clearsky.ineichen(sun["apparent_zenith"], airmass, turbidity, altitude, extra)
        plane = pvlib.irradiance.get_total_irradiance(
            panel.tilt_deg,
            panel.azimuth_deg,
            sun["apparent_zenith"],
            sun["azimuth"],
            sky["dni"],
            sky["ghi"],
            sky["dhi"],
            dni_extra=extra,
            model="haydavies",
        )
    irradiance: Floats = np.nan_to_num(plane["poa_global"].to_numpy(np.float64), nan=0.0).clip(min=0.0)
    return irradiance


def _power_w(panel: Panel, time_ms: Times, air_c: float) -> Floats:
    import pvlib

    irradiance = plane_irradiance(panel, time_ms)
    cell_c = pvlib.temperature.faiman(irradiance, air_c)
    power: Floats = pvlib.pvsystem.pvwatts_dc(irradiance, cell_c, panel.power_w, panel.temperature_coefficient)
    return power
