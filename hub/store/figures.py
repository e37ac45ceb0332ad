"""Figures and the ledger of what they were computed from. Written a window at a time, together, or not at all."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from sqlalchemy import Connection, Select, delete, select

from hub.store import tables as t

Row = dict[str, Any]

_FIGURES = (t.day_figure, t.finding_figure, t.ledger)


@dataclass(frozen=True, slots=True)
class Entry:
    """What the ledger knows of a window.

    Attributes
    ----------
    start_ms, end_ms, date
        The window and its local date.
    inputs
        Digest of everything its figures depend on.
    carried
        What it hands to the next window, as JSON.
    newest_ms
        Newest reading inside it; ``None`` where there is none.
    """

    start_ms: int
    end_ms: int
    date: str
    inputs: str
    carried: str
    newest_ms: int | None


@dataclass(frozen=True, slots=True)
class Written:
    """Everything computed for one window: the ledger's entry and the rows of each figure table without their keys.

    ``day`` is ``None`` for a window without readings: there is nothing to say about it.
    """

    entry: Entry
    day: Mapping[str, Any] | None
    charges: Sequence[Mapping[str, Any]] = field(default_factory=list)
    findings: Sequence[Mapping[str, Any]] = field(default_factory=list)


def entries(connection: Connection, node_id: int) -> dict[int, Entry]:
    """The ledger of a node, by the start of the window."""
    columns = [c for c in t.ledger.c if c.name != "node_id"]
    rows = connection.execute(
        select(*columns).where(t.ledger.c.node_id == node_id).order_by(t.ledger.c.start_ms)
    ).mappings()
    return {row["start_ms"]: Entry(**row) for row in rows}


def write(connection: Connection, node_id: int, written: Written) -> None:
    """Put a window's figures in place of whatever was computed for that stretch of time before."""
    start, end = written.entry.start_ms, written.entry.end_ms
    clear(connection, node_id, start, end)
    if written.day is not None:
        connection.execute(
            t.day_figure.insert().values(
                node_id=node_id, start_ms=start, end_ms=end, date=written.entry.date, **written.day
            )
        )
    # One by one: given together, rows would have to state the same columns, or values would be lost silently.
    for charge in written.charges:
        connection.execute(t.charge_figure.insert().values(node_id=node_id, window_ms=start, **charge))
    for finding in written.findings:
        connection.execute(t.finding_figure.insert().values(node_id=node_id, start_ms=start, **finding))
    e = written.entry
    connection.execute(
        t.ledger.insert().values(
            node_id=node_id,
            start_ms=start,
            end_ms=end,
            date=e.date,
            inputs=e.inputs,
            carried=e.carried,
            newest_ms=e.newest_ms,
        )
    )


def clear(connection: Connection, node_id: int, start_ms: int, end_ms: int) -> None:
    """Forget what was computed for windows that begin in a stretch of time."""
    for table in _FIGURES:
        connection.execute(
            delete(table).where(table.c.node_id == node_id, table.c.start_ms >= start_ms, table.c.start_ms < end_ms)
        )
    c = t.charge_figure.c
    connection.execute(
        delete(t.charge_figure).where(c.node_id == node_id, c.window_ms >= start_ms, c.window_ms < end_ms)
    )


def days(connection: Connection, node_id: int, since: str | None = None, until: str | None = None) -> list[Row]:
    """Day figures of a node in order of time, with the pack's label as ``pack``; dates are inclusive."""
    d = t.day_figure.c
    query = (
        select(t.day_figure, t.pack.c.label.label("pack"))
        .select_from(t.day_figure.outerjoin(t.pack, t.pack.c.id == d.pack_id))
        .where(d.node_id == node_id)
        .order_by(d.start_ms)
    )
    if since is not None:
        query = query.where(d.date >= since)
    if until is not None:
        query = query.where(d.date <= until)
    return _rows(connection, query)


def charges(connection: Connection, node_id: int, start_ms: int | None = None, end_ms: int | None = None) -> list[Row]:
    """Charge sessions of a node that begin in a stretch of time, as the latest window saw each."""
    c = t.charge_figure.c
    query = (
        select(t.charge_figure, t.pack.c.label.label("pack"))
        .select_from(t.charge_figure.outerjoin(t.pack, t.pack.c.id == c.pack_id))
        .where(c.node_id == node_id)
        .order_by(c.start_ms, c.window_ms)
    )
    if start_ms is not None:
        query = query.where(c.start_ms >= start_ms)
    if end_ms is not None:
        query = query.where(c.start_ms < end_ms)
    latest = {row["start_ms"]: row for row in _rows(connection, query)}
    return list(latest.values())


def findings(connection: Connection, node_id: int, start_ms: int | None = None, end_ms: int | None = None) -> list[Row]:
    """Values that screening kept out of the figures, by window, quantity and reason."""
    f = t.finding_figure.c
    query = select(t.finding_figure).where(f.node_id == node_id).order_by(f.start_ms, f.quantity, f.reason)
    if start_ms is not None:
        query = query.where(f.start_ms >= start_ms)
    if end_ms is not None:
        query = query.where(f.start_ms < end_ms)
    return _rows(connection, query)


def pack_days(connection: Connection, pack_id: int) -> list[Row]:
    """Discharged charge of a pack by local date, over all nodes it was in."""
    d = t.day_figure.c
    query = (
        select(d.date, d.discharge_ah)
        .where(d.pack_id == pack_id, d.discharge_ah.is_not(None))
        .order_by(d.date, d.start_ms)
    )
    return _rows(connection, query)


def _rows(connection: Connection, query: Select[Any]) -> list[Row]:
    return [row._asdict() for row in connection.execute(query)]
