import re
import sqlite3

import pytest
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory

from hub.store import schema
from hub.store.engine import Database
from hub.store.tables import metadata


def counts(database):
    with database.read() as connection:
        return {name: connection.exec_driver_sql(f'SELECT COUNT(*) FROM "{name}"').scalar() for name in metadata.tables}


def fill(database):
    """One row in every table, parents first; the values satisfy the constraints and nothing else."""
    chosen = {
        "current_sensing": "net",
        "integration": "hold",
        "role": "keeper",
        "kind": "token",
    }
    with database.write() as connection:
        for table in metadata.sorted_tables:
            row = {}
            for column in table.c:
                kind = column.type.python_type
                row[column.name] = chosen.get(column.name, b"\x00" if kind is bytes else "x" if kind is str else 1)
            connection.execute(table.insert().values(**row))


def schema_of(database):
    connection = sqlite3.connect(database.file)
    found = connection.execute("SELECT type, name, sql FROM sqlite_master ORDER BY type, name").fetchall()
    connection.close()
    return found


def test_there_is_one_head():
    assert ScriptDirectory.from_config(schema.configuration()).get_heads() == [schema.head_revision()]


def test_the_migrations_make_just_the_tables_of_the_code(database):
    with database.read() as connection:
        context = MigrationContext.configure(connection, opts={"compare_type": True})
        assert compare_metadata(context, metadata) == []


def test_the_migrations_make_the_very_statements_that_the_code_would(database, tmp_path):
    """Also what comparing cannot see: checks, and tables without row numbers."""
    other = Database(tmp_path / "other")
    with other.write() as connection:
        metadata.create_all(connection)

    def plain(found):
        return {
            name: sorted(part for part in re.split(r'[\s,()"]+', sql or "") if part)
            for kind, name, sql in found
            if kind in {"table", "index"} and name != "alembic_version"
        }

    made, wanted = plain(schema_of(database)), plain(schema_of(other))
    other.close()
    made.pop("sqlite_autoindex_alembic_version_1")
    assert made == wanted


def test_every_row_survives_going_up_from_every_revision(tmp_path):
    script = ScriptDirectory.from_config(schema.configuration())
    revisions = [s.revision for s in script.walk_revisions()]
    database = Database(tmp_path)
    schema.prepare(database)
    fill(database)
    full = counts(database)
    assert set(full.values()) == {1}
    for revision in revisions[1:]:
        schema.migrate(database, revision)
        schema.migrate(database, "head")
        assert counts(database) == full
    database.close()


def test_up_down_and_up_again(tmp_path):
    database = Database(tmp_path)
    schema.prepare(database)
    first = schema_of(database)
    fill(database)
    schema.migrate(database, "base")
    with database.read() as connection:
        assert schema.revision_of(connection) is None
        left = connection.exec_driver_sql("SELECT name FROM sqlite_master WHERE type = 'table'").scalars().all()
        assert left == ["alembic_version"]
    schema.migrate(database, "head")
    assert schema_of(database) == first
    assert set(counts(database).values()) == {0}
    fill(database)
    assert set(counts(database).values()) == {1}
    database.close()


@pytest.mark.parametrize("pragma", ["foreign_keys", "synchronous", "wal_autocheckpoint"])
def test_after_migrating_the_writer_is_as_it_was(tmp_path, pragma):
    database = Database(tmp_path)
    with database.write() as connection:
        before = connection.exec_driver_sql(f"PRAGMA {pragma}").scalar()
    schema.prepare(database)
    with database.write() as connection:
        assert connection.exec_driver_sql(f"PRAGMA {pragma}").scalar() == before
    database.close()
