"""Changing the inventory: what a file would change, shown before it is done, and done in one transaction."""

import json
from dataclasses import asdict, dataclass, replace
from typing import Any

from sqlalchemy import Connection, Table

from hub.errors import InventoryError
from hub.store import tables as t
from hub.store.facts import next_revision
from hub.store.inventory import (
    KEYS,
    Calibration,
    Fitting,
    Inventory,
    Node,
    Pack,
    Site,
    load,
    node_ids,
    pack_ids,
    site_ids,
)
from hub.store.inventory_file import Rows, instant_text

Entry = Site | Node | Pack | Fitting | Calibration


@dataclass(frozen=True, slots=True)
class Change:
    """One entry that is new or differs.

    Attributes
    ----------
    kind, key
        What: ``node``, ``ridge-east``.
    before, after
        The values that differ; ``before`` is empty for a new entry.
    """

    kind: str
    key: str
    before: dict[str, Any]
    after: dict[str, Any]

    @property
    def sentence(self) -> str:
        """The change as a person reads it."""
        if not self.before:
            return f"new {self.kind} {self.key}"
        parts = [f"{name} {_shown(self.before[name])} → {_shown(value)}" for name, value in self.after.items()]
        return f"{self.kind} {self.key}: {', '.join(parts)}"


def _shown(value: object) -> str:
    return "not stated" if value is None else str(value)


_KINDS: tuple[tuple[str, str, type, Table], ...] = (
    ("site", "sites", Site, t.site),
    ("node", "nodes", Node, t.node),
    ("pack", "packs", Pack, t.pack),
    ("fitting", "fittings", Fitting, t.fitting),
    ("calibration", "calibrations", Calibration, t.calibration),
)


def merged(known: Inventory, rows: Rows) -> Inventory:
    """What is known with the stated rows laid over it.

    A fitting that is still open ends where the next one of its node or of its pack begins: a pack cannot be in two
    nodes, nor a node hold two packs.

    Raises
    ------
    InventoryError
        A row refers to nothing, or two fittings overlap.
    """
    found: dict[str, tuple[Any, ...]] = {}
    for kind, plural, make, _table in _KINDS:
        entries: dict[tuple[Any, ...], Any] = {_key(kind, e): e for e in getattr(known, plural)}
        for row in rows[kind]:
            key = tuple(row[name] for name in KEYS[kind])
            entries[key] = replace(entries[key], **row) if key in entries else make(**row)
        found[plural] = tuple(entries[key] for key in sorted(entries))
    inventory = Inventory(**found)
    _check_references(inventory)
    return replace(inventory, fittings=_settled(inventory.fittings))


def _key(kind: str, entry: Entry) -> tuple[Any, ...]:
    return tuple(getattr(entry, name) for name in KEYS[kind])


def _check_references(inventory: Inventory) -> None:
    sites = {s.name for s in inventory.sites}
    nodes = {n.name for n in inventory.nodes}
    packs = {p.label for p in inventory.packs}
    for node in inventory.nodes:
        if node.site not in sites:
            raise InventoryError(
                f"Node {node.name} stands at “{node.site}”, but there is no such site. Add a [[site]]."
            )
    for fitting in inventory.fittings:
        if fitting.node not in nodes:
            raise InventoryError(f"A fitting names node “{fitting.node}”, but there is no such node. Add a [[node]].")
        if fitting.pack not in packs:
            raise InventoryError(f"A fitting names pack “{fitting.pack}”, but there is no such pack. Add a [[pack]].")
    for calibration in inventory.calibrations:
        if calibration.node not in nodes:
            raise InventoryError(f"A calibration names node “{calibration.node}”, but there is no such node.")


def _settled(fittings: tuple[Fitting, ...]) -> tuple[Fitting, ...]:
    settled: list[Fitting] = []
    for fitting in fittings:
        later = [
            other.start_ms
            for other in fittings
            if other is not fitting
            and other.start_ms >= fitting.start_ms
            and (other.node == fitting.node or other.pack == fitting.pack)
        ]
        following = min(later, default=None)
        if following is None:
            settled.append(fitting)
        elif following == fitting.start_ms or (fitting.end_ms is not None and fitting.end_ms > following):
            raise InventoryError(
                f"Pack {fitting.pack} on {fitting.node} from {instant_text(fitting.start_ms)} overlaps another fitting "
                f"of the same pack or node from {instant_text(following)}. Correct the start or the end of one of them."
            )
        else:
            settled.append(fitting if fitting.end_ms is not None else replace(fitting, end_ms=following))
    return tuple(settled)


def differences(known: Inventory, wanted: Inventory) -> list[Change]:
    """What would change, in the order in which it has to be done."""
    changes: list[Change] = []
    for kind, plural, _make, _table in _KINDS:
        before = {_key(kind, entry): asdict(entry) for entry in getattr(known, plural)}
        for entry in getattr(wanted, plural):
            after = asdict(entry)
            old = before.get(_key(kind, entry), {})
            changed = {name: value for name, value in after.items() if not old or old[name] != value}
            if changed:
                changes.append(Change(kind, _named(entry), {n: old[n] for n in changed} if old else {}, changed))
    return changes


def _named(entry: Entry) -> str:
    match entry:
        case Fitting():
            return f"{entry.pack} on {entry.node} from {instant_text(entry.start_ms)}"
        case Calibration():
            return f"{entry.quantity} on {entry.node} from {instant_text(entry.start_ms)}"
        case Pack():
            return entry.label
        case _:
            return entry.name


def apply(connection: Connection, rows: Rows, *, who: str, now_ms: int) -> list[Change]:
    """Lay stated rows over the inventory and note each change with who and when; a second time changes nothing."""
    known = load(connection)
    wanted = merged(known, rows)
    changes = differences(known, wanted)
    for kind, plural, _make, table in _KINDS:
        before = {_key(kind, entry): entry for entry in getattr(known, plural)}
        entries = [e for e in getattr(wanted, plural) if before.get(_key(kind, e)) != e]
        if kind == "fitting":
            # Two packs that change places would for a moment both be in one node: take all out, then put them in.
            for fitting in entries:
                ours = (
                    t.fitting.c.node_id == node_ids(connection)[fitting.node],
                    t.fitting.c.start_ms == fitting.start_ms,
                )
                connection.execute(t.fitting.delete().where(*ours))
        for entry in entries:
            _store(connection, kind, table, entry, new=kind == "fitting" or _key(kind, entry) not in before)
    if changes:
        next_revision(connection)
    for change in changes:
        connection.execute(
            t.audit.insert().values(
                at_ms=now_ms,
                who=who,
                action="added" if not change.before else "changed",
                subject=f"{change.kind} {change.key}",
                detail=json.dumps({"before": change.before, "after": change.after}, sort_keys=True),
            )
        )
    return changes


def _store(connection: Connection, kind: str, table: Table, entry: Entry, *, new: bool) -> None:
    values = asdict(entry)
    names = list(KEYS[kind])
    for name, column, known in (
        ("node", "node_id", node_ids),
        ("pack", "pack_id", pack_ids),
        ("site", "site_id", site_ids),
    ):
        if column in table.c:
            values[column] = known(connection)[values.pop(name)]
            names = [column if n == name else n for n in names]
    if new:
        connection.execute(table.insert().values(**values))
    else:
        connection.execute(table.update().where(*(table.c[n] == values[n] for n in names)).values(**values))
