"""Imported logs: what each brought, and taking one back."""

from collections.abc import Iterable
from dataclasses import dataclass

from sqlalchemy import Connection, insert, select, update

from hub.errors import UsageError
from hub.store import aside
from hub.store import tables as t
from hub.store.append import append, mark
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS, HOUR_MS
from hub.store.opened import OpenedDay


@dataclass(frozen=True, slots=True)
class Import:
    """One imported file and its counts of physical lines."""

    id: int
    node_id: int
    file: str
    sha256: str
    imported_ms: int
    undone_ms: int | None
    first_ms: int | None
    last_ms: int | None
    lines: int
    taken: int
    repeated: int
    set_aside: int


def begin(connection: Connection, node_id: int, file: str, sha256: str, now_ms: int) -> int:
    """Note that an import begins; its number."""
    result = connection.execute(
        insert(t.log_import).values(
            node_id=node_id, file=file, sha256=sha256, imported_ms=now_ms, lines=0, taken=0, repeated=0, set_aside=0
        )
    )
    key = result.inserted_primary_key
    assert key is not None
    return int(key[0])


def finish(
    connection: Connection,
    import_id: int,
    *,
    lines: int,
    taken: int,
    repeated: int,
    set_aside: int,
    span: tuple[int, int] | None,
) -> None:
    """Note what an import brought so far; ``span`` is from the first to the last instant of its readings."""
    connection.execute(
        update(t.log_import)
        .where(t.log_import.c.id == import_id)
        .values(
            lines=lines,
            taken=taken,
            repeated=repeated,
            set_aside=set_aside,
            first_ms=span[0] if span else None,
            last_ms=span[1] if span else None,
        )
    )


def known(connection: Connection, node_id: int, sha256: str) -> Import | None:
    """The latest import of the same bytes for the same node that was not taken back."""
    c = t.log_import.c
    row = (
        connection.execute(
            select(t.log_import)
            .where(c.node_id == node_id, c.sha256 == sha256, c.undone_ms.is_(None))
            .order_by(c.id.desc())
            .limit(1)
        )
        .mappings()
        .one_or_none()
    )
    return Import(**row) if row else None


def listing(connection: Connection, node_id: int | None = None) -> list[Import]:
    """Imports, newest first."""
    query = select(t.log_import).order_by(t.log_import.c.id.desc())
    if node_id is not None:
        query = query.where(t.log_import.c.node_id == node_id)
    return [Import(**row) for row in connection.execute(query).mappings()]


def undo(connection: Connection, import_id: int, now_ms: int) -> int:
    """Take back what an import brought and the node itself has not sent since; how many readings went.

    Values that other imports added stay. What was set aside because a value of this import stood in its place takes
    that place now.

    Raises
    ------
    UsageError
        There is no such import, or it was taken back before.
    """
    row = connection.execute(select(t.log_import).where(t.log_import.c.id == import_id)).mappings().one_or_none()
    if row is None:
        raise UsageError(f"There is no import {import_id}. “packfold import --list” shows them.")
    this = Import(**row)
    if this.undone_ms is not None:
        raise UsageError(f"Import {import_id} was taken back already.")
    removed = 0
    freed: set[tuple[int, str]] = set()
    for day, is_sealed in _days(connection, this):
        removed += _undo_day(connection, this, day, freed, sealed=is_sealed)
    aside.forget_import(connection, import_id)
    connection.execute(update(t.log_import).where(t.log_import.c.id == import_id).values(undone_ms=now_ms))
    if freed:
        mark(connection, {(this.node_id, time_ms // HOUR_MS) for time_ms, _ in freed})
        append(connection, _waiting(aside.take_contradictions(connection, this.node_id, freed), this.node_id))
    return removed


def _days(connection: Connection, this: Import) -> list[tuple[int, bool]]:
    """UTC days in which something of an import may lie, and whether each is sealed."""
    if this.first_ms is None or this.last_ms is None:
        return []
    first, last = this.first_ms // DAY_MS, this.last_ms // DAY_MS
    b, r, f = t.reading_block.c, t.reading.c, t.import_fill.c
    sealed = set(
        connection.execute(
            select(b.utc_day).where(b.node_id == this.node_id, b.utc_day >= first, b.utc_day <= last)
        ).scalars()
    )
    inside = (r.node_id == this.node_id, r.time_ms >= this.first_ms, r.time_ms <= this.last_ms)
    own = select(r.time_ms // DAY_MS).where(*inside, r.import_id == this.id).distinct()
    filled = select(f.time_ms // DAY_MS).where(f.import_id == this.id).distinct()
    unsealed = set(connection.execute(own).scalars()) | set(connection.execute(filled).scalars())
    return [(day, day in sealed) for day in sorted(sealed | unsealed)]


def _undo_day(connection: Connection, this: Import, day: int, freed: set[tuple[int, str]], *, sealed: bool) -> int:
    opened = OpenedDay(connection, this.node_id, day, sealed=sealed)
    opened.open(opened.of_import(this.id))
    before = list(opened.rows)
    for time_ms in before:
        freed |= {(time_ms, name) for name in _withdraw(opened, time_ms, this.id)}
    opened.save()
    return len(before) - len(opened.rows)


def _withdraw(opened: OpenedDay, time_ms: int, import_id: int) -> list[str]:
    """Take an import's values out of one reading; the quantities that are free now."""
    row = opened.rows[time_ms]
    # Of a reading that an import brought, it vouches for every value that is not listed as another's.
    own = row["import_id"] == import_id
    fillers = {name: opened.fills.get((time_ms, name)) for name in opened.values(time_ms)}
    gone = [name for name, filler in fillers.items() if filler == import_id or (own and filler is None)]
    if own:
        row["import_id"] = None
    for name in gone:
        opened.fills.pop((time_ms, name), None)
    row |= dict.fromkeys(gone)
    if not opened.values(time_ms):
        del opened.rows[time_ms]
    opened.changed.add(time_ms)
    return gone


def _waiting(found: Iterable[aside.Contradiction], node_id: int) -> list[Arrival]:
    return [Arrival(node_id, c.received_ms, {c.time_ms: {c.quantity: c.value}}, import_id=c.import_id) for c in found]
