"""Small facts about a database, by name."""

from sqlalchemy import Connection, select

from hub.store import tables as t


def get(connection: Connection, name: str) -> str | None:
    """A fact, or ``None`` where it was never noted."""
    value: str | None = connection.execute(select(t.fact.c.value).where(t.fact.c.name == name)).scalar()
    return value


def put(connection: Connection, name: str, value: str) -> None:
    """Note a fact, in place of what was noted before."""
    connection.exec_driver_sql(
        "INSERT INTO fact (name, value) VALUES (?, ?) ON CONFLICT (name) DO UPDATE SET value = excluded.value",
        (name, value),
    )


def revision(connection: Connection) -> int:
    """Grows with every transaction that changes readings or the inventory."""
    return int(get(connection, "revision") or 0)


def next_revision(connection: Connection) -> int:
    """A revision larger than every one before, for what changes in this transaction."""
    found = connection.exec_driver_sql(
        "INSERT INTO fact (name, value) VALUES ('revision', '1') "
        "ON CONFLICT (name) DO UPDATE SET value = CAST(value AS INTEGER) + 1 RETURNING value"
    )
    return int(found.scalar_one())
