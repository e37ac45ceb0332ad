"""The charge sessions of a window, judged: the rows of the `charges` table."""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from hub.battery.balance import Balance, advance, begin, filled
from hub.battery.flow import Flow
from hub.battery.fullness import EndedBy, Known, Verdict, judge
from hub.battery.phases import States, states, thresholds_a
from hub.battery.sessions import Span, next_span
from hub.battery.spec import NodeSpec, PackSpec, Window

# A session that put in less than this share of the rated capacity is not worth a row.
LEAST_CHARGE_IT_H = 0.005
# A charger that has cut a full pack has ended the session once it has stayed off this long.
STAYS_OFF_MS = 15 * 60_000
# Charge into a full pack in one day, of the rated capacity: the intermittent trickle charge that VARTA Microbattery's
# handbook of sealed cells allows.
OVERCHARGE_IT_H = 0.10


@dataclass(frozen=True, slots=True)
class ChargeSession:
    """A charge session, open or ended.

    Attributes
    ----------
    start_ms, end_ms
        First and last reading in charge; ``end_ms`` is ``None`` while more may follow.
    charge_ah, charge_wh
        What went in; energy is ``None`` without a voltage.
    mean_rate_it
        Over the time in charge.
    peak_temperature_c
        Of the pack.
    ended_by
        Vocabulary of the export; ``None`` while open.
    full_at_ms
        When the pack became full; ``None`` where it did not.
    confidence
        How sure it is that the pack did, or did not, fill: 0.5 to 1.
    overcharge_ah
        Charge after full; ``None`` where the pack did not fill.
    evidence
        Findings by rule, each with ``met``, ``value``, ``limit``, ``unit``, ``weight`` (log-odds) and ``at_ms``.
    """

    start_ms: int
    end_ms: int | None
    charge_ah: float
    charge_wh: float | None
    mean_rate_it: float
    peak_temperature_c: float | None
    ended_by: EndedBy | None
    full_at_ms: int | None
    confidence: float
    overcharge_ah: float | None
    evidence: dict[str, Any]


@dataclass(frozen=True, slots=True)
class Memory:
    """What is known of a pack before a window: an open session's start, the balance, and what sessions taught."""

    open_since_ms: int | None
    balance: Balance | None
    known: Known


def charges(
    running: Flow, window: Window, node: NodeSpec, pack: PackSpec, memory: Memory, *, load_known: bool
) -> tuple[list[ChargeSession], Memory]:
    """Sessions that are open in the window or end in it.

    Parameters
    ----------
    running
        Readings before the window's end, at least one.
    window, node, pack
        What is asked for.
    memory
        From the window before.
    load_known
        Whether discharge is seen; without it there is no balance.
    """
    t = running.time_ms
    state = states(running.series.get("pack_current"), *thresholds_a(pack, node))
    from_ms = window.start_ms if memory.open_since_ms is None else memory.open_since_ms
    balance = memory.balance or begin(int(t[max(int(np.searchsorted(t, from_ms, side="right")) - 1, 0)]))
    known = memory.known
    found: list[ChargeSession] = []
    at = int(np.searchsorted(t, from_ms))
    if memory.open_since_ms is not None and at < t.size:
        state[at] = 1  # an open session keeps its beginning, also where an offset found since has moved the current
    while (span := next_span(running, state, pack, at)) is not None:
        if span.cause is None and window.pack_leaves:
            span = replace(span, cause="pack-left")
        start = advance(balance, running, int(t[span.first]))
        span, verdict = _judged(running, span, state, pack, node, replace(known, balance=start if load_known else None))
        if verdict is not None:
            found.append(_session(running, span, state, pack, verdict))
        if span.cause is None:
            return found, Memory(int(t[span.first]), start, known)
        balance = advance(start, running, int(t[span.last]))
        if verdict is not None:
            known = verdict.known
            if verdict.full_at_ms is not None:
                balance = filled(running, verdict.full_at_ms, int(t[span.last]))
        at = span.last + 1
    return found, Memory(None, advance(balance, running, window.end_ms), known)


def _judged(
    running: Flow, span: Span, state: States, pack: PackSpec, node: NodeSpec, known: Known
) -> tuple[Span, Verdict | None]:
    """The verdict on a session, cut short where the charger stopped a full pack; none on one too small to matter."""
    if running.in_ah[span.last] - running.in_ah[span.first] < LEAST_CHARGE_IT_H * pack.rated_capacity_ah:
        return span, None
    verdict = judge(running, span, pack, node, known)
    if verdict.full_at_ms is None or verdict.cut_at_ms is None:
        return span, verdict
    cut = running.index(verdict.cut_at_ms)
    later = cut + 1 + np.flatnonzero(state[cut + 1 : span.last + 1] == 1)
    resumed_ms = int(running.time_ms[later[0]]) if later.size else None
    if resumed_ms is None or resumed_ms - verdict.cut_at_ms < STAYS_OFF_MS:
        return span, verdict
    span = Span(span.first, cut, "stopped")
    return span, judge(running, span, pack, node, known)


def _session(running: Flow, span: Span, state: States, pack: PackSpec, verdict: Verdict) -> ChargeSession:
    a, b = span.first, span.last
    t = running.time_ms
    charge = float(running.in_ah[b] - running.in_ah[a])
    energy = float(running.in_wh[b] - running.in_wh[a])
    warm = running.series.get("pack_temperature")[a : b + 1]
    charging = (state[a + 1 : b + 1] == 1) & ~running.gap[a + 1 : b + 1]
    hours = float(np.diff(t[a : b + 1])[charging].sum()) / 3_600_000.0
    evidence = dict(verdict.evidence)
    over: float | None = None
    if verdict.full_at_ms is not None:
        over = max(float(running.in_ah[b] - np.interp(verdict.full_at_ms, t, running.in_ah)), 0.0)
        limit = OVERCHARGE_IT_H * pack.rated_capacity_ah
        evidence["overcharge"] = {
            "met": over > limit,
            "value": round(over, 5),
            "limit": round(limit, 5),
            "unit": "Ah",
            "weight": 0.0,
            "at_ms": verdict.full_at_ms,
        }
    return ChargeSession(
        start_ms=int(t[a]),
        end_ms=int(t[b]) if span.cause is not None else None,
        charge_ah=charge,
        charge_wh=energy if energy > 0.0 else None,
        mean_rate_it=charge / hours / pack.rated_capacity_ah if hours > 0.0 else 0.0,
        peak_temperature_c=float(np.nanmax(warm)) if np.isfinite(warm).any() else None,
        ended_by=verdict.ended_by,
        full_at_ms=verdict.full_at_ms,
        confidence=verdict.confidence,
        overcharge_ah=over,
        evidence=evidence,
    )
