"""The strip book's page: what needs a person, then a strip a node."""

from collections.abc import Iterable

from flask import Blueprint, render_template, request

from hub.web.book import Snapshot
from hub.web.desk import desk
from hub.web.glance import Glance
from hub.web.hubneeds import hub_needs
from hub.web.needs import Need, needs
from hub.web.sentences import filled, fitted, heard, is_silent, level
from hub.web.words import count

blueprint = Blueprint("overview", __name__)
STRIPS_A_PAGE = 50


@blueprint.get("/")
def page() -> str:
    """The overview; the first steps while there is no node yet."""
    here = desk()
    book, now_ms = here.book.read(), here.clock()
    if not book.glances:
        return render_template(
            "empty.html", strangers=book.strangers, **sorted_needs((), now_ms, hub_needs(here.status()))
        )
    pages = -(-len(book.glances) // STRIPS_A_PAGE)
    number = min(max(request.args.get("page", 1, int), 1), pages)
    shown = book.glances[(number - 1) * STRIPS_A_PAGE : number * STRIPS_A_PAGE]
    return render_template(
        "overview.html",
        book=book,
        **sorted_needs(book.glances, now_ms, hub_needs(here.status())),
        strips=[(glance, state(glance, now_ms), book.strips[glance.node.name]) for glance in shown],
        summary=summary(book),
        page=number,
        pages=pages,
        now_ms=now_ms,
    )


def state(glance: Glance, now_ms: int) -> list[str]:
    """How a node is, in sentences."""
    measured = glance.pack is not None and glance.last_ms is not None
    contact = heard(glance.node, glance.last_ms, now_ms, glance.zone)
    sentences = [
        filled(glance.days, glance.today, glance.zone) if measured else "",
        fitted(glance.pack, glance.fitting, glance.zone),
        level(glance.last_full_ms, now_ms, has_pack=measured),
    ]
    # Silence is the first thing to know about a node; a usual contact is the last.
    silent = is_silent(glance.node, glance.last_ms, now_ms)
    return [sentence for sentence in ([contact, *sentences] if silent else [*sentences, contact]) if sentence]


def sorted_needs(glances: Iterable[Glance], now_ms: int, others: Iterable[Need] = ()) -> dict[str, list[Need]]:
    """What needs a person, parted into what should not wait and what may."""
    found = sorted([*needs(glances, now_ms), *others], key=lambda need: need.rank)
    return {"urgent": [need for need in found if need.urgent], "other": [need for need in found if not need.urgent]}


def summary(book: Snapshot) -> str:
    """What the book holds, in a few words."""
    sites = len({glance.site.name for glance in book.glances})
    return f"{count(len(book.glances), 'node')} at {count(sites, 'site')}"
