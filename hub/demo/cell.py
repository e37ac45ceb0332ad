"""A NiMH pack as physics: cells in series, each with its own capacity and resistance, and one temperature.

Every cell is an open-circuit voltage with a charge and a discharge branch, an ohmic part and one polarisation time
constant. Near full, current goes into oxygen instead of charge; the gas recombines and warms the pack, and a warm full
cell has a lower voltage: that is where the voltage drop at the end of a fast charge comes from, and why a slow charge
hardly shows it. Charge and energy are kept exactly, so that a test can compare any figure with the truth.

Sources: general references are the makers' handbooks and IEC 61951-2. "[M]" marks a value from memory or chosen to
reproduce a remembered figure; the tests check the outcome against the published ones.
"""

import copy
from dataclasses import dataclass
from itertools import pairwise
from math import exp, log10
from typing import Final

# Enthalpy per charge of the cell reaction, as a voltage. It lies below the open-circuit voltage, so charging warms
# (hydride formation is exothermic; common knowledge in makers' notes). The size is [M].
THERMONEUTRAL_V: Final = 1.25
# Energy carried by oxygen gas until it recombines at the negative electrode [M].
GAS_V: Final = 1.40
GAS_S: Final = 150.0
POLARISATION_S: Final = 90.0
# Half the gap between the branches: makers give 20 to 60 mV between charge and discharge [M].
BRANCH_V: Final = 0.020
BRANCH_LEVEL: Final = 0.04
# A 28 g cell of 2.2 Ah stores about 28 J/K [M].
HEAT_J_PER_K_AH: Final = 13.0
# An AA cell of 2.2 Ah has about 25 mΩ: resistance scales with the inverse of capacity [M].
RESISTANCE_OHM_AH: Final = 0.052
POLARISATION_SHARE: Final = 0.8
# A cell counts as full when less than this share of the current is still stored.
FULL_ACCEPTANCE: Final = 0.10
# Capacity fade: 500 cycles at full depth to 80 % and about five years to the same, twice as fast per 10 °C [M].
FADE_PER_CYCLE: Final = 4e-4
FADE_PER_DAY: Final = 1.1e-4
FADE_PER_OVERCHARGE: Final = 1e-4
RESISTANCE_PER_FADE: Final = 4.0
# Reversed and empty: from here on hydrogen is made instead of further discharge.
_BOTTOM: Final = -0.08
_PER_LEVEL: Final = 512
_LOWEST: Final = -0.10


def open_circuit_v(level: float) -> float:
    """Rested voltage of a cell between its branches at 20 °C.

    Published bands (makers' handbooks, from memory): 1.20 to 1.22 V near empty, 1.26 at 20 %, 1.28 at half, 1.31 at
    80 %, 1.35 to 1.40 full. The knee at zero is placed so that 0.2 It reaches 1.0 V when the rated charge is out,
    which is how IEC 61951-2 defines capacity.
    """
    if level < 0.0:
        return max(-0.2, open_circuit_v(0.0) + 25.0 * level)
    return 1.245 + 0.065 * level + 0.075 * exp((level - 1.0) / 0.08) - 0.1985 * exp(-level / 0.022)


_TABLE: Final = [open_circuit_v(_LOWEST + j / _PER_LEVEL) for j in range(int(1.4 * _PER_LEVEL))]
_RISE: Final = [b - a for a, b in pairwise(_TABLE)]


@dataclass(frozen=True, slots=True)
class PackDesign:
    """How a pack is made.

    Attributes
    ----------
    cells
        In series.
    rated_ah
        Rated capacity, Ah (C5).
    capacity_ratios, resistance_ratios
        Each cell's new capacity over the rated one, and resistance over the usual one; empty for all 1.
    self_discharge_per_day
        Share lost in a day at 20 °C; doubles per 10 °C. 0.00797 loses 20 % in 28 days.
    loss_w_per_k
        Heat loss to the air beside the pack, W/K per Ah of one cell: about 0.016 in the open, less in a box.
    wear
        Capacity already lost, as a share of new.
    fade_scale
        Multiplies all ageing, for packs that age faster than published cells.
    shorts_ohm
        Cell number (from 0) to the resistance of a path inside it that bypasses it.
    """

    cells: int
    rated_ah: float
    capacity_ratios: tuple[float, ...] = ()
    resistance_ratios: tuple[float, ...] = ()
    self_discharge_per_day: float = 0.00797
    loss_w_per_k: float = 0.016
    wear: float = 0.0
    fade_scale: float = 1.0
    shorts_ohm: tuple[tuple[int, float], ...] = ()


class Pack:
    """The state of a pack, advanced by ``step``.

    Attributes
    ----------
    charge_ah
        Charge held by each cell, Ah.
    capacity_ah
        Present capacity of each cell, Ah.
    temperature_c, voltage_v, current_a
        Now; current is positive into the pack.
    in_ah, out_ah
        Charge through the terminals so far, both positive.
    energy_j, heat_j
        Energy put in at the terminals less energy taken out, and heat given to the air, J.
    overcharge_ah
        Mean over the cells of the charge that went into oxygen.
    acceptance
        Share of the present charging current that is stored; 1 while not charging.
    """

    def __init__(self, design: PackDesign, level: float = 0.5, temperature_c: float = 20.0) -> None:
        n = design.cells
        ones = (1.0,) * n
        self.design = design
        self._new_ah = [design.rated_ah * r for r in design.capacity_ratios or ones]
        self._new_ohm = [RESISTANCE_OHM_AH / design.rated_ah * r for r in design.resistance_ratios or ones]
        if len(self._new_ah) != n or len(self._new_ohm) != n:
            raise ValueError("a pack needs one capacity ratio and one resistance ratio per cell")
        self._short = [dict(design.shorts_ohm).get(k, 0.0) for k in range(n)]
        self.wear = design.wear
        self.capacity_ah: list[float] = []
        self.resistance_ohm: list[float] = []
        self._age()
        self.charge_ah = [level * c for c in self.capacity_ah]
        self._polarised = [0.0] * n
        self._branch = 0.0
        self._gas_ah = 0.0
        self._heat_capacity = HEAT_J_PER_K_AH * design.rated_ah * n
        self._loss = design.loss_w_per_k * design.rated_ah * n
        self.temperature_c = temperature_c
        self.current_a = 0.0
        self.cell_v = [open_circuit_v(level)] * n
        self.voltage_v = sum(self.cell_v)
        self.in_ah = self.out_ah = 0.0
        self.energy_j = self.heat_j = 0.0
        self.overcharge_ah = 0.0
        self.acceptance = 1.0

    @property
    def level(self) -> float:
        """Charge held over capacity, all cells together."""
        return sum(self.charge_ah) / sum(self.capacity_ah)

    @property
    def inner_j(self) -> float:
        """Energy held: chemical, in gas and as warmth above 0 °C."""
        n = self.design.cells
        chemical = 3600.0 * (THERMONEUTRAL_V * sum(self.charge_ah) + GAS_V * n * self._gas_ah)
        return chemical + self._heat_capacity * self.temperature_c

    @property
    def cycles(self) -> float:
        """Equivalent full cycles since it was built here."""
        return self.out_ah / self.design.rated_ah

    @property
    def series_ohm(self) -> float:
        """Ohmic resistance of all cells at the present temperature."""
        return self._cold(0.02) * sum(self.resistance_ohm)

    def source(self) -> tuple[float, float]:
        """The pack as its charger sees it now: electromotive force in V, resistance in Ω."""
        ohm = self.series_ohm
        return self.voltage_v - ohm * self.current_a, ohm

    def _cold(self, per_k: float) -> float:
        return exp(per_k * min(60.0, 20.0 - self.temperature_c))

    def _conditions(self, current_a: float) -> tuple[float, float, float, float, float]:
        """What all cells share at this current and temperature.

        Returns the level that heat takes from a charge, the steepness with which acceptance ends, the extra voltage
        while oxygen is made, the level out of reach of a discharge, and the temperature coefficient in V.
        """
        t = self.temperature_c
        rate = abs(current_a) / self.design.rated_ah
        if current_a > 0.0:
            # At 0.1 It a cell takes 70 % at 45 °C and 45 % at 60 °C (Battery University BU-410); less is lost when
            # charged faster. Nearly all is stored up to about 70 %, then ever less [M].
            warm = 0.0183 * max(0.0, t - 30.0) * (0.1 / max(rate, 0.1)) ** 0.6
            steep = min(20.0, max(4.0, 8.0 * (rate / 0.1) ** 0.3))
            oxygen_v = 0.085 + 0.04 * log10(max(rate, 0.003) / 0.1)
            return warm, steep, oxygen_v, 0.0, min(1.0, rate / 0.05) * min(t - 20.0, 50.0)
        # Remembered bands: 1 It gives 90 to 95 %; 0 °C 80 to 95 %, -10 °C 60 to 85 %, -20 °C 30 to 70 % [M].
        cold = max(0.0, 20.0 - t)
        lock = min(1.0, (rate / 0.2) ** 0.5) * cold * (0.0035 + 0.00022 * cold) + 0.08 * max(0.0, rate - 0.2)
        return 0.0, 1.0, 0.0, min(lock, 0.9), 0.0

    def step(self, current_a: float, air_c: float, dt_s: float) -> float:
        """Let a current flow for a while; the terminal voltage, V.

        Parameters
        ----------
        current_a
            Constant over the step, positive into the pack.
        air_c
            Temperature of the air beside the pack, °C.
        dt_s
            Length of the step, s; up to 60 s at 1 It, longer at lower rates.
        """
        hours = dt_s / 3600.0
        warm, steep, oxygen_v, lock, heated = self._conditions(current_a)
        charging = current_a > 0.0
        settle = exp(-dt_s / POLARISATION_S)
        ohmic = self._cold(0.02)
        polar = POLARISATION_SHARE * self._cold(0.03) * current_a
        if current_a:
            towards = 1.0 if charging else -1.0
            moved = abs(current_a) * hours / self.design.rated_ah / BRANCH_LEVEL
            self._branch = towards + (self._branch - towards) / (1.0 + moved)
        branch_v = BRANCH_V * self._branch - 0.001 * heated
        leak = self.design.self_discharge_per_day * 2.0 ** ((self.temperature_c - 20.0) / 10.0) / 24.0
        oxygen_slope = oxygen_v - 0.0025 * heated
        charge, capacity, polarised = self.charge_ah, self.capacity_ah, self._polarised
        stored = oxygen = total_v = 0.0
        for k, r in enumerate(self.resistance_ohm):
            q = charge[k]
            level = q / capacity[k]
            side = 0.0
            if charging and level + warm > 0.0:
                side = min(1.0, level + warm) ** steep
            x = (min(max(level - lock, -0.099), 1.19) - _LOWEST) * _PER_LEVEL
            j = int(x)
            aim = polar * r * (1.0 + 0.03 / (max(level, 0.0) + 0.02))
            vp = polarised[k] = aim + (polarised[k] - aim) * settle
            emf = _TABLE[j] + (x - j) * _RISE[j] + branch_v + vp + side * oxygen_slope
            own = current_a
            if self._short[k]:
                own = (current_a * self._short[k] - emf) / (self._short[k] + r * ohmic)
            v = emf + own * r * ohmic
            main = own * (1.0 - side) if own > 0.0 else own if level > _BOTTOM else 0.0
            oxygen += max(own, 0.0) * side
            dq = (main - (leak * q if q > 0.0 else 0.0)) * hours
            charge[k] = q + dq
            stored += dq
            self.cell_v[k] = v
            total_v += v
        self._book(current_a, total_v, stored, oxygen / self.design.cells, air_c, dt_s)
        return total_v

    def _book(
        self, current_a: float, total_v: float, stored_ah: float, oxygen_a: float, air_c: float, dt_s: float
    ) -> None:
        """Keep the accounts of a step: energy, gas, heat and wear."""
        hours = dt_s / 3600.0
        n, rated = self.design.cells, self.design.rated_ah
        keep = exp(-dt_s / GAS_S)
        gas = self._gas_ah * keep + oxygen_a * GAS_S / 3600.0 * (1.0 - keep)
        energy = current_a * total_v * dt_s
        warmed = energy - 3600.0 * (THERMONEUTRAL_V * stored_ah + GAS_V * n * (gas - self._gas_ah))
        self._gas_ah = gas
        rest = air_c + warmed / dt_s / self._loss
        before = self.temperature_c
        self.temperature_c = rest + (before - rest) * exp(-dt_s * self._loss / self._heat_capacity)
        self.energy_j += energy
        self.heat_j += warmed - self._heat_capacity * (self.temperature_c - before)
        self.overcharge_ah += oxygen_a * hours
        if current_a > 0.0:
            self.in_ah += current_a * hours
            self.acceptance = 1.0 - oxygen_a / current_a
            used = 0.0
        else:
            used = -current_a * hours
            self.out_ah += used
            self.acceptance = 1.0
        self.current_a = current_a
        self.voltage_v = total_v
        days = dt_s / 86400.0 * 2.0 ** ((self.temperature_c - 25.0) / 10.0)
        self.wear += self.design.fade_scale * (
            FADE_PER_CYCLE * used / rated + FADE_PER_DAY * days + FADE_PER_OVERCHARGE * oxygen_a * hours / rated
        )
        if self.wear - self._applied > 1e-5:
            self._age()

    def _age(self) -> None:
        self._applied = self.wear
        left = max(0.05, 1.0 - self.wear)
        self.capacity_ah = [left * c for c in self._new_ah]
        grown = 1.0 + RESISTANCE_PER_FADE * self.wear
        self.resistance_ohm = [grown * r for r in self._new_ohm]

    def bench_capacity_ah(self, step_s: float = 30.0) -> float:
        """The capacity a bench would find, on a copy of this pack: IEC 61951-2 discharge performance at 20 °C.

        Discharge at 0.2 It to 1.0 V per cell, charge 16 h at 0.1 It, rest 1 h, discharge at 0.2 It to 1.0 V per cell.
        """
        pack = copy.deepcopy(self)
        pack.temperature_c = 20.0
        pack.discharge(0.2, 1.0, 20.0, step_s)
        rated = pack.design.rated_ah
        for _ in range(round(16 * 3600 / step_s)):
            pack.step(0.1 * rated, 20.0, step_s)
        for _ in range(round(3600 / step_s)):
            pack.step(0.0, 20.0, step_s)
        return pack.discharge(0.2, 1.0, 20.0, step_s)

    def discharge(self, rate_it: float, end_v_per_cell: float, air_c: float, step_s: float = 30.0) -> float:
        """Discharge at a constant rate until the pack reaches the end voltage; the charge that came out, Ah."""
        before, end_v = self.out_ah, end_v_per_cell * self.design.cells
        for _ in range(round(3.0 / rate_it * 3600 / step_s)):
            if self.step(-rate_it * self.design.rated_ah, air_c, step_s) <= end_v:
                break
        return self.out_ah - before
