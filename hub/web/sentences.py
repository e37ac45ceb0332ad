"""How a node is, in sentences. Pure functions of figures; what cannot be said is said to be not known, and why."""

from collections.abc import Sequence
from zoneinfo import ZoneInfo

from hub.store.inventory import Fitting, Node, Pack
from hub.web.days import Day, Row
from hub.web.words import (
    MINUTE_MS,
    NBSP,
    count,
    day_words,
    duration,
    figure,
    listed,
    moment,
    number,
    percent,
    when,
)

# A day of which less was seen may have had a full charge in the part nobody saw.
SEEN_ENOUGH = 0.8
# Common practice, no source: twice the usual rhythm and a quarter of an hour for a patchy link.
PATIENCE_MS = 15 * MINUTE_MS


def silent_after_ms(node: Node) -> int:
    """How long a node may be quiet before it counts as silent."""
    return round(2 * node.interval_s * 1000) + PATIENCE_MS


def is_silent(node: Node, last_ms: int | None, now_ms: int) -> bool:
    """Whether a node that was heard before has been quiet too long."""
    return last_ms is not None and now_ms - last_ms > silent_after_ms(node)


def heard(node: Node, last_ms: int | None, now_ms: int, zone: ZoneInfo) -> str:
    """When the node was last heard."""
    if last_ms is None:
        return "Never heard yet."
    if is_silent(node, last_ms, now_ms):
        return f"Silent for {duration(now_ms - last_ms)}: last heard {when(last_ms, zone, now_ms)}."
    return f"Last heard {duration(now_ms - last_ms)} ago."


def today_so_far(day: Row | None) -> str:
    """The figures of a day that is not over."""
    if day is None:
        return ""
    parts = []
    for key, words in (("charge_ah", "into the pack"), ("discharge_ah", "out of it")):
        if day[key] is not None:
            spread = day[f"{key.removesuffix('_ah')}_uncertainty_ah"]
            margin = f"{NBSP}±{NBSP}{number(spread, 2)}" if spread is not None else ""
            parts.append(f"{number(day[key], 2)}{margin}{NBSP}Ah {words}")
    if day["panel_wh"] is not None:
        sky = day["clear_sky_wh"]
        offered = f", where a clear sky would have offered {figure(sky, 'Wh', 0)}" if sky is not None else ""
        parts.append(f"{figure(day['panel_wh'], 'Wh', 1)} from the panel{offered}")
    told = f": {listed(parts)}" if parts else ": no figure is known"
    return f"Today so far{told}. Readings cover {percent(day['coverage'])} of the day so far."


def filled(days: Sequence[Day], today: Day | None, zone: ZoneInfo) -> str:
    """On how many of the days before today the pack filled, and whether it has today."""
    has_today = today is not None and today.coverage is not None
    if not days and not has_today:
        return "Whether it fills is not known yet: its first whole day is not over."
    if all(day.coverage is None for day in days) and not has_today:
        return "Whether it filled is not known: no figures have been computed for these days yet."
    text = _filled_before(days)
    if today is not None and today.full_at_ms is not None:
        at = moment(today.full_at_ms, zone)
        text += f"{'; full' if text else 'Full'} today at {at.clock} {at.zone}"
    return f"{text}." if text else "Not full yet on its first day."


def _filled_before(days: Sequence[Day]) -> str:
    if not days:
        return ""
    full = sum(day.full_at_ms is not None for day in days)
    unseen = sum(day.full_at_ms is None and (day.coverage or 0.0) < SEEN_ENOUGH for day in days)
    span = "yesterday" if len(days) == 1 else f"in the last {count(len(days), 'day')}"
    if unseen == len(days):
        return f"Whether it filled {span} is not known: too few readings"
    if len(days) == 1:
        return "Filled yesterday" if full else "Did not fill yesterday"
    share = "each" if full == len(days) else str(full) if full else "none"
    text = f"Filled on {share} of the last {count(len(days), 'day')}"
    return f"{text}; {count(unseen, 'day')} not known, too few readings" if unseen else text


def never_filled(days: Sequence[Day], today: Day | None) -> bool:
    """Whether each of the days was seen well enough and none had a full charge, nor today so far."""
    return (
        bool(days)
        and all(day.full_at_ms is None and (day.coverage or 0.0) >= SEEN_ENOUGH for day in days)
        and (today is None or today.full_at_ms is None)
    )


def fitted(pack: Pack | None, fitting: Fitting | None, zone: ZoneInfo) -> str:
    """Which pack is in the node."""
    if pack is None or fitting is None:
        return "No pack is fitted, so figures of a pack are not known. Add a fitting to the inventory."
    since = moment(fitting.start_ms, zone).local.date()
    rated = figure(pack.rated_capacity_ah, "Ah", 1)
    return f"Pack {pack.label}, {cells(pack)} of {rated} rated, since {day_words(since)}."


def flow(current_a: float) -> str:
    """A current with its direction in words."""
    side = "into the pack" if current_a >= 0 else "out of the pack"
    return f"{figure(abs(current_a), 'A', 2)} {side}"


def cells(pack: Pack) -> str:
    """“8 cells”, or “8 cells in series, 2 in parallel”."""
    if pack.cells_in_parallel > 1:
        return f"{count(pack.cells_in_series, 'cell')} in series, {pack.cells_in_parallel} in parallel"
    return count(pack.cells_in_series, "cell")


def level(last_full_ms: int | None, now_ms: int, *, has_pack: bool) -> str:
    """How full the pack is now."""
    if not has_pack:
        return ""
    if last_full_ms is None:
        return "How full it is now is not known: no full charge was seen from which to reckon."
    if now_ms - last_full_ms < 30 * MINUTE_MS:
        return "It is full."
    return (
        f"Last full {duration(now_ms - last_full_ms)} ago; its level since then is not known, "
        "as only a full charge is sure."
    )


ENDED_BY = {
    "voltage-drop": "ended as the voltage dipped from its peak",
    "voltage-plateau": "ended as the voltage stopped rising",
    "temperature-slope": "ended as the pack began to warm",
    "temperature-limit": "ended at the temperature limit",
    "charger-cut": "ended by the charger while there was still sun",
    "timer": "ended by the charger's timer",
    "sun-ended": "ended when the sun went",
    "unknown": "how it ended is not known",
}


def ending(ended_by: str | None, end_ms: int | None, full_at_ms: int | None, sure: float | None) -> str:
    """Whether a charge session filled the pack, how sure that is, and how it ended."""
    full = full_at_ms is not None
    if end_ms is None:
        return f"Full, {confidence(sure)}; charging goes on" if full else "Still charging"
    cause = ENDED_BY.get(ended_by or "unknown", ENDED_BY["unknown"])
    return f"{'Full' if full else 'Not full'}, {confidence(sure)}; {cause}"


# Common practice, no source: words for how sure a method is, where 0.5 is a toss of a coin.
CONFIDENCE = ((0.95, "sure"), (0.8, "quite sure"), (0.65, "likely"))


def confidence(value: float | None) -> str:
    """How sure a method is in words, with the number."""
    if value is None:
        return "how sure is not known"
    words = next((text for least, text in CONFIDENCE if value >= least), "doubtful")
    return f"{words} ({value:.2f})"
