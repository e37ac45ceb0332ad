"""Clear skies already computed, for a node's newest windows. What is missing here is computed again."""

from sqlalchemy import Connection, delete, insert, select

from hub.store import tables as t

KEPT_MS = 4 * 86_400_000


def remembered(connection: Connection, node_id: int, start_ms: int, digest: str) -> bytes | None:
    """What was kept for a window, if it was computed from the same panel."""
    c = t.clear_sky.c
    data: bytes | None = connection.execute(
        select(c.data).where(c.node_id == node_id, c.start_ms == start_ms, c.digest == digest)
    ).scalar()
    return data


def remember(connection: Connection, node_id: int, start_ms: int, digest: str, data: bytes) -> None:
    """Keep what was computed for a window, and let go of what lies days before it."""
    c = t.clear_sky.c
    connection.execute(
        delete(t.clear_sky).where(c.node_id == node_id, (c.start_ms == start_ms) | (c.start_ms < start_ms - KEPT_MS))
    )
    connection.execute(insert(t.clear_sky).values(node_id=node_id, start_ms=start_ms, digest=digest, data=data))
