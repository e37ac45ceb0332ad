"""A pack, its charger and its sky, to test against: written from the physics, sharing nothing with the hub.

The cell is the common textbook picture of a sealed nickel-metal-hydride cell under charge:

* open-circuit voltage against level, as commonly given for rested cells at 20 °C (from memory), with the charge branch lying
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


class _State:
    """The pack as it goes."""

    def __init__(self, pack, level, air):
        self.pack = pack
        self.level = level
        self.slow = 0.0
        self.temperature = air

    def step(self, current, air, dt):
        """Advance; returns the voltage of a cell."""
        pack = self.pack
        share = self._oxygen_share() if current > 0.0 else 0.0
        self.level += current * (1.0 - share) * dt / 3600.0 / pack.capacity_ah
        self.level -= pack.self_discharge_per_day * dt / 86_400.0
        self.level = min(max(self.level, 0.0), 1.0)
        per_ohm = 2.0 / pack.capacity_ah  # resistances are given for 2 Ah
        self.slow += (current * pack.slow_per_cell * per_ohm - self.slow) * (1.0 - math.exp(-dt / pack.slow_s))
        rate = current / pack.capacity_ah
        cell = (
            _between(self.level, _LEVELS, _OPEN_CIRCUIT)
            + pack.branch_v * math.tanh(rate / 0.02)
            + current * pack.ohmic_per_cell * per_ohm
            + self.slow
            + pack.oxygen_rise_v * share * math.tanh(max(rate, 0.0) / 0.05)
            + pack.voltage_per_k * (self.temperature - 20.0)
        )
        heat = current * share * cell + current * current * 0.065 * per_ohm + max(current, 0.0) * (1.0 - share) * 0.05
        lost = (self.temperature - air) * pack.heat_capacity / pack.cooling_s
        self.temperature += (heat - lost) * dt / pack.heat_capacity
        return cell

    def _oxygen_share(self):
        pack = self.pack
        stored = 1.0
        if self.level > pack.acceptance_from:
            room = (self.level - pack.acceptance_from) / (1.0 - pack.acceptance_from)
            stored = 1.0 - (1.0 - pack.acceptance_at_full) * room
        if self.temperature > 30.0:
            stored *= max(0.3, 1.0 - 0.02 * (self.temperature - 30.0))
        return 1.0 - stored


class _Stop:
    """The charger's own end, once a day."""

    def __init__(self, charger):
        self.charger = charger
        self.night()

    def night(self):
        self.off = False
        self.peak = self.peak_current = self.charging_s = 0.0

    def watch(self, state, cell, current, dt):
        """Whether it stops now."""
        charger, pack = self.charger, state.pack
        self.charging_s += dt
        smooth = cell - current * 0.065 * 2.0 / pack.capacity_ah
        if smooth > self.peak or self.charging_s < 600.0:
            self.peak, self.peak_current = smooth, current
        dropped = self.peak - smooth >= charger.drop_v_per_cell and current > 0.8 * self.peak_current
        self.off = {
            "none": False,
            "voltage-drop": dropped,
            "temperature": state.temperature >= charger.limit_c,
            "timer": self.charging_s >= charger.timer_s,
        }[charger.stop]
        return self.off


class _Truth:
    """When the pack became full, and what was pushed in afterwards."""

    def __init__(self, level):
        self.was_full = level >= FULL_LEVEL
        self.full_at_s = []
        self.over_ah = []
        self.over = 0.0

    def note(self, t, level, current, dt):
        if level >= FULL_LEVEL and current > 0.0:
            if not self.was_full:
                self.full_at_s.append(t)
            self.was_full = True
            self.over += current * dt / 3600.0
        elif level < FULL_LEVEL - 0.03:
            self.was_full = False

    def night(self):
        if self.over:
            self.over_ah.append(self.over)
        self.over = 0.0


def simulate(
    pack=Pack(),
    site=Site(),
    sensors=Sensors(),
    charger=Charger(),
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
    state, stop, truth = _State(pack, level, _air(site, 0.0)), _Stop(charger), _Truth(level)
    rows, stopped_at_s = [], []
    for k in range(n):
        t = k * step
        hour = t / 3600.0 % 24.0
        air, sun, load = _air(site, hour), _sun(site, hour), _load(site, t)
        if sun <= 0.0:
            stop.night()
            truth.night()
        charge = 0.0 if stop.off else site.panel_a * sun**1.2 * through[k]
        cell = state.step(charge - load, air, step)
        truth.note(t, state.level, charge - load, step)
        if charge > 0.0 and stop.watch(state, cell, charge - load, step):
            stopped_at_s.append(t)
        if k % every == 0:
            volts = cell * pack.cells
            panel_v = volts + 0.4 if charge > 0.001 else (1.35 * volts if sun > 0.05 else 0.2)
            rows.append((t, volts, charge - load, state.temperature, air, panel_v, charge, state.level))
    truth.night()
    table = np.array(rows)
    time_ms = start_ms + np.round(table[:, 0] * 1000).astype(np.int64)

    def measured(column, noise, quantum):
        return np.round((column + rng.normal(0.0, noise, column.size)) / quantum) * quantum

    volt, amp, degree = (
        (sensors.voltage_noise, sensors.voltage_step),
        (sensors.current_noise, sensors.current_step),
        (sensors.temperature_noise, sensors.temperature_step),
    )
    series = Series(
        time_ms,
        {
            "pack_voltage": measured(table[:, 1], *volt),
            "pack_current": measured(table[:, 2], *amp),
            "pack_temperature": measured(table[:, 3], *degree),
            "air_temperature": measured(table[:, 4], *degree),
            "panel_voltage": measured(table[:, 5], *volt),
            "panel_current": measured(table[:, 6], *amp),
        },
    )
    return Run(series, table[:, 7], truth.full_at_s, truth.over_ah, stopped_at_s)


def without(series, *names):
    """The same readings from a node that lacks some sensors."""
    return replace(series, columns={k: v for k, v in series.columns.items() if k not in names})


def _air(site, hour):
    return site.air_mean_c + site.air_swing_c * math.cos(2.0 * math.pi * (hour - 15.0) / 24.0)


def _sun(site, hour):
    """Clear sun as a share of its noon value in the panel's plane; 0 at night."""
    up = (hour - site.sunrise_h) / (site.sunset_h - site.sunrise_h)
    return math.sin(math.pi * up) if 0.0 < up < 1.0 else 0.0


def _load(site, t):
    on = site.burst_a and (t + 97.0 * (t // 86_400)) % site.burst_every_s < site.burst_s
    return site.load_a + (site.burst_a if on else 0.0)


def _between(x, xs, ys):
    for k in range(1, len(xs)):
        if x <= xs[k]:
            return ys[k - 1] + (ys[k] - ys[k - 1]) * (x - xs[k - 1]) / (xs[k] - xs[k - 1])
    return ys[-1]
