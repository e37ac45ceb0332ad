"""Nodes and packs as plain values for the interface; units in the names, times in UTC."""

from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

from hub.store import aside, export, figures, intake, readings, receipts
from hub.store.engine import Database
from hub.store.inventory import Fitting, Inventory, Node, Pack
from hub.store.inventory_file import instant_text
from hub.web.gathering import latest_of, subject
from hub.web.words import HOUR_MS


def nodes(database: Database, known: Inventory, ids: dict[str, int], now_ms: int) -> list[dict[str, Any]]:
    """All nodes in short."""
    with database.read() as connection:
        bounds = {node.name: readings.bounds(connection, ids[node.name]) for node in known.nodes}
    return [_node_in_short(known, node, bounds[node.name], now_ms) for node in known.nodes]


def _node_in_short(known: Inventory, node: Node, bounds: tuple[int, int] | None, now_ms: int) -> dict[str, Any]:
    fitted = _now(known.fitted(node.name), now_ms)
    return {
        "name": node.name,
        "site": node.site,
        "interval_s": node.interval_s,
        "pack": fitted.pack if fitted else None,
        "first_reading_at": _instant(bounds[0] if bounds else None),
        "last_reading_at": _instant(bounds[1] if bounds else None),
    }


def node(database: Database, known: Inventory, name: str, node_id: int, now_ms: int) -> dict[str, Any]:
    """All that is known of one node."""
    found = known.node(name)
    who = subject(known, found, node_id)
    with database.read() as connection:
        bounds = readings.bounds(connection, node_id)
        latest = {}
        if bounds is not None:
            newest = readings.read(connection, node_id, bounds[1] - HOUR_MS, bounds[1] + 1)
            latest = latest_of(newest, who.pack_at(now_ms))
        presence = intake.presence_of(connection).get(node_id)
        missing = receipts.missing(connection, node_id)
        unknown = intake.unknown_names(connection, node_id)
        counts = aside.counts(connection, node_id)
    return {
        **_node_in_short(known, found, bounds, now_ms),
        **{key: value for key, value in asdict(found).items() if key not in {"name", "site", "interval_s"}},
        "latest": {
            quantity: {"at": _instant(value.time_ms), "value": value.value} for quantity, value in latest.items()
        },
        "presence": {"state": presence[0], "changed_at": _instant(presence[1])} if presence else None,
        "fittings": [_fitting(fitting) for fitting in who.fittings],
        "missing_messages": [
            {"boot": boot, "first": first, "last": last} for boot, runs in missing.items() for first, last in runs
        ],
        "unknown_names": unknown,
        "set_aside": counts,
    }


def packs(known: Inventory, now_ms: int) -> list[dict[str, Any]]:
    """All packs in short."""
    return [_pack_in_short(known, pack, now_ms) for pack in known.packs]


def _pack_in_short(known: Inventory, pack: Pack, now_ms: int) -> dict[str, Any]:
    fitted = _now([f for f in known.fittings if f.pack == pack.label], now_ms)
    return {**asdict(pack), "node": fitted.node if fitted else None}


def pack(database: Database, known: Inventory, label: str, pack_id: int, now_ms: int) -> dict[str, Any]:
    """All that is known of one pack."""
    found = known.pack(label)
    with database.read() as connection:
        discharged_ah = sum(day["discharge_ah"] for day in figures.pack_days(connection, pack_id))
        charges = [row for _, row in export.rows(connection, "charges", export.Selection(pack=label))]
    return {
        **_pack_in_short(known, found, now_ms),
        "fittings": [_fitting(f) for f in known.fittings if f.pack == label],
        "discharge_ah": round(discharged_ah, 6),
        "equivalent_full_cycles": round(discharged_ah / found.rated_capacity_ah, 6),
        "charges": len(charges),
        "full_charges": sum(charge["full_at"] is not None for charge in charges),
    }


def _now(fittings: Sequence[Fitting], now_ms: int) -> Fitting | None:
    return next((f for f in fittings if f.start_ms <= now_ms and (f.end_ms is None or f.end_ms > now_ms)), None)


def _fitting(fitting: Fitting) -> dict[str, Any]:
    return {
        "node": fitting.node,
        "pack": fitting.pack,
        "start": _instant(fitting.start_ms),
        "end": _instant(fitting.end_ms),
    }


def _instant(time_ms: int | None) -> str | None:
    return None if time_ms is None else instant_text(time_ms)
