"""What could not be used: kept with its reason and, where a whole message is concerned, its bytes."""

import json
from collections.abc import Sequence
from dataclasses import dataclass

from sqlalchemy import Connection, func, select

from hub.store import tables as t
from hub.telemetry.message import Remark

# A flood of nonsense must not fill the card: of each node and reason this many are kept whole, the rest are counted by
# their rows without the bytes.
PAYLOADS_KEPT = 1000
PAYLOAD_BYTES_KEPT = 65_536


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
    """Set remarks aside; ``payload`` is kept with the first of them."""
    if not remarks:
        return
    kept = payload[:PAYLOAD_BYTES_KEPT] if payload is not None else None
    if kept is not None and _payloads(connection, origin, remarks[0].reason) >= PAYLOADS_KEPT:
        kept = None
    connection.execute(
        t.set_aside.insert(),
        [
            {
                "node_id": origin.node_id,
                "node_name": origin.node_name,
                "received_ms": origin.received_ms,
                "source": origin.source,
                "origin": origin.name[:500],
                "line": remark.line,
                "import_id": origin.import_id,
                "reason": remark.reason,
                "detail": remark.detail,
                "time_ms": remark.time_ms,
                "quantity": remark.quantity,
                "value": remark.value,
                "values": None if remark.values is None else json.dumps(remark.values),
                "payload": kept if number == 0 else None,
            }
            for number, remark in enumerate(remarks)
        ],
    )


def _payloads(connection: Connection, origin: Origin, reason: str) -> int:
    a = t.set_aside.c
    owner = a.node_id == origin.node_id if origin.node_id is not None else a.node_id.is_(None)
    return connection.execute(
        select(func.count()).where(owner, a.reason == reason, a.payload.is_not(None))
    ).scalar_one()


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


def counts(connection: Connection, node_id: int) -> dict[str, int]:
    """How many things of a node were set aside, by reason."""
    a = t.set_aside.c
    rows = connection.execute(
        select(a.reason, func.count()).where(a.node_id == node_id).group_by(a.reason).order_by(a.reason)
    )
    return {row[0]: row[1] for row in rows}
