"""What could not be used: kept with its reason and, where a whole message is concerned, its bytes."""

import json
from collections import Counter
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite
from typing import Any

from sqlalchemy import Connection, delete, func, select

from hub.store import tables as t
from hub.store.layout import fixed_point
from hub.store.opened import in_parts
from hub.telemetry.message import Remark

# A flood of nonsense must not fill the card: of each node, source and reason the first so many are kept with their
# bytes and the first so many as rows; beyond that they are counted. The lines of a log are few enough to keep them all.
PAYLOADS_KEPT = 1000
ROWS_KEPT = 50_000
PAYLOAD_BYTES_KEPT = 65_536
LOG = "log"
CONTRADICTION = "contradiction"


@dataclass(frozen=True, slots=True)
class Origin:
    """Where something came from.

    Attributes
    ----------
    source
        ``mqtt`` or ``log``.
    name
        The topic, or the file's name.
    node_id, node_name
        The node, as far as it is known.
    received_ms
        When the hub got it.
    import_id
        The import, for a log.
    """

    source: str
    name: str
    node_id: int | None
    node_name: str | None
    received_ms: int
    import_id: int | None = None


def keep(connection: Connection, origin: Origin, remarks: Sequence[Remark], payload: bytes | None = None) -> None:
    """Set remarks aside; ``payload`` is kept with the first of them. What came before, said again, is kept once."""
    rows = _unheard(connection, [_row(origin, remark) for remark in remarks])
    if not rows:
        return
    before = _count(connection, origin, Counter(row["reason"] for row in rows))
    if payload is not None and before[rows[0]["reason"]] < PAYLOADS_KEPT:
        rows[0]["payload"] = payload[:PAYLOAD_BYTES_KEPT]
    kept = [row for row in rows if origin.source == LOG or before[row["reason"]] < ROWS_KEPT]
    if kept:
        connection.execute(t.set_aside.insert(), kept)


def _row(origin: Origin, remark: Remark) -> dict[str, Any]:
    return {
        "node_id": origin.node_id,
        "node_name": None if origin.node_name is None else storable(origin.node_name),
        "received_ms": origin.received_ms,
        "source": origin.source,
        "origin": storable(origin.name)[:500],
        "line": remark.line,
        "import_id": origin.import_id,
        "reason": remark.reason,
        "detail": storable(remark.detail),
        "time_ms": remark.time_ms,
        "quantity": None if remark.quantity is None else storable(remark.quantity),
        "value": remark.value if remark.value is not None and isfinite(remark.value) else None,
        "values": None if remark.values is None else json.dumps(remark.values),
        "payload": None,
    }


def storable(text: str) -> str:
    """Text without the halves of surrogate pairs that a message can smuggle in and no database takes."""
    return text.encode("utf-8", "replace").decode()


_SAME = ("reason", "time_ms", "quantity", "value", "values", "line", "import_id")


def _unheard(connection: Connection, rows: Sequence[dict[str, Any]]) -> list[dict[str, Any]]:
    """Rows that were not set aside before: a message that is delivered twice is set aside once."""
    a = t.set_aside.c
    heard: set[tuple[object, ...]] = set()
    timed = {row["time_ms"] for row in rows if row["node_id"] is not None and row["time_ms"] is not None}
    for part in in_parts(timed):
        query = select(*(a[name] for name in _SAME)).where(
            a.node_id == rows[0]["node_id"], a.reason.in_({row["reason"] for row in rows}), a.time_ms.in_(part)
        )
        heard.update(tuple(found) for found in connection.execute(query))
    fresh: list[dict[str, Any]] = []
    for row in rows:
        key = tuple(row[name] for name in _SAME)
        if row["time_ms"] is None or key not in heard:
            fresh.append(row)
            heard.add(key)
    return fresh


def _count(connection: Connection, origin: Origin, added: Mapping[str, int]) -> dict[str, int]:
    """Count what is set aside; how many of each reason there were before."""
    owner = origin.node_id or 0
    before: dict[str, int] = {}
    for reason, number in added.items():
        total = connection.exec_driver_sql(
            "INSERT INTO aside_total (node_id, source, reason, count) VALUES (?, ?, ?, ?) "
            "ON CONFLICT (node_id, source, reason) DO UPDATE SET count = count + excluded.count RETURNING count",
            (owner, origin.source, reason, number),
        ).scalar_one()
        before[reason] = total - number
    return before


@dataclass(frozen=True, slots=True)
class Waiting:
    """A whole message of a node that was not enrolled when it came."""

    id: int
    topic: str
    received_ms: int
    payload: bytes


def waiting(connection: Connection, name: str, limit: int = 500) -> list[Waiting]:
    """Telemetry under a name nobody was enrolled as, oldest first; messages kept only in part are left out."""
    a = t.set_aside.c
    query = (
        select(a.id, a.origin.label("topic"), a.received_ms, a.payload)
        .where(
            a.node_id.is_(None),
            a.node_name == name,
            a.reason == "unknown-node",
            a.origin.endswith("/telemetry", autoescape=True),
            func.length(a.payload) < PAYLOAD_BYTES_KEPT,
        )
        .order_by(a.id)
        .limit(limit)
    )
    return [Waiting(**row) for row in connection.execute(query).mappings()]


def forget(connection: Connection, ids: Collection[int]) -> None:
    """Forget what was set aside and is in use now."""
    for part in in_parts(ids):
        _forget(connection, t.set_aside.c.id.in_(part))


def forget_import(connection: Connection, import_id: int) -> None:
    """Forget what was set aside of an import that is taken back."""
    _forget(connection, t.set_aside.c.import_id == import_id)


def _forget(connection: Connection, which: Any) -> None:  # noqa: ANN401 - a condition
    a, total = t.set_aside.c, t.aside_total.c
    gone = select(func.coalesce(a.node_id, 0), a.source, a.reason, func.count()).where(which)
    for node_id, source, reason, number in connection.execute(gone.group_by(a.node_id, a.source, a.reason)).fetchall():
        connection.execute(
            t.aside_total.update()
            .where(total.node_id == node_id, total.source == source, total.reason == reason)
            .values(count=total.count - number)
        )
    connection.execute(delete(t.set_aside).where(which))


@dataclass(frozen=True, slots=True)
class Contradiction:
    """A value that was kept out because another one stood in its place."""

    id: int
    time_ms: int
    quantity: str
    value: float
    received_ms: int
    import_id: int | None


def take_contradictions(
    connection: Connection, node_id: int, places: Collection[tuple[int, str]]
) -> list[Contradiction]:
    """Take out, in the order in which they came, the values for places (instant, quantity) that are free now.

    Of several for one place the first is taken, with those that say the same; the others stay set aside.
    """
    a = t.set_aside.c
    columns = (a.id, a.time_ms, a.quantity, a.value, a.received_ms, a.import_id)
    chosen: dict[tuple[int, str], int] = {}
    taken: list[Contradiction] = []
    for part in in_parts({time_ms for time_ms, _ in places}):
        query = select(*columns).where(
            a.node_id == node_id, a.reason == CONTRADICTION, a.time_ms.in_(part), a.value.is_not(None)
        )
        for row in connection.execute(query.order_by(a.id)).mappings():
            place, number = (row["time_ms"], row["quantity"]), fixed_point(row["quantity"], row["value"])
            if place in places and chosen.setdefault(place, number) == number:
                taken.append(Contradiction(**row))
    for ids in in_parts({c.id for c in taken}):
        _forget(connection, a.id.in_(ids))
    return taken


@dataclass(frozen=True, slots=True)
class Aside:
    """One thing set aside, as pages and exports show it."""

    id: int
    node: str | None
    received_ms: int
    source: str
    origin: str
    line: int | None
    reason: str
    detail: str
    time_ms: int | None
    quantity: str | None
    value: float | None


def newest(connection: Connection, node_id: int | None = None, limit: int = 100) -> list[Aside]:
    """What was set aside last, of one node or of all."""
    a = t.set_aside.c
    query = (
        select(
            a.id,
            func.coalesce(t.node.c.name, a.node_name).label("node"),
            *(a[name] for name in ("received_ms", "source", "origin", "line", "reason", "detail", "time_ms")),
            a.quantity,
            a.value,
        )
        .select_from(t.set_aside.outerjoin(t.node, t.node.c.id == a.node_id))
        .order_by(a.id.desc())
        .limit(limit)
    )
    if node_id is not None:
        query = query.where(a.node_id == node_id)
    return [Aside(**row) for row in connection.execute(query).mappings()]


def since(connection: Connection, start_ms: int, node_id: int | None = None) -> dict[str, dict[str, int]]:
    """How many things were set aside from an instant on, by node and reason; "" stands for no node at all."""
    a = t.set_aside.c
    name = func.coalesce(t.node.c.name, a.node_name, "").label("node")
    query = (
        select(name, a.reason, func.count())
        .select_from(t.set_aside.outerjoin(t.node, t.node.c.id == a.node_id))
        .where(a.received_ms >= start_ms)
        .group_by(name, a.reason)
        .order_by(name, a.reason)
    )
    if node_id is not None:
        query = query.where(a.node_id == node_id)
    found: dict[str, dict[str, int]] = {}
    for node, reason, number in connection.execute(query):
        found.setdefault(node, {})[reason] = number
    return found


def counts(connection: Connection, node_id: int) -> dict[str, int]:
    """How many things of a node were set aside, by reason; also those that were only counted."""
    total = t.aside_total.c
    rows = connection.execute(
        select(total.reason, func.sum(total.count))
        .where(total.node_id == node_id, total.count > 0)
        .group_by(total.reason)
        .order_by(total.reason)
    )
    return {row[0]: row[1] for row in rows}
