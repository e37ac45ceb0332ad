"""A pack, its charger and its sky, to test against: written from the physics, sharing nothing with the hub.

The cell is the common textbook picture of a sealed nickel-metal-hydride cell under charge:

* open-circuit voltage against level, from the dossier's table of rested cells (20 °C), with the charge branch lying
  20..60 mV higher (hysteresis);
* an ohmic part, and one slow part with a time constant of minutes (so that a step of current is followed by a creep);
* charging current splits into current that stores charge and current that makes oxygen. The share that is stored falls
  from 1 towards 0 as the level nears full, earlier when hot (70 % at 45 °C, 45 % at 60 °C);
* oxygen recombines inside the cell: its share of the current times the whole voltage becomes heat, and lifts the
  voltage (the rise at the end); warmth lowers the voltage (the drop after it);
* the pack gives its heat to the air beside it through one thermal resistance.

Truth is kept with the readings: level, and the instants at which the pack became full.
"""

import math
from dataclasses import dataclass, field, replace

import numpy as np

from hub.series import Series

FULL_LEVEL = 0.99
_LEVELS = (0.0, 0.05, 0.2, 0.5, 0.8, 0.9, 1.0)
_OPEN_CIRCUIT = (1.15, 1.21, 1.26, 1.28, 1.31, 1.33, 1.37)


@dataclass(frozen=True)
class Pack:
    """Four cells of 2 Ah unless a test says otherwise."""

    cells: int = 4
    capacity_ah: float = 2.0
    branch_v: float = 0.03
    ohmic_per_cell: float = 0.035
    slow_per_cell: float = 0.030
    slow_s: float = 240.0
    acceptance_from: float = 0.80
    acceptance_at_full: float = 0.08
    oxygen_rise_v: float = 0.05
    voltage_per_k: float = -0.0025
    heat_capacity: float = 40.0  # J/K and cell, with its share of the holder
    cooling_s: float = 2400.0
    self_discharge_per_day: float = 0.008


@dataclass(frozen=True)
class Site:
    """A day's sun and air. ``sky`` gives the share of the clear sun that gets through, by time in seconds."""

    panel_a: float = 0.15
    sunrise_h: float = 6.0
    sunset_h: float = 18.0
    air_mean_c: float = 18.0
    air_swing_c: float = 6.0
    load_a: float = 0.012
    burst_a: float = 0.0
    burst_every_s: float = 600.0
    burst_s: float = 6.0


@dataclass(frozen=True)
class Sensors:
    """A 12-bit shunt current monitor and one-wire digital thermometers."""

    interval_s: float = 60.0
    voltage_step: float = 0.004
    current_step: float = 0.0001
    temperature_step: float = 0.0625
    voltage_noise: float = 0.002
    current_noise: float = 0.0002
    temperature_noise: float = 0.03
    current_offset_a: float = 0.0


@dataclass(frozen=True)
class Charger:
    """What the charger does by itself: nothing, or a stop that holds until the next morning."""

    stop: str = "none"  # none, voltage-drop, temperature, timer
    drop_v_per_cell: float = 0.005
    limit_c: float = 45.0
    timer_s: float = 6 * 3600.0


@dataclass
class Run:
    """Readings and the truth behind them."""

    series: Series
    level: np.ndarray
    full_at_s: list[float] = field(default_factory=list)  # first instant at FULL_LEVEL of each charge that got there
    over_ah: list[float] = field(default_factory=list)  # charge pushed in after it, until sunset
    stopped_at_s: list[float] = field(default_factory=list)


def clear(_rng, days, step_s):
    """No clouds."""
    return np.ones(int(days * 86_400 / step_s))


def broken(rng, days, step_s, shade=0.25, sun_s=240.0, cloud_s=240.0):
    """Fast cumulus: sun and shade take turns, each for a random time, with an edge of some seconds."""
    n = int(days * 86_400 / step_s)
    out = np.empty(n)
    k = 0
    sunny = True
    while k < n:
        length = max(1, int(rng.exponential(sun_s if sunny else cloud_s) / step_s))
        out[k : k + length] = 1.0 - 0.05 * rng.random() if sunny else shade * (0.6 + 0.8 * rng.random())
        k += length
        sunny = not sunny
    return out


def simulate(
    pack=Pack(),  # noqa: B008
    site=Site(),  # noqa: B008
    sensors=Sensors(),  # noqa: B008
    charger=Charger(),  # noqa: B008
    days=1.0,
    level=0.5,
    sky=clear,
    seed=1,
    start_ms=1_780_272_000_000,  # 2026-06-01T00:00:00Z
    step_s=20.0,
):
    """Readings of a node over some days, midnight to midnight."""
    rng = np.random.default_rng(seed)
    step = min(step_s, sensors.interval_s)
    n = int(days * 86_400 / step)
    through = sky(rng, days, step)[:n]
    every = max(1, round(sensors.interval_s / step))
    rows = []
    levels = []
    run = Run(Series(np.empty(0, np.int64)), np.empty(0))
    temperature = _air(site, 0.0)
    slow = 0.0
    stopped = False
    stopped_day = -1
    peak = 0.0
    peak_current = 0.0
    charging_s = 0.0
    was_full = level >= FULL_LEVEL
    over = 0.0
    length_h = site.sunset_h - site.sunrise_h
    ocv = _OPEN_CIRCUIT
    for k in range(n):
        t = k * step
        day = int(t // 86_400)
        hour = t / 3600.0 % 24.0
        air = _air(site, hour)
        sun = math.sin(math.pi * (hour - site.sunrise_h) / length_h) if site.sunrise_h < hour < site.sunset_h else 0.0
        available = site.panel_a * max(sun, 0.0) ** 1.2 * through[k]
        if sun <= 0.0:
            stopped = False
            peak = 0.0
            charging_s = 0.0
            if over:
                run.over_ah.append(over)
                over = 0.0
        load = site.load_a + (
            site.burst_a if site.burst_a and (t + 97.0 * day) % site.burst_every_s < site.burst_s else 0.0
        )
        charge = 0.0 if stopped else available
        current = charge - load
        # level
        share = 0.0
        if current > 0.0:
            share = _oxygen_share(pack, level, temperature)
            level += current * (1.0 - share) * step / 3600.0 / pack.capacity_ah
        else:
            level += current * step / 3600.0 / pack.capacity_ah
        level -= pack.self_discharge_per_day * step / 86_400.0
        level = min(max(level, 0.0), 1.0)
        if level >= FULL_LEVEL and current > 0.0:
            if not was_full:
                run.full_at_s.append(t)
                was_full = True
            over += current * step / 3600.0
        elif level < FULL_LEVEL - 0.03:
            was_full = False
        # voltage of one cell
        slow += (current * pack.slow_per_cell * 2.0 / pack.capacity_ah - slow) * (1.0 - math.exp(-step / pack.slow_s))
        rate = current / pack.capacity_ah
        branch = pack.branch_v * math.tanh(rate / 0.02)
        cell = (
            _between(level, _LEVELS, ocv)
            + branch
            + current * pack.ohmic_per_cell * 2.0 / pack.capacity_ah
            + slow
            + pack.oxygen_rise_v * share * math.tanh(max(rate, 0.0) / 0.05)
            + pack.voltage_per_k * (temperature - 20.0)
        )
        # heat
        heat = pack.cells * (current * share * cell + current * current * 0.065 * 2.0 / pack.capacity_ah)
        heat += pack.cells * max(current, 0.0) * (1.0 - share) * 0.05
        through_air = (temperature - air) * pack.cells * pack.heat_capacity / pack.cooling_s
        temperature += (heat - through_air) * step / (pack.cells * pack.heat_capacity)
        # the charger's own stop
        if charge > 0.0:
            charging_s += step
        if charger.stop != "none" and not stopped and charge > 0.0:
            smooth = cell - current * 0.065 * 2.0 / pack.capacity_ah
            if smooth > peak or charging_s < 600.0:
                peak = smooth
                peak_current = current
            drop = peak - smooth
            if (
                (charger.stop == "voltage-drop" and drop >= charger.drop_v_per_cell and current > 0.8 * peak_current)
                or (charger.stop == "temperature" and temperature >= charger.limit_c)
                or (charger.stop == "timer" and charging_s >= charger.timer_s)
            ) and stopped_day != day:
                stopped = True
                stopped_day = day
                run.stopped_at_s.append(t)
        if k % every == 0:
            pack_v = cell * pack.cells
            panel_v = pack_v + 0.4 if charge > 0.001 else (1.35 * pack_v if sun > 0.05 else 0.2)
            rows.append((t, pack_v, current, temperature, air, panel_v, charge))
            levels.append(level)
    if over:
        run.over_ah.append(over)
    table = np.array(rows)
    time_ms = start_ms + np.round(table[:, 0] * 1000).astype(np.int64)
    m = len(table)

    def measured(values, noise, quantum):
        noisy = values + rng.normal(0.0, noise, m)
        return np.round(noisy / quantum) * quantum

    run.series = Series(
        time_ms,
        {
            "pack_voltage": measured(table[:, 1], sensors.voltage_noise, sensors.voltage_step),
            "pack_current": measured(
                table[:, 2] + sensors.current_offset_a, sensors.current_noise, sensors.current_step
            ),
            "pack_temperature": measured(table[:, 3], sensors.temperature_noise, sensors.temperature_step),
            "air_temperature": measured(table[:, 4], sensors.temperature_noise, sensors.temperature_step),
            "panel_voltage": measured(table[:, 5], sensors.voltage_noise, sensors.voltage_step),
            "panel_current": measured(table[:, 6], sensors.current_noise, sensors.current_step),
        },
    )
    run.level = np.array(levels)
    return run


def without(series, *names):
    """The same readings from a node that lacks some sensors."""
    return replace(series, columns={k: v for k, v in series.columns.items() if k not in names})


def _air(site, hour):
    return site.air_mean_c + site.air_swing_c * math.cos(2.0 * math.pi * (hour - 15.0) / 24.0)


def _oxygen_share(pack, level, temperature):
    if level <= pack.acceptance_from:
        stored = 1.0
    else:
        stored = 1.0 - (1.0 - pack.acceptance_at_full) * (level - pack.acceptance_from) / (1.0 - pack.acceptance_from)
    if temperature > 30.0:
        stored *= max(0.3, 1.0 - 0.02 * (temperature - 30.0))
    return 1.0 - stored


def _between(x, xs, ys):
    for k in range(1, len(xs)):
        if x <= xs[k]:
            return ys[k - 1] + (ys[k] - ys[k - 1]) * (x - xs[k - 1]) / (xs[k] - xs[k - 1])
    return ys[-1]
