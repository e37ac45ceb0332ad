"""How a node's foreign logs are read, remembered from the first time."""

from sqlalchemy import Connection, delete, insert, select

from hub.store import tables as t


def remembered(connection: Connection, node_id: int) -> str | None:
    """A node's log mapping as JSON, or ``None``."""
    m = t.log_mapping.c
    text: str | None = connection.execute(select(m.mapping).where(m.node_id == node_id)).scalar()
    return text


def remember(connection: Connection, node_id: int, mapping: str) -> None:
    """Keep a node's log mapping in place of an earlier one."""
    connection.execute(delete(t.log_mapping).where(t.log_mapping.c.node_id == node_id))
    connection.execute(insert(t.log_mapping).values(node_id=node_id, mapping=mapping))
