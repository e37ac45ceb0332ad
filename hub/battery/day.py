"""Figures of one window of a node: what it counted, and its charge sessions.

Figures are a fold: a window takes what the one before carried and hands on its own. Nothing else is remembered, so
history can be computed again at any time.
"""

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace

import numpy as np

from hub.battery.balance import Balance
from hub.battery.charge import Count, count, gap_limit_ms, load_wh, observed_s, uncertainty_ah
from hub.battery.charges import ChargeSession, Memory, charges
from hub.battery.current import PackCurrent, pack_current, rest_offset_a
from hub.battery.flow import flow
from hub.battery.fullness import Known
from hub.battery.spec import NodeSpec, PackSpec, Window
from hub.battery.totals import Bridge, Last, bridged_s, bridges, newest, preceded
from hub.series import Floats, Series

METHOD_VERSION = 1
CONTEXT_MS = 3_600_000


@dataclass(frozen=True, slots=True)
class Carried:
    """What a window hands to the next one of the same node. All of it survives JSON unchanged.

    Attributes
    ----------
    pack
        Label of the pack it speaks of; another pack begins anew.
    open_since_ms
        First reading of a charge session that is still open. The sums since full are then those of that instant.
    balance_at_ms, anchor_ms, full_at_ms, removed_since_full_ah, returned_since_full_ah, unseen_since_full_s
        The charge balance, see `hub.battery.balance.Balance`.
    k_per_w, lag_s, charge_factor, learnt, cut_after_s
        What sessions taught, see `hub.battery.fullness.Known`.
    offset_a
        Offset of the current sensor, as last found.
    last_ms, last_values
        The newest reading with a current, see `hub.battery.totals.Last`.
    """

    pack: str | None = None
    open_since_ms: int | None = None
    balance_at_ms: int | None = None
    anchor_ms: int | None = None
    full_at_ms: int | None = None
    removed_since_full_ah: float | None = None
    returned_since_full_ah: float | None = None
    unseen_since_full_s: float | None = None
    k_per_w: float | None = None
    lag_s: float | None = None
    charge_factor: float | None = None
    learnt: int = 0
    cut_after_s: float | None = None
    offset_a: float | None = None
    last_ms: int | None = None
    last_values: Mapping[str, float] = field(default_factory=dict)

    def to_json(self) -> str:
        """One line of JSON, the same for the same values."""
        return json.dumps(asdict(self), sort_keys=True, separators=(",", ":"), allow_nan=False)

    @classmethod
    def from_json(cls, text: str) -> "Carried":
        """What `to_json` wrote."""
        return cls(**json.loads(text))


@dataclass(frozen=True, slots=True)
class DayFigures:
    """Figures of one window; ``None`` where a figure cannot be known.

    Attributes
    ----------
    coverage, observed_s
        Share of the window, and its time, between readings no further apart than the gap limit.
    bridged_s
        Time that running totals cover beside it.
    charge_ah, discharge_ah, charge_uncertainty_ah, discharge_uncertainty_ah
        Charge into and out of the pack, with standard uncertainties.
    charge_wh, discharge_wh, load_wh
        Energy into and out of the pack, and into the load.
    pack_temperature_max_c, cell_voltage_min_v, cell_voltage_max_v
        Extremes of the readings inside; a cell's voltage is the pack's over its cells in series.
    full_at_ms
        When the pack first became full inside the window.
    offset_removed_a
        Offset that was taken off the current.
    """

    coverage: float
    observed_s: float
    bridged_s: float = 0.0
    charge_ah: float | None = None
    discharge_ah: float | None = None
    charge_uncertainty_ah: float | None = None
    discharge_uncertainty_ah: float | None = None
    charge_wh: float | None = None
    discharge_wh: float | None = None
    load_wh: float | None = None
    pack_temperature_max_c: float | None = None
    cell_voltage_min_v: float | None = None
    cell_voltage_max_v: float | None = None
    full_at_ms: int | None = None
    offset_removed_a: float | None = None


@dataclass(frozen=True, slots=True)
class DayResult:
    """Everything computed for one window."""

    figures: DayFigures
    sessions: list[ChargeSession]
    carried: Carried


def analyse(series: Series, window: Window, node: NodeSpec, pack: PackSpec | None, carried: Carried) -> DayResult:
    """Figures, sessions and what to carry on, for one window.

    Parameters
    ----------
    series
        Calibrated and screened readings of the window and around it: at least 1 h before and 15 min after, and back
        to ``carried.open_since_ms`` where that is set.
    window
        The stretch of time.
    node, pack
        Sensing and pack; without a pack only what needs none.
    carried
        What the window before handed on; ``Carried()`` for the first one.
    """
    label = pack.label if pack is not None else None
    if carried.pack != label:
        # Readings before this pack came belong to another one: they help to cut the first interval, nothing else.
        carried = Carried(pack=label, offset_a=carried.offset_a)
        own_from_ms = window.start_ms
    else:
        before_ms = max(CONTEXT_MS, 2 * gap_limit_ms(node.interval_s))
        own_from_ms = min(carried.open_since_ms or window.start_ms, window.start_ms - before_ms)
    offset_a = rest_offset_a(series.between(own_from_ms, window.end_ms), node)
    offset_a = carried.offset_a if offset_a is None else offset_a
    seen = pack_current(series, node, offset_a)
    last = Last(carried.last_ms, carried.last_values) if carried.last_ms is not None else None
    own = preceded(seen.series.between(own_from_ms, window.end_ms), last)
    begins_ms = int(own.time_ms[0]) if len(own) else window.start_ms
    over_gaps = bridges(own, begins_ms, window.end_ms, gap_limit_ms(node.interval_s))
    last = newest(own, window.end_ms)
    carried = replace(
        carried,
        offset_a=offset_a,
        last_ms=last.at_ms if last else None,
        last_values=last.values if last else {},
    )
    figures = _figures(seen, window, pack, over_gaps)
    if pack is None or last is None:
        return DayResult(figures, [], carried)
    running = flow(own, seen.node, over_gaps)
    sessions, memory = charges(running, window, seen.node, pack, _memory(carried), load_known=seen.load_known)
    carried = _remember(carried, memory)
    full = [s.full_at_ms for s in sessions if s.full_at_ms and window.start_ms <= s.full_at_ms < window.end_ms]
    return DayResult(replace(figures, full_at_ms=min(full, default=None)), sessions, carried)


def _figures(seen: PackCurrent, window: Window, pack: PackSpec | None, over_gaps: Sequence[Bridge]) -> DayFigures:
    """What the window counted."""
    series, node = seen.series, seen.node
    start, end = window.start_ms, window.end_ms
    length_s = (end - start) / 1000.0
    counted = count(series, start, end, node)
    inside = series.between(start, end)
    observed = counted.observed_s
    if not np.isfinite(inside.get("pack_current")).any():
        observed = observed_s(series, start, end, node)
    here = [b for b in over_gaps if b.end_ms >= start]
    bridged = bridged_s(here, start, end)
    unseen = max(length_s - counted.observed_s - bridged, 0.0)
    charge = _with(counted.charge_ah, [b.in_ah for b in here])
    discharge = _with(counted.discharge_ah, [b.out_ah for b in here]) if seen.load_known else None
    cells = inside.get("pack_voltage") / pack.cells_in_series if pack is not None else np.empty(0)
    return DayFigures(
        coverage=min(observed / length_s, 1.0) if length_s > 0.0 else 0.0,
        observed_s=observed,
        bridged_s=bridged,
        charge_ah=charge,
        discharge_ah=discharge,
        charge_uncertainty_ah=_uncertainty(charge, counted.charging_s, unseen, counted, node),
        discharge_uncertainty_ah=_uncertainty(discharge, counted.discharging_s, unseen, counted, node),
        charge_wh=_with(counted.charge_wh, [_energy(b.in_ah, b.voltage_v) for b in here]),
        discharge_wh=_with(counted.discharge_wh, [_energy(b.out_ah, b.voltage_v) for b in here])
        if seen.load_known
        else None,
        load_wh=load_wh(series, start, end, node),
        pack_temperature_max_c=_extreme(np.max, inside.get("pack_temperature")),
        cell_voltage_min_v=_extreme(np.min, cells),
        cell_voltage_max_v=_extreme(np.max, cells),
        offset_removed_a=seen.offset_a or None,
    )


def _memory(carried: Carried) -> Memory:
    balance = None
    if carried.balance_at_ms is not None and carried.anchor_ms is not None:
        balance = Balance(
            at_ms=carried.balance_at_ms,
            since_ms=carried.anchor_ms,
            full_at_ms=carried.full_at_ms,
            removed_ah=carried.removed_since_full_ah or 0.0,
            returned_ah=carried.returned_since_full_ah or 0.0,
            unseen_s=carried.unseen_since_full_s or 0.0,
        )
    known = Known(
        k_per_w=carried.k_per_w,
        lag_s=carried.lag_s,
        charge_factor=carried.charge_factor,
        learnt=carried.learnt,
        cut_after_s=carried.cut_after_s,
    )
    return Memory(carried.open_since_ms, balance, known)


def _remember(carried: Carried, memory: Memory) -> Carried:
    balance, known = memory.balance, memory.known
    assert balance is not None
    return replace(
        carried,
        open_since_ms=memory.open_since_ms,
        balance_at_ms=balance.at_ms,
        anchor_ms=balance.since_ms,
        full_at_ms=balance.full_at_ms,
        removed_since_full_ah=balance.removed_ah,
        returned_since_full_ah=balance.returned_ah,
        unseen_since_full_s=balance.unseen_s,
        k_per_w=known.k_per_w,
        lag_s=known.lag_s,
        charge_factor=known.charge_factor,
        learnt=known.learnt,
        cut_after_s=known.cut_after_s,
    )


def _with(counted: float | None, bridged: Sequence[float | None]) -> float | None:
    """A count and what running totals add to it."""
    known = [amount for amount in bridged if amount is not None]
    if counted is None and not known:
        return None
    return (counted or 0.0) + sum(known)


def _energy(charge_ah: float | None, voltage_v: float | None) -> float | None:
    return charge_ah * voltage_v if charge_ah is not None and voltage_v is not None else None


def _uncertainty(
    amount_ah: float | None, flowing_s: float, unseen_s: float, counted: Count, node: NodeSpec
) -> float | None:
    return None if amount_ah is None else uncertainty_ah(amount_ah, flowing_s, unseen_s, counted, node)


def _extreme(which: Callable[[Floats], np.float64], values: Floats) -> float | None:
    known = values[np.isfinite(values)]
    return float(which(known)) if known.size else None
