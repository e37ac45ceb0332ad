"""The pieces of evidence for the end of charge, each with its own numbers.

Each function looks at one thing and says what it found: a value, the limit it is held against, when, and a weight in
units of log-odds, positive for a full pack.

Sources of the figures, by the names used below: *Panasonic*, Charge Methods for Nickel Metal Hydride Batteries;
*sheet*, the specification of a 450 mAh AAA cell; *PowerStream*, the engineering note NiMH Charging; *SLUA516*, Texas
Instruments, by way of a public safety note; *[M]*, common figures from memory. Weights are ours, chosen on simulated
packs of many kinds.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np

from hub.battery.balance import Balance
from hub.battery.curve import Curve
from hub.battery.flow import Flow
from hub.battery.heat import Heat
from hub.battery.spec import NodeSpec, PackSpec
from hub.series import Floats, Mask

# A drop from the peak counts at a sustained rate only, and not in the first ten minutes (Panasonic).
HOLD_OFF_S = 600.0
DROP_V = 0.005  # a cell (sheet); others give 3 to 17 mV, mostly 5 to 10
DROP_RATE_IT = 0.3  # reliable from C/2, marginal at C/3 (SLUA516)
SAME_RATE = 0.2
DROP_STEPS = 2
SETTLE_S = 600.0
MEDIAN_STEPS = 5
NOISE_FACTOR = 4.0
# Temperature slope: 0.8 °C/min at 0.5 It (sheet), in proportion to the rate below.
SLOPE_K_PER_MIN = 0.8
SLOPE_AT_IT = 0.5
SLOPE_WINDOW_S = 180.0
# Plateau: what counts is charge, not time, because the current wanders.
PLATEAU_RISE_V = 0.003
PLATEAU_IT_H = 0.04
KNEE_RISE_V = 0.010
KNEE_IT_H = 0.15
# Level: a cell needs 1.41 V at 20 °C to fill at 0.1 It (PowerStream); under charge it falls by 3 mV a kelvin [M].
LEVEL_V = 1.41
LEVEL_LOW_V = 1.36
VOLT_PER_K = 0.003
# Charge factor: 1.1 to 1.25 at C/2 to C/3 (SLUA516 note), more from a shallow discharge. Self-discharge: a standard
# cell loses about 20 % in 28 days at 20 °C [M].
FACTOR, FACTOR_SPREAD = 1.15, 0.12
SELF_DISCHARGE_PER_DAY = 0.007
# A pack of unknown level certainly overflows after this much of its rated capacity net.
BRIM, BRIM_SPREAD = 1.30, 0.15
IMPOSSIBLE = 1.3
# Heat: a pack counts as full when a tenth of the charging power is stored and the rest is heat.
FULL_SHARE = 0.90
MET_SHARE = 0.70
HALF_SHARE = 0.55
CONTRAST = 2.5
AT_REST = 0.9
LEAST_OF_EXPECTED = 0.6
VISIBLE_K = 1.0
# 28 g and about 1 J/(g K) for an AA cell of 2 to 2.2 Ah [M], and something for its holder.
HEAT_J_PER_K_AH = 15.0
# Other numbers of the search.
LOW_RATE_IT = 0.1
LEAST_STEPS = 3
PLATEAU_SPREAD_S = 1800.0
GRID_IT_H = 0.005
REST_MS = 30 * 60_000
# Log-odds of a finding that is met.
DROP_WEIGHT, LOW_RATE_WEIGHT = 4.5, 1.5
SLOPE_WEIGHT = 3.0
PLATEAU_WEIGHT, RISING_WEIGHT = 2.5, -1.0
LEVEL_WEIGHT = 1.3
HEAT_WEIGHT = 3.5
BALANCE_WEIGHTS, BRIM_WEIGHTS = (-4.0, 1.5), (0.0, 3.0)


@dataclass(frozen=True, slots=True)
class Evidence:
    """One finding.

    Attributes
    ----------
    rule
        Its name.
    met
        Whether it speaks for a full pack.
    value, limit, unit
        What was found and what it is held against.
    at_ms, spread_s
        When the pack became full by this rule, and the standard uncertainty of that; ``None`` where it does not say.
    weight
        Log-odds it adds.
    decisive
        False where the conditions were too weak for the rule to stand alone.
    """

    rule: str
    met: bool
    value: float
    limit: float
    unit: str
    weight: float
    at_ms: int | None = None
    spread_s: float | None = None
    decisive: bool = True

    def as_json(self) -> dict[str, Any]:
        """Plain values, rounded to what they are worth."""
        return {
            "met": self.met,
            "value": round(self.value, 5),
            "limit": round(self.limit, 5),
            "unit": self.unit,
            "weight": round(self.weight, 2),
            "at_ms": self.at_ms,
        }


def voltage_drop(curve: Curve, pack: PackSpec) -> Evidence | None:
    """Fall of the cell voltage from its peak at a sustained rate, the -dV of the handbooks.

    What warmer air alone would do to the voltage is taken out.
    ``None`` where the rate never was high enough for a drop to be seen.
    """
    rate = _sustained(curve) / pack.rated_capacity_ah
    ready = (_charging_s(curve) > HOLD_OFF_S) & (rate >= LOW_RATE_IT) & _steady(curve) & np.isfinite(curve.cell_v)
    if np.count_nonzero(ready) <= DROP_STEPS:
        return None
    warming = curve.air_c - curve.air_c[0]
    cell = _smooth(curve.cell_v + VOLT_PER_K * np.where(np.isfinite(warming), np.maximum(warming, 0.0), 0.0))
    tried = np.where(ready, cell, -np.inf)
    highest = np.maximum.accumulate(tried)
    peak = np.maximum.accumulate(np.where(tried >= highest, np.arange(tried.size), 0))
    current = _sustained(curve)
    same = ready & (np.abs(current - current[peak]) <= SAME_RATE * current[peak])
    drop = np.where(same, highest - cell, 0.0)
    limit = max(DROP_V, NOISE_FACTOR * curve.noise_v)
    confirmed = np.flatnonzero(_lasting(drop >= limit, DROP_STEPS))
    k = int(confirmed[0]) if confirmed.size else int(np.argmax(drop))
    strength = float(rate[peak[k]])
    met = bool(confirmed.size)
    return Evidence(
        rule="voltage-drop",
        met=met,
        value=float(drop[k]),
        limit=limit,
        unit="V per cell",
        weight=(DROP_WEIGHT if strength >= DROP_RATE_IT else LOW_RATE_WEIGHT) if met else 0.0,
        at_ms=int(curve.time_ms[peak[k]]) if met else None,
        spread_s=1.5 * curve.step_s if met and strength >= DROP_RATE_IT else None,
        decisive=strength >= DROP_RATE_IT,
    )


def temperature_slope(curve: Curve, pack: PackSpec) -> Evidence | None:
    """Rate of rise of the pack above the air, at a sustained rate. ``None`` below the rate at which it can be told."""
    rate = curve.current_a / pack.rated_capacity_ah
    above = curve.temperature_c - np.where(np.isfinite(curve.air_c), curve.air_c, 0.0)
    lag = max(1, round(SLOPE_WINDOW_S / curve.step_s))
    if above.size <= lag + DROP_STEPS:
        return None
    minutes = (curve.time_ms[lag:] - curve.time_ms[:-lag]) / 60_000.0
    slope = (above[lag:] - above[:-lag]) / minutes
    usable = np.isfinite(slope) & (rate[lag:] >= DROP_RATE_IT) & _steady(curve)[lag:]
    if not usable.any():
        return None
    limit = SLOPE_K_PER_MIN * np.minimum(rate[lag:] / SLOPE_AT_IT, 1.25)
    ratio = np.where(usable, slope / np.maximum(limit, 1e-9), -np.inf)
    confirmed = np.flatnonzero(_lasting(ratio >= 1.0, DROP_STEPS))
    k = int(confirmed[0]) if confirmed.size else int(np.argmax(ratio))
    met = bool(confirmed.size)
    return Evidence(
        rule="temperature-slope",
        met=met,
        value=float(slope[k]),
        limit=float(limit[k]),
        unit="°C/min",
        weight=SLOPE_WEIGHT if met else 0.0,
        at_ms=int(curve.time_ms[lag + k]) if met else None,
        spread_s=300.0 if met else None,
    )


def plateau(curve: Curve, pack: PackSpec) -> Evidence | None:
    """The cell voltage rises through the knee and then no more, over a stretch of charge at a sustained current."""
    capacity = pack.rated_capacity_ah
    usual = usual_a(curve)
    use = (_charging_s(curve) > HOLD_OFF_S) & (curve.current_a >= 0.5 * usual) & np.isfinite(curve.cell_v)
    if np.count_nonzero(use) < LEAST_STEPS:
        return None
    part = np.floor(curve.charge_ah[use] / (GRID_IT_H * capacity)).astype(np.int64)
    steps, first, which = np.unique(part, return_index=True, return_inverse=True)
    cell = np.bincount(which, curve.cell_v[use]) / np.bincount(which)
    at_ms = curve.time_ms[use][first]
    charge = steps * GRID_IT_H
    ahead = np.maximum.accumulate(cell[::-1])[::-1]
    k = int(np.argmax(ahead - cell <= PLATEAU_RISE_V))
    length = float(charge[-1] - charge[k])
    before = cell[(charge >= charge[k] - KNEE_IT_H) & (charge <= charge[k])]
    knee = float(cell[k] - before.min())
    met = length >= PLATEAU_IT_H and knee >= KNEE_RISE_V
    recent = cell[charge >= charge[-1] - PLATEAU_IT_H]
    rising = float(recent[-1] - recent[0]) if recent.size > 1 else 0.0
    return Evidence(
        rule="voltage-plateau",
        met=met,
        value=length if knee >= KNEE_RISE_V else 0.0,
        limit=PLATEAU_IT_H,
        unit="of rated capacity",
        weight=PLATEAU_WEIGHT if met else (RISING_WEIGHT if rising >= KNEE_RISE_V else 0.0),
        at_ms=int(at_ms[k]) if met else None,
        spread_s=PLATEAU_SPREAD_S if met else None,
    )


def level(curve: Curve, pack: PackSpec) -> Evidence | None:
    """Highest cell voltage, as it would be at 0.1 It and 20 °C: below about 1.4 V a cell does not fill."""
    use = (curve.current_a >= 0.5 * usual_a(curve)) & np.isfinite(curve.cell_v)
    if np.count_nonzero(use) < LEAST_STEPS:
        return None
    ohmic = curve.resistance_ohm / pack.cells_in_series * 0.1 * pack.rated_capacity_ah
    warm = np.where(np.isfinite(curve.temperature_c), curve.temperature_c, curve.air_c) - 20.0
    cell = curve.cell_v + ohmic + VOLT_PER_K * np.where(np.isfinite(warm), warm, 0.0)
    value = float(np.percentile(_smooth(cell[use]), 95))
    middle = 0.5 * (LEVEL_V + LEVEL_LOW_V)
    weight = LEVEL_WEIGHT * float(np.clip((value - middle) / (LEVEL_V - middle), -2.5, 1.0))
    return Evidence("voltage-level", value >= LEVEL_V, value, LEVEL_V, "V per cell", weight)


def returned(
    balance: Balance | None, flow: Flow, first: int, last: int, factor: float | None, pack: PackSpec, node: NodeSpec
) -> Evidence | None:
    """Charge returned against charge removed since the pack was last full, or against all it can hold.

    The rule is ``charge-returned`` where the last full charge is known, and else ``charge-held``.

    Parameters
    ----------
    balance
        As of the session's first reading; ``None`` where discharge is not seen.
    flow, first, last
        The session's readings.
    factor
        Charge factor learnt from earlier full charges.
    """
    if balance is None:
        return None
    capacity = pack.rated_capacity_ah
    back = balance.returned_ah + flow.in_ah[first : last + 1] - flow.in_ah[first]
    gone = balance.removed_ah + flow.out_ah[first : last + 1] - flow.out_ah[first]
    t = flow.time_ms[first : last + 1]
    if balance.full_at_ms is None:
        have, need = back - gone, np.full(t.size, BRIM * capacity)
        spread = np.full(t.size, BRIM_SPREAD * capacity)
        lowest, highest = BRIM_WEIGHTS
    else:
        hours = (t - balance.since_ms) / 3_600_000.0
        leaked = SELF_DISCHARGE_PER_DAY * capacity * hours / 24.0
        unseen_h = (balance.unseen_s + flow.unseen_s[first : last + 1] - flow.unseen_s[first]) / 3600.0
        seen_h = np.maximum(hours - unseen_h, 1.0)
        factor_spread = FACTOR_SPREAD if factor is None else 0.5 * FACTOR_SPREAD
        have, need = back, (FACTOR if factor is None else factor) * (gone + leaked)
        spread = np.sqrt(
            (factor_spread * gone) ** 2
            + leaked**2
            + (node.current_offset_a * hours) ** 2
            + (unseen_h * (gone + back) / seen_h) ** 2
            + (0.01 * capacity) ** 2
        )
        lowest, highest = BALANCE_WEIGHTS
        # More missing than the pack can hold: the readings coincide with the load's bursts, or it was charged unseen.
        if float((gone - back).max()) > IMPOSSIBLE * capacity:
            lowest, highest = 0.0, 0.0
    sure = (have - need) / spread
    met = bool(sure[-1] > 0.0)
    k = int(np.argmax(sure > 0.0)) if met else t.size - 1
    mean_a = max(float(flow.in_ah[last] - flow.in_ah[first]) * 3600_000.0 / max(float(t[-1] - t[0]), 1.0), 1e-6)
    return Evidence(
        rule="charge-held" if balance.full_at_ms is None else "charge-returned",
        met=met,
        value=float(have[-1]),
        limit=float(need[-1]),
        unit="Ah",
        weight=float(np.clip(1.2 * sure[-1], lowest, highest)),
        at_ms=int(t[k]) if met else None,
        spread_s=min(float(spread[k]) / mean_a * 3600.0, 4 * 3600.0) if met else None,
    )


def heating(curve: Curve, heat: Heat | None, known_k_per_w: float | None, pack: PackSpec) -> Evidence | None:
    """Share of the charging power that becomes heat: near 1 in a full pack.

    Parameters
    ----------
    curve, heat
        The session and its fit.
    known_k_per_w
        Rise a watt of a full pack, learnt from earlier sessions.
    """
    if heat is None:
        return None
    expected = heat.lag_s / (HEAT_J_PER_K_AH * pack.rated_capacity_ah * pack.cells_in_series)
    per_watt, strength = known_k_per_w, 1.0
    if per_watt is None:
        shown = rose_to_rest(heat)
        per_watt = max(heat.limit_k_per_w, LEAST_OF_EXPECTED * expected) if shown else expected
        strength = 1.0 if shown else 0.5
    if per_watt * heat.possible_k < VISIBLE_K:
        return None
    share = heat.k_per_w / per_watt
    charging = np.interp(heat.time_ms, curve.time_ms, curve.current_a) >= 0.3 * usual_a(curve)
    value = float(share[charging][-1]) if charging.any() else float(share[-1])
    met = value >= MET_SHARE
    at_ms = None
    spread_s = None
    if met:
        wanted = min(FULL_SHARE, 0.98 * value)
        at_ms = int(heat.time_ms[int(np.argmax(share >= wanted))])
        early = int(heat.time_ms[int(np.argmax(share >= wanted - 0.1))])
        late = heat.time_ms[int(np.argmax(share >= min(wanted + 0.1, 0.98 * float(share.max()))))]
        spread_s = max(600.0, 0.5 * float(max(late, at_ms) - early) / 1000.0) / strength
    return Evidence(
        rule="heating",
        met=met,
        value=value,
        limit=FULL_SHARE,
        unit="of charging power",
        weight=strength * HEAT_WEIGHT * float(np.clip((value - HALF_SHARE) / (MET_SHARE - HALF_SHARE), -1.0, 1.0)),
        at_ms=at_ms,
        spread_s=spread_s,
    )


def rose_to_rest(heat: Heat) -> bool:
    """Whether the heat rose clearly within the session and came to rest, so that it shows what a full pack does."""
    return (
        heat.rise_k > VISIBLE_K
        and heat.limit_k_per_w > CONTRAST * max(heat.before_k_per_w, 0.0)
        and float(heat.k_per_w[-1]) > AT_REST * heat.limit_k_per_w
    )


def usual_a(curve: Curve) -> float:
    """The current a session has when it has its sun."""
    known = curve.current_a[np.isfinite(curve.current_a)]
    return float(np.percentile(known, 90)) if known.size else 0.0


def _charging_s(curve: Curve) -> Floats:
    """Time in charge up to each step, counted anew after a pause that lets the pack rest."""
    charging = curve.current_a > 0.2 * usual_a(curve)
    index = np.arange(charging.size)
    t = curve.time_ms
    last = np.maximum.accumulate(np.where(charging, index, -1))
    rested = charging & (index > 0) & (t - t[np.maximum(np.roll(last, 1), 0)] > REST_MS)
    total = np.cumsum(np.where(charging, curve.step_s, 0.0))
    return total - np.maximum.accumulate(np.where(rested, total - curve.step_s, 0.0))


def _steady(curve: Curve) -> Mask:
    """True where the current is what it has been for some minutes, so that the voltage has settled to it."""
    current = _sustained(curve)
    back = min(max(1, round(SETTLE_S / curve.step_s)), current.size - 1)
    padded = np.concatenate((np.full(back, current[0]), current))
    recent = np.lib.stride_tricks.sliding_window_view(padded, back + 1)
    off = np.maximum(recent.max(axis=1) - current, current - recent.min(axis=1))
    steady: Mask = off <= SAME_RATE * np.abs(current)
    return steady


def _sustained(curve: Curve) -> Floats:
    """Running median of the current: single odd readings do not break a steady current."""
    current = np.where(np.isfinite(curve.current_a), curve.current_a, 0.0)
    half = MEDIAN_STEPS // 2
    padded = np.concatenate((np.full(half, current[0]), current, np.full(half, current[-1])))
    middle: Floats = np.median(np.lib.stride_tricks.sliding_window_view(padded, MEDIAN_STEPS), axis=1)
    return middle


def _lasting(mask: Mask, steps: int) -> Mask:
    """True at steps that are the last of at least ``steps`` true ones in a row."""
    run = mask.copy()
    for k in range(1, steps):
        run[k:] &= mask[:-k]
        run[:k] = False
    return run


def _smooth(values: Floats) -> Floats:
    """Mean of three neighbours."""
    padded = np.concatenate((values[:1], values, values[-1:]))
    return (padded[:-2] + padded[1:-1] + padded[2:]) / 3.0
