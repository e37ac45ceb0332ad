"""Packs: where each is and was, what went through it, and its charges."""

from collections.abc import Sequence
from typing import Any
from zoneinfo import ZoneInfo

from flask import Blueprint, render_template

from hub.battery.throughput import equivalent_full_cycles
from hub.errors import InventoryError
from hub.store import figures, inventory
from hub.store.inventory import Fitting, Inventory, Pack
from hub.web.charges import sessions
from hub.web.days import Row
from hub.web.desk import desk
from hub.web.problems import NotKnownError
from hub.web.sentences import cells
from hub.web.words import zone_sentence

blueprint = Blueprint("pack", __name__)

CHARGES_SHOWN = 60
UTC = ZoneInfo("UTC")


@blueprint.get("/packs")
def all_packs() -> str:
    """All packs and where they are."""
    here, now_ms = desk(), desk().clock()
    with here.database.read() as connection:
        known = inventory.load(connection)
    rows = [(pack, cells(pack), _current(known, pack, now_ms)) for pack in known.packs]
    return render_template("packs.html", rows=rows, zones=_zones(known))


@blueprint.get("/packs/<path:label>")
def page(label: str) -> str:
    """One pack."""
    here, now_ms = desk(), desk().clock()
    with here.database.read() as connection:
        known = inventory.load(connection)
        try:
            pack = known.pack(label)
        except InventoryError as error:
            raise NotKnownError(str(error)) from None
        days = figures.pack_days(connection, inventory.pack_ids(connection)[label])
        ids = inventory.node_ids(connection)
        fittings = [f for f in known.fittings if f.pack == label]
        rows = [
            row
            for name in sorted({f.node for f in fittings})
            for row in figures.charges(connection, ids[name])
            if row["pack"] == label
        ]
    zones = _zones(known)
    zone = zones[fittings[-1].node] if fittings else UTC
    charges = sessions(sorted(rows, key=lambda row: row["start_ms"]), zone)
    return render_template(
        "pack.html",
        pack=pack,
        cells=cells(pack),
        fittings=sorted(fittings, key=lambda f: f.start_ms, reverse=True),
        current=_current(known, pack, now_ms),
        zones=zones,
        zone=zone,
        zone_sentence=zone_sentence(zone, now_ms),
        life=_life(days, pack),
        charges=charges[-CHARGES_SHOWN:][::-1],
        charges_left_out=max(0, len(charges) - CHARGES_SHOWN),
        full=sum(charge.full for charge in charges),
        total=len(charges),
    )


def _zones(known: Inventory) -> dict[str, ZoneInfo]:
    return {node.name: ZoneInfo(known.site_of(node).timezone) for node in known.nodes}


def _current(known: Inventory, pack: Pack, now_ms: int) -> Fitting | None:
    return next(
        (
            f
            for f in known.fittings
            if f.pack == pack.label and f.start_ms <= now_ms and (f.end_ms is None or f.end_ms > now_ms)
        ),
        None,
    )


def _life(days: Sequence[Row], pack: Pack) -> dict[str, Any] | None:
    """What went through the pack; ``None`` where no discharge is known."""
    if not days:
        return None
    discharged = sum(day["discharge_ah"] for day in days)
    return {
        "discharge_ah": discharged,
        "cycles": equivalent_full_cycles(discharged, pack.rated_capacity_ah),
        "first": days[0]["date"],
        "last": max(day["date"] for day in days),
        "days": len({day["date"] for day in days}),
    }
