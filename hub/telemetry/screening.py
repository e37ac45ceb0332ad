"""Values that a sensor cannot have meant, and why each was set aside.

Nothing here alters what was stored: screening yields a copy of a series in which a value that is not to be used is
NaN. A current at the end of its range is different: it is known to be at least that, so it stays and is marked.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Final

import numpy as np

from hub.quantities import BY_NAME
from hub.series import Floats, Mask, Series, Times

THERMOMETERS: Final = ("pack_temperature", "air_temperature")
CURRENTS: Final = ("pack_current", "panel_current", "load_current")

# A one-wire digital thermometer that lost its supply before converting reads its power-on register, 0550h = 85 °C
# (DS18B20 datasheet); libraries write -127 °C where no sensor answers.
POWER_ON_C: Final = 85.0
DISCONNECTED_C: Final = -127.0
# Common practice, no source: 85 is not believed where a neighbour within 10 min is more than 10 °C away. On nodes that
# report less often, the neighbourhood is three of their own intervals, at most 2 h.
NEIGHBOUR_C: Final = 10.0
NEIGHBOUR_MS: Final = 10 * 60 * 1000
NEIGHBOUR_INTERVALS: Final = 3
NEIGHBOUR_MOST_MS: Final = 2 * 3600 * 1000
# Common practice, no source: no box or pack warms by 15 °C and cools again within three readings less than 10 min
# apart, and no pack's voltage leaves its usual level by 30 % for a single reading. Currents and panel voltages do
# such things whenever a load switches or a cloud passes, so they have no such rule.
SPIKE_C: Final = 15.0
SPIKE_OF_LEVEL: Final = 0.30
# Common practice, no source: a value that repeats to the last digit is stuck where noise of a step at least is to be
# expected: for 30 min on a voltage while the current moves enough to move it by two of its own steps, for 2 h on a
# thermometer that flickers before and after or whose companion moved by 2 °C. Ten readings at least, so that rare
# reports are not judged. The voltage to expect is reckoned with 30 milliohm a cell of 1.25 V and a converter step of
# 4 mV where the series shows no smaller one.
FROZEN_VOLTAGE_MS: Final = 30 * 60 * 1000
FROZEN_CURRENT_STEP_A: Final = 0.1
FROZEN_OHM_PER_V: Final = 0.030 / 1.25
FROZEN_STEPS: Final = 2
FROZEN_STEP_V: Final = 0.004
FROZEN_TEMPERATURE_MS: Final = 2 * 3600 * 1000
FROZEN_COMPANION_C: Final = 2.0
FROZEN_FLICKER: Final = 0.5
FROZEN_READINGS: Final = 10
# A shunt current monitor on ±320 mV and 0.1 ohm clips hard at ±3.2 A (INA219 datasheet: 10 µV steps); one part in a
# thousand below the end covers its calibration register's rounding (common practice, no source).
SATURATED_FROM: Final = 0.999


@dataclass(frozen=True, slots=True)
class Finding:
    """Values of one quantity that were recognised as bad for one reason.

    Attributes
    ----------
    quantity
        Name in the catalogue.
    reason
        ``disconnected``, ``power-on``, ``out-of-range``, ``spike``, ``frozen`` or ``saturated``.
    time_ms
        Instants of the values, shape (k,), k > 0.
    """

    quantity: str
    reason: str
    time_ms: Times


@dataclass(frozen=True, slots=True)
class Screened:
    """A series fit for figures.

    Attributes
    ----------
    series
        The readings, NaN where a value was set aside.
    findings
        What was set aside or marked, by quantity and reason.
    saturated
        Quantity to mask of shape (n,): the true current is at least this far from zero.
    """

    series: Series
    findings: tuple[Finding, ...] = ()
    saturated: Mapping[str, Mask] = field(default_factory=dict)


def screen(series: Series, *, full_scale_current_a: float | None = None, restarts_ms: Sequence[int] = ()) -> Screened:
    """Screen the readings of one node.

    Parameters
    ----------
    series
        Readings in the catalogue's units.
    full_scale_current_a
        End of the range of the node's current sensors; ``None`` where it is not known, and nothing is marked then.
    restarts_ms
        Instants at which the node is known to have restarted, beside those its ``uptime`` tells.

    Returns
    -------
    Screened
        The screened copy; ``series`` is left as it is.
    """
    columns: dict[str, Floats] = {}
    findings: list[Finding] = []
    saturated: dict[str, Mask] = {}
    neighbour_ms = _neighbourhood(series.time_ms)
    started = _after_start(series, restarts_ms)
    for name, raw in series.columns.items():
        values, marks = _without_codes(name, raw, series.time_ms, neighbour_ms, started)
        if name in THERMOMETERS or name == "pack_voltage":
            spike = _spikes(name, values, series.time_ms)
            values = np.where(spike, np.nan, values)
            frozen = _frozen(name, values, series, neighbour_ms)
            values = np.where(frozen, np.nan, values)
            marks += [("spike", spike), ("frozen", frozen)]
        if name in CURRENTS and full_scale_current_a is not None:
            saturated[name] = np.abs(values) >= SATURATED_FROM * full_scale_current_a
            marks.append(("saturated", saturated[name]))
        columns[name] = values
        findings += [Finding(name, reason, series.time_ms[bad]) for reason, bad in marks if bad.any()]
    return Screened(Series(series.time_ms, columns), tuple(findings), saturated)


def _neighbourhood(time_ms: Times) -> int:
    """How far apart two readings may be and still speak about each other, in milliseconds."""
    if time_ms.size < 2:  # noqa: PLR2004 - a pair
        return NEIGHBOUR_MS
    usual = NEIGHBOUR_INTERVALS * int(np.median(np.diff(time_ms)))
    return int(np.clip(usual, NEIGHBOUR_MS, NEIGHBOUR_MOST_MS))


def _after_start(series: Series, restarts_ms: Sequence[int]) -> Mask:
    """Readings that are the first after a restart, told by an uptime shorter than the time since the one before."""
    started = np.zeros(len(series), np.bool_)
    if len(series) == 0:
        return started
    uptime = series.get("uptime")
    started[1:] = uptime[1:] * 1000 < np.diff(series.time_ms)
    first = np.searchsorted(series.time_ms, np.asarray(restarts_ms, np.int64))
    started[first[first < len(series)]] = True
    return started


def _without_codes(
    name: str, raw: Floats, time_ms: Times, neighbour_ms: int, started: Mask
) -> tuple[Floats, list[tuple[str, Mask]]]:
    """Take out values that are codes or beyond the sensor's range."""
    quantity = BY_NAME[name]
    marks: list[tuple[str, Mask]] = []
    values = raw
    if name in THERMOMETERS:
        disconnected = values == DISCONNECTED_C
        values = np.where(disconnected, np.nan, values)
        marks.append(("disconnected", disconnected))
    outside = (values < quantity.low) | (values > quantity.high)
    values = np.where(outside, np.nan, values)
    marks.append(("out-of-range", outside))
    if name in THERMOMETERS:
        power_on = _power_on(values, time_ms, neighbour_ms, started)
        values = np.where(power_on, np.nan, values)
        marks.append(("power-on", power_on))
    return values, marks


def _power_on(values: Floats, time_ms: Times, neighbour_ms: int, started: Mask) -> Mask:
    """Values of exactly 85 °C that come from the power-on register rather than from heat.

    One is believed where at least one neighbour is near in time and within 10 °C, none near in time is further off,
    and the node has not just started: so a genuine ramp through 85 stays.
    """
    bad = np.zeros(values.size, np.bool_)
    at = np.flatnonzero(np.isfinite(values))
    v, t = values[at], time_ms[at]
    code = np.abs(v - POWER_ON_C) < 0.5 / BY_NAME["pack_temperature"].scale
    if not code.any():
        return bad
    here = np.arange(v.size)
    before = np.maximum.accumulate(np.where(code, -1, here))
    after = np.minimum.accumulate(np.where(code, v.size, here)[::-1])[::-1]
    off: Mask = np.zeros(v.size, np.bool_)
    believed: Mask = np.zeros(v.size, np.bool_)
    # A run of 85s counts as one: its neighbours are the values before its first and after its last.
    for neighbour, end, exists in ((before, before + 1, before >= 0), (after, after - 1, after < v.size)):
        safe = np.where(exists, neighbour, 0)
        near = exists & (np.abs(t[np.clip(end, 0, v.size - 1)] - t[safe]) <= neighbour_ms)
        far = np.abs(v[safe] - POWER_ON_C) > NEIGHBOUR_C
        off |= near & far
        believed |= near & ~far
    bad[at] = code & (off | ~believed | started[at])
    return bad


def _spikes(name: str, values: Floats, time_ms: Times) -> Mask:
    """Single values far from both neighbours, which agree with each other."""
    bad = np.zeros(values.size, np.bool_)
    at = np.flatnonzero(np.isfinite(values))
    if at.size < 3:  # noqa: PLR2004 - a value and its two neighbours
        return bad
    v, t = values[at], time_ms[at]
    limit = SPIKE_C if name in THERMOMETERS else SPIKE_OF_LEVEL * float(np.median(v))
    up, down = v[1:-1] - v[:-2], v[1:-1] - v[2:]
    close = np.diff(t) <= NEIGHBOUR_MS
    alone = (np.sign(up) == np.sign(down)) & (np.minimum(np.abs(up), np.abs(down)) > limit)
    agree = np.abs(v[2:] - v[:-2]) < limit / 2
    bad[at[1:-1]] = alone & agree & close[:-1] & close[1:]
    return bad


def _frozen(name: str, values: Floats, series: Series, neighbour_ms: int) -> Mask:
    """Values that repeat where they should move; the first of a run may be true and stays."""
    bad = np.zeros(values.size, np.bool_)
    at = np.flatnonzero(np.isfinite(values))
    if at.size < FROZEN_READINGS:
        return bad
    v, t = values[at], series.time_ms[at]
    repeats = (np.diff(v) == 0) & (np.diff(t) <= neighbour_ms)
    edges = np.flatnonzero(~repeats)
    firsts, lasts = np.append(0, edges + 1), np.append(edges, v.size - 1)
    least_ms = FROZEN_TEMPERATURE_MS if name in THERMOMETERS else FROZEN_VOLTAGE_MS
    long = (t[lasts] - t[firsts] >= least_ms) & (lasts - firsts + 1 >= FROZEN_READINGS)
    for first, last in zip(firsts[long].tolist(), lasts[long].tolist(), strict=True):
        stretch = slice(int(at[first]), int(at[last]) + 1)
        if name in THERMOMETERS:
            around = last - first  # only what lies next to the run; by night a thermometer may rest for hours
            rest = np.concatenate([repeats[max(0, first - around) : first], repeats[last : last + around]])
            flickers = rest.size >= FROZEN_READINGS and 1 - rest.mean() >= FROZEN_FLICKER
            companion = next(other for other in THERMOMETERS if other != name)
            stuck = flickers or _span(series.get(companion)[stretch]) >= FROZEN_COMPANION_C
        else:
            steps = np.abs(np.diff(v))
            step = min(FROZEN_STEP_V, float(steps[steps > 0].min())) if (steps > 0).any() else FROZEN_STEP_V
            moved_a = _span(series.get("pack_current")[stretch])
            expected = moved_a * FROZEN_OHM_PER_V * v[first]
            stuck = moved_a >= FROZEN_CURRENT_STEP_A and expected >= FROZEN_STEPS * step
        if stuck:
            bad[at[first + 1 : last + 1]] = True
    return bad


def _span(values: Floats) -> float:
    known = values[np.isfinite(values)]
    return float(np.ptp(known)) if known.size else 0.0
