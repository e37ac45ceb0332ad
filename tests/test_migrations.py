import re
import sqlite3

import pytest
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import MetaData, func, select

from hub.store import schema
from hub.store.engine import Database
from hub.store.tables import metadata

# Values that satisfy the checks; any others are 1 or "x".
ALLOWED = {"current_sensing": "net", "integration": "hold", "role": "keeper", "kind": "token"}
REVISIONS = [script.revision for script in ScriptDirectory.from_config(schema.configuration()).walk_revisions()]


def reflected(database):
    """The tables that are there, whatever the code says."""
    found = MetaData()
    with database.read() as connection:
        found.reflect(connection)
    found.remove(found.tables["alembic_version"])
    return found


def counts(database, tables):
    with database.read() as connection:
        return {
            name: connection.execute(select(func.count()).select_from(tables.tables[name])).scalar()
            for name in tables.tables
        }


def fill(database):
    """One row in every table, parents first."""
    tables = reflected(database)
    with database.write() as connection:
        for table in tables.sorted_tables:
            row = {}
            for column in table.c:
                kind = column.type.python_type
                row[column.name] = ALLOWED.get(column.name, b"\x00" if kind is bytes else "x" if kind is str else 1)
            connection.execute(table.insert().values(**row))
    return tables


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


@pytest.mark.parametrize("revision", REVISIONS)
def test_every_row_survives_going_up_from_any_revision(tmp_path, revision):
    database = Database(tmp_path)
    schema.migrate(database, revision)
    tables = fill(database)
    before = counts(database, tables)
    assert set(before.values()) == {1}
    schema.migrate(database, "head")
    assert counts(database, reflected(database)).items() >= before.items()
    database.close()


def test_up_down_and_up_again(tmp_path):
    database = Database(tmp_path)
    schema.prepare(database)
    first = schema_of(database)
    assert set(reflected(database).tables) == set(metadata.tables)
    fill(database)
    schema.migrate(database, "base")
    with database.read() as connection:
        assert schema.revision_of(connection) is None
    assert reflected(database).tables == {}
    schema.migrate(database, "head")
    assert schema_of(database) == first
    tables = fill(database)
    assert set(counts(database, tables).values()) == {1}
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
