"""End of charge: did the pack fill, when, how sure is that, and how did the charger end it.

No single sign is enough under clouds and at the low rates of small panels. Each sign adds its log-odds to those of a
session of which nothing is known; the sum gives the confidence, and the instants of the signs, weighted by how
sharply each one tells the time, give the instant.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np

from hub.battery import evidence as ev
from hub.battery.balance import Balance
from hub.battery.curve import curve
from hub.battery.evidence import Evidence
from hub.battery.flow import Flow
from hub.battery.heat import Heat, fit
from hub.battery.sessions import Span
from hub.battery.spec import NodeSpec, PackSpec
from hub.battery.stop import Stop, charger_cut, last_stop

EndedBy = Literal[
    "voltage-drop",
    "voltage-plateau",
    "temperature-slope",
    "temperature-limit",
    "charger-cut",
    "timer",
    "sun-ended",
    "unknown",
]

PRIOR = -1.5
CUT_WEIGHT = 1.5
# The lowest fixed stop in use is 40.6 °C (105 °F; common practice, no source), the highest published one 60 °C.
LIMIT_LOW_C = 40.0
# Usual limits are 45 °C and more; readings come a little before the stop.
LIMIT_USUAL_C = 44.0
SAME_TEMPERATURE_K = 0.5
# A charger's own samples see a drop before the means over some minutes do.
NEARLY = 0.6
# A timer shows itself by an even duration: whole half hours, to within two readings, of charging before the cut.
TIMER_S = 1800.0
LEARN_ABOVE = 0.9
LEARN_OVER = 5
# Charge factors that can be true; the usual ones are 1.05 to 1.6.
FACTORS = (0.9, 2.5)
# A cut follows its cause within some minutes.
SOON_MS = 30 * 60_000
ENDINGS: tuple[EndedBy, ...] = ("temperature-slope", "timer", "temperature-limit", "voltage-plateau")


@dataclass(frozen=True, slots=True)
class Known:
    """What earlier sessions taught about a pack.

    Attributes
    ----------
    balance
        Charge since the last full, as of the session's first reading; ``None`` where discharge is not seen.
    k_per_w, lag_s
        Rise above the air a watt of a full pack, and its time constant.
    charge_factor
        Charge returned a removed ampere-hour, to full.
    learnt
        From how many sessions.
    cut_after_s
        After how much charging the charger last cut a session that was not full.
    """

    balance: Balance | None = None
    k_per_w: float | None = None
    lag_s: float | None = None
    charge_factor: float | None = None
    learnt: int = 0
    cut_after_s: float | None = None


@dataclass(frozen=True, slots=True)
class Verdict:
    """The judgement of one session.

    Attributes
    ----------
    full_at_ms
        When the pack became full; ``None`` where it did not.
    confidence
        0.5 to 1: how sure it is that the pack did, or did not, fill.
    ended_by
        How the session ended; ``None`` while it has not.
    cut_at_ms
        When the charger cut it.
    evidence
        The findings, as plain values by rule.
    known
        What was known, with what this session teaches.
    """

    full_at_ms: int | None
    confidence: float
    ended_by: EndedBy | None
    cut_at_ms: int | None
    evidence: dict[str, Any]
    known: Known


def judge(flow: Flow, span: Span, pack: PackSpec, node: NodeSpec, known: Known) -> Verdict:
    """Judge one session, open or ended, from its own readings and what was known before it."""
    shape = curve(flow, span.first, span.last, pack, node)
    usual = ev.usual_a(shape)
    cut = charger_cut(flow, span.first, span.last, usual, node)
    heat = fit(shape, pack, known.lag_s)
    found = [
        e
        for e in (
            ev.voltage_drop(shape, pack),
            ev.temperature_slope(shape, pack),
            ev.plateau(shape, pack),
            ev.level(shape, pack),
            ev.heating(shape, heat, known.k_per_w, pack),
            ev.returned(known.balance, flow, span.first, span.last, known.charge_factor, pack, node),
        )
        if e is not None
    ]
    stop = cut
    if stop is None and span.cause is not None:
        stop = last_stop(flow, span.last, usual)
    stopped_by: EndedBy | None = None
    if stop is not None:
        limit = _limit(flow, span.first, stop)
        timer = _timer(flow, span.first, stop, known.cut_after_s, node) if stop.manner == "cut" else None
        found += [e for e in (limit, timer) if e is not None]
        stopped_by = _ended_by(found, stop, span)
        if stop.manner == "cut":
            weight = 0.0 if stopped_by in ("temperature-limit", "timer") else CUT_WEIGHT
            share = stop.after_a / max(stop.before_a, 1e-9)
            found.append(Evidence("charger-cut", True, share, 0.3, "of the current", weight, stop.at_ms, 1800.0))
    score = PRIOR + sum(e.weight for e in found)
    chance = 1.0 / (1.0 + math.exp(-score))
    full_at_ms = _instant(found, flow, span, cut) if score >= 0.0 else None
    return Verdict(
        full_at_ms=full_at_ms,
        confidence=round(max(chance, 1.0 - chance), 3),
        ended_by=stopped_by if span.cause is not None else None,
        cut_at_ms=cut.at_ms if cut is not None else None,
        evidence={e.rule: e.as_json() for e in found},
        known=_learn(known, heat, found, flow, span, cut, chance),
    )


def _instant(found: Sequence[Evidence], flow: Flow, span: Span, cut: Stop | None) -> int:
    """When it became full: the signs' instants, each weighted by how sharply it tells the time."""
    t = flow.time_ms
    first, last = int(t[span.first]), int(t[span.last])
    if cut is not None:
        last = min(last, cut.at_ms)
    timed = [e for e in found if e.met and e.weight > 0.0 and e.at_ms is not None and e.spread_s is not None]
    if not timed:
        return last
    trust = np.array([1.0 / (e.spread_s or 1.0) ** 2 for e in timed])
    at = np.array([float(e.at_ms or 0) for e in timed])
    return int(np.clip(round(float(at @ trust / trust.sum())), first, last))


def _limit(flow: Flow, first: int, stop: Stop) -> Evidence | None:
    """A fixed temperature limit: the pack was as warm as never before in the session when charging broke off."""
    a, b = first, flow.index(stop.at_ms) + 1
    warm = flow.series.get("pack_temperature")[a:b]
    warm = warm[np.isfinite(warm)]
    if warm.size == 0 or stop.manner in ("faded", "dimmed"):
        return None
    at_stop, highest = float(warm[-3:].max()), float(warm.max())
    met = at_stop >= LIMIT_LOW_C and highest - at_stop < SAME_TEMPERATURE_K
    return Evidence("temperature-limit", met, at_stop, LIMIT_LOW_C, "°C", 0.0)


def _timer(flow: Flow, first: int, stop: Stop, before_s: float | None, node: NodeSpec) -> Evidence:
    """An even duration, or the same one as last time."""
    lasted_s = (stop.at_ms - int(flow.time_ms[first])) / 1000.0
    odd_s = abs(lasted_s - TIMER_S * max(1.0, round(lasted_s / TIMER_S)))
    close_s = 2.0 * node.interval_s
    even = odd_s <= close_s <= 0.05 * TIMER_S
    again = before_s is not None and abs(lasted_s - before_s) <= max(close_s, 0.02 * before_s)
    return Evidence("timer", even or again, lasted_s, before_s or TIMER_S, "s", 0.0)


def _ended_by(found: Sequence[Evidence], stop: Stop, span: Span) -> EndedBy:
    if stop.manner in ("faded", "dimmed"):
        went = span.cause in ("sun", "dark") or (span.cause == "discharge" and stop.manner == "faded")
        return "sun-ended" if went else "unknown"
    by_rule = {e.rule: e for e in found}
    met = {rule for rule, e in by_rule.items() if e.met}
    warm, drop = by_rule.get("temperature-limit"), by_rule.get("voltage-drop")
    if warm is not None and warm.met and warm.value >= LIMIT_USUAL_C:
        return "temperature-limit"
    if drop is not None and drop.decisive and drop.value >= NEARLY * drop.limit and _soon(drop, stop):
        return "voltage-drop"
    for rule in ENDINGS:
        if rule in met:
            return rule
    return "charger-cut" if stop.manner == "cut" else "unknown"


def _soon(drop: Evidence, stop: Stop) -> bool:
    """Whether the charger stopped not long after the drop: one that watches for it does not wait."""
    return drop.at_ms is None or stop.at_ms - drop.at_ms <= SOON_MS


def _learn(
    known: Known,
    heat: Heat | None,
    found: Sequence[Evidence],
    flow: Flow,
    span: Span,
    cut: Stop | None,
    chance: float,
) -> Known:
    """What a session teaches: only one that surely filled the pack says how a full pack behaves."""
    if chance < LEARN_ABOVE:
        if cut is not None and chance < 1.0 - LEARN_ABOVE:
            return replace(known, cut_after_s=(cut.at_ms - int(flow.time_ms[span.first])) / 1000.0)
        return known
    share = 1.0 / min(known.learnt + 1, LEARN_OVER)
    new = replace(known, learnt=known.learnt + 1)
    if heat is not None and heat.rise_k > 2.0 * ev.VISIBLE_K and ev.rose_to_rest(heat):
        new = replace(
            new,
            k_per_w=_toward(known.k_per_w, heat.limit_k_per_w, share),
            lag_s=_toward(known.lag_s, heat.lag_s, share),
        )
    # The charge factor is learnt from the other signs alone, or it would confirm itself.
    others = [e for e in found if e.rule != "charge-returned"]
    balance = known.balance
    if balance is not None and balance.full_at_ms is not None and any(e.met and e.spread_s for e in others):
        k = flow.index(_instant(others, flow, span, cut))
        gone = balance.removed_ah + float(flow.out_ah[k] - flow.out_ah[span.first])
        back = balance.returned_ah + float(flow.in_ah[k] - flow.in_ah[span.first])
        if gone > 0.0 and FACTORS[0] <= back / gone <= FACTORS[1]:
            new = replace(new, charge_factor=_toward(known.charge_factor, back / gone, share))
    return new


def _toward(old: float | None, new: float, share: float) -> float:
    return new if old is None else old + share * (new - old)
