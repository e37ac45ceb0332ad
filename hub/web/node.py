"""A node's page: today, the stretch asked for, its charges, its harvest, its link, and what was set aside."""

import datetime as dt
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from flask import Blueprint, render_template, request

from hub.errors import InventoryError
from hub.store import aside, figures, intake, inventory, measured, readings, receipts
from hub.web import dayplot
from hub.web.charges import sessions
from hub.web.days import Row, local_date
from hub.web.daytable import headings, table
from hub.web.desk import desk
from hub.web.gathering import Subject, glance_of, per_cell, subject, traces_of
from hub.web.glance import Glance
from hub.web.harvest import bars, harvested
from hub.web.needs import ASIDE_REASONS, REASONS
from hub.web.overview import sorted_needs, state
from hub.web.plottable import tabulate
from hub.web.problems import NotKnownError
from hub.web.ranges import NAMES, Range, chosen
from hub.web.reduction import Binned
from hub.web.sentences import today_so_far
from hub.web.traces import STEP_MS
from hub.web.words import DAY_MS, zone_sentence

blueprint = Blueprint("node", __name__)

DAYS_SHOWN = 28
DAYS_SHOWN_LEAST = 7
ASIDE_SHOWN = 30
BOOTS_SHOWN = 12
# Stretches of more readings are drawn from the figures of their days: a life of readings takes too long to read.
READINGS_MOST = 250_000
# Values older than the newest by more than this are shown with their own time.
TOGETHER_MS = 90_000


@blueprint.get("/nodes/<name>")
def page(name: str) -> str:
    """The page; ``range`` and ``to`` in the address choose the stretch."""
    here, now_ms = desk(), desk().clock()
    with here.database.read() as connection:
        known = inventory.load(connection)
        try:
            found = known.node(name)
        except InventoryError as error:
            raise NotKnownError(str(error)) from None
        node_id = inventory.node_ids(connection)[name]
        bounds = readings.bounds(connection, node_id)
        presence = intake.presence_of(connection).get(node_id)
        who = subject(known, found, node_id)
        date = local_date(now_ms, who.zone).isoformat()
        today = figures.days(connection, node_id, date, date)
    within = chosen(request.args.get("range", "1d"), request.args.get("to"), now_ms, who.zone, bounds)
    glance = glance_of(
        here.database,
        here.book.traces,
        known,
        who,
        now_ms=now_ms,
        end_ms=-(-now_ms // STEP_MS) * STEP_MS,
        presence=presence[0] if presence else None,
        set_aside=here.book.set_aside_of(name, node_id, now_ms),
    )
    shown = _stretch(who, within)
    return render_template(
        "node.html",
        glance=glance,
        state=state(glance, now_ms),
        **sorted_needs([glance], now_ms),
        now=_now(glance),
        measured_ms=max((value.time_ms for value in glance.latest.values()), default=None),
        today=today_so_far(today[-1] if today else None),
        within=within,
        ranges=NAMES,
        zone_sentence=zone_sentence(who.zone, now_ms),
        presence=presence,
        now_ms=now_ms,
        asides=ASIDE_REASONS,
        reasons=REASONS,
        fittings=who.fittings[::-1],
        headings=headings(),
        **shown,
        **_link(node_id),
    )


def _stretch(who: Subject, within: Range) -> dict[str, Any]:
    """What the page shows of a stretch of time."""
    here = desk()
    whole = within.kind == "all"
    until = None if whole else within.last.isoformat()
    # A single day is listed with those before it, so that it can be compared.
    least = within.last - dt.timedelta(days=DAYS_SHOWN_LEAST - 1)
    since = None if whole else min(within.first, least).isoformat()
    with here.database.read() as connection:
        days = figures.days(connection, who.node_id, since, until)
        charges = figures.charges(connection, who.node_id, None if whole else within.start_ms - DAY_MS, within.end_ms)
        findings = figures.findings(connection, who.node_id, None if whole else within.start_ms - DAY_MS, within.end_ms)
    inside = [row for row in charges if row["end_ms"] is None or row["end_ms"] > within.start_ms]
    listed = sessions(inside, who.zone)
    by_days = within.kind != "1d" and (within.end_ms - within.start_ms) / 1000 / who.node.interval_s > READINGS_MOST
    traces = dayplot.life_traces(days, who.zone) if by_days else _traces(who, within)
    harvest = harvested(days[-DAYS_SHOWN:])
    return {
        "plot": dayplot.plot(
            traces, within, listed, DAY_MS / 1000 if by_days else who.node.interval_s, who.zone, who.node.name
        ),
        "plot_table": tabulate(traces, within, who.zone),
        "sessions": listed[::-1],
        "numbered": dayplot.numbered(listed),
        "days": table(days[-DAYS_SHOWN:], who.node, who.zone, here.clock()),
        "days_left_out": max(0, len(days) - DAYS_SHOWN),
        "harvest_bars": bars(harvest) if len(harvest) > 1 else "",
        "findings": _together(findings),
    }


@dataclass(slots=True)
class Kept:
    """Values of one quantity that were kept out of the figures for one reason."""

    quantity: str
    reason: str
    times: int
    first_ms: int
    last_ms: int


def _together(findings: Iterable[Row]) -> list[Kept]:
    """Findings of a stretch, those of its days put together."""
    found: dict[tuple[str, str], Kept] = {}
    for row in findings:
        key = (row["quantity"], row["reason"])
        kept = found.setdefault(key, Kept(*key, 0, row["first_ms"], row["last_ms"]))
        kept.times += row["count"]
        kept.first_ms, kept.last_ms = min(kept.first_ms, row["first_ms"]), max(kept.last_ms, row["last_ms"])
    return [found[key] for key in sorted(found)]


def _traces(who: Subject, within: Range) -> dict[str, Binned]:
    here = desk()
    if within.kind != "1d":
        return traces_of(here.database, here.book.traces, who, within.start_ms, within.end_ms)
    with here.database.read() as connection:
        series = measured.read(
            connection,
            who.node_id,
            within.start_ms,
            within.end_ms,
            who.calibrations,
            who.node.current_full_scale_a,
        ).series
    traces = dayplot.fine_traces(series, within.start_ms, within.end_ms)
    return traces | {"cell_voltage": per_cell(traces["pack_voltage"], who)}


@dataclass(frozen=True, slots=True)
class Now:
    """A value of now; ``older`` where it was not measured together with the newest."""

    name: str
    value: float
    unit: str
    decimals: int
    time_ms: int
    older: bool


_NOW = (
    ("cell_voltage", "Cell voltage", "V", 3),
    ("pack_voltage", "Pack voltage", "V", 2),
    ("pack_current", "Current into the pack", "A", 3),
    ("pack_temperature", "Pack temperature", "°C", 1),
    ("air_temperature", "Air temperature", "°C", 1),
    ("panel_voltage", "Panel voltage", "V", 2),
    ("panel_current", "Panel current", "A", 3),
    ("load_current", "Load current", "A", 3),
    ("signal", "Link strength", "dBm", 0),
)


def _now(glance: Glance) -> list[Now]:
    """The newest values, those of the last hour before the node was last heard."""
    newest = max((value.time_ms for value in glance.latest.values()), default=0)
    found = [
        (words, unit, decimals, glance.latest[name]) for name, words, unit, decimals in _NOW if name in glance.latest
    ]
    return [
        Now(words, value.value, unit, decimals, value.time_ms, newest - value.time_ms > TOGETHER_MS)
        for words, unit, decimals, value in found
    ]


def _link(node_id: int) -> dict[str, Any]:
    """What is known of the link and of what could not be used."""
    with desk().database.read() as connection:
        missing = receipts.missing(connection, node_id)
        boots = sorted(missing, reverse=True)
        return {
            "missing": [(boot, missing[boot], _many(missing[boot])) for boot in boots[:BOOTS_SHOWN]],
            "boots_left_out": max(0, len(boots) - BOOTS_SHOWN),
            "unknown_names": intake.unknown_names(connection, node_id),
            "aside_counts": aside.counts(connection, node_id),
            "aside_newest": aside.newest(connection, node_id, ASIDE_SHOWN),
        }


def _many(runs: list[tuple[int, int]]) -> int:
    return sum(last - first + 1 for first, last in runs)
