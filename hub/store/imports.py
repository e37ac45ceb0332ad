"""Imported logs: what each brought, and taking one back."""

from collections.abc import Iterable
from dataclasses import dataclass

from sqlalchemy import Connection, delete, insert, select, update

from hub.errors import UsageError
from hub.store import tables as t
from hub.store.append import mark
from hub.store.layout import DAY_MS, HOUR_MS, Stored, block_rows, write_block


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
    """Take back what an import brought and nobody else vouched for since; how many readings went.

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
    hours: set[int] = set()
    removed = 0
    if this.first_ms is not None and this.last_ms is not None:
        removed += _undo_rows(connection, this, hours)
        removed += _undo_blocks(connection, this, hours)
    connection.execute(delete(t.import_fill).where(t.import_fill.c.import_id == import_id))
    connection.execute(delete(t.set_aside).where(t.set_aside.c.import_id == import_id))
    connection.execute(update(t.log_import).where(t.log_import.c.id == import_id).values(undone_ms=now_ms))
    if hours:
        mark(connection, {(this.node_id, hour) for hour in hours})
    return removed


def _fills(connection: Connection, this: Import) -> dict[int, list[str]]:
    f = t.import_fill.c
    found: dict[int, list[str]] = {}
    for row in connection.execute(select(f.time_ms, f.quantity).where(f.import_id == this.id)):
        found.setdefault(row.time_ms, []).append(row.quantity)
    return found


def _undo_rows(connection: Connection, this: Import, hours: set[int]) -> int:
    r = t.reading.c
    mine = (r.node_id == this.node_id, r.time_ms >= this.first_ms, r.time_ms <= this.last_ms, r.import_id == this.id)
    times = connection.execute(select(r.time_ms).where(*mine)).scalars().all()
    connection.execute(delete(t.reading).where(*mine))
    hours |= {time_ms // HOUR_MS for time_ms in times}
    for time_ms, names in _fills(connection, this).items():
        changed = connection.execute(
            update(t.reading).where(r.node_id == this.node_id, r.time_ms == time_ms).values(dict.fromkeys(names))
        )
        if changed.rowcount:
            hours.add(time_ms // HOUR_MS)
    return len(times)


def _undo_blocks(connection: Connection, this: Import, hours: set[int]) -> int:
    assert this.first_ms is not None
    assert this.last_ms is not None
    b = t.reading_block.c
    days = connection.execute(
        select(b.utc_day).where(
            b.node_id == this.node_id, b.utc_day >= this.first_ms // DAY_MS, b.utc_day <= this.last_ms // DAY_MS
        )
    ).scalars()
    fills = _fills(connection, this)
    removed = 0
    for day in days.all():
        rows = block_rows(connection, this.node_id, day)
        gone = [time_ms for time_ms, row in rows.items() if row["import_id"] == this.id]
        filled = [time_ms for time_ms in fills if time_ms in rows]
        if not gone and not filled:
            continue
        _empty(rows, fills, filled)
        for time_ms in gone:
            del rows[time_ms]
        write_block(connection, this.node_id, day, rows)
        removed += len(gone)
        hours |= {time_ms // HOUR_MS for time_ms in (*gone, *filled)}
    return removed


def _empty(rows: dict[int, Stored], fills: dict[int, list[str]], times: Iterable[int]) -> None:
    for time_ms in times:
        for name in fills[time_ms]:
            rows[time_ms][name] = None
