import shutil
import sqlite3
import subprocess
import sys

import pytest

from hub.errors import StoreError
from hub.store import facts, schema
from hub.store.engine import DATABASE_NAME, Database

# A second revision that does what the body says; the first one is the project's own.
SECOND = """
import sqlalchemy as sa
from alembic import op
revision = "0002"
down_revision = "{head}"
branch_labels = None
depends_on = None

def upgrade():
    {upgrade}

def downgrade():
    pass
"""


@pytest.fixture
def later(tmp_path, monkeypatch):
    """A later version of the program: its migrations have one revision more, with the body that is given."""
    folder = tmp_path / "migrations"
    shutil.copytree(schema.scripts_folder(), folder, ignore=shutil.ignore_patterns("__pycache__"))
    head = schema.head_revision()

    def with_body(upgrade):
        (folder / "versions" / "later.py").write_text(SECOND.format(head=head, upgrade=upgrade))
        monkeypatch.setattr(schema, "scripts_folder", lambda: folder)
        assert schema.head_revision() == "0002"

    return with_body


def revision(database):
    with database.read() as connection:
        return schema.revision_of(connection)


def tables(database):
    with database.read() as connection:
        return set(connection.exec_driver_sql("SELECT name FROM sqlite_master WHERE type = 'table'").scalars())


def backup(database):
    return database.file.with_name(f"{DATABASE_NAME}.before-{schema.head_revision()}")


def test_an_empty_folder_gets_the_newest_schema(tmp_path):
    database = Database(tmp_path / "new")
    assert revision(database) is None
    schema.prepare(database)
    assert revision(database) == schema.head_revision()
    schema.prepare(database)
    assert [path.name for path in sorted(tmp_path.glob("new/*.before-*"))] == []
    database.close()


def test_two_processes_that_prepare_at_once_both_succeed(tmp_path):
    code = (
        "import sys; from pathlib import Path; from hub.store import schema; from hub.store.engine import Database\n"
        "database = Database(Path(sys.argv[1])); schema.prepare(database)\n"
        "with database.read() as c: print(schema.revision_of(c))"
    )
    pair = [
        subprocess.Popen(
            [sys.executable, "-c", code, str(tmp_path)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        )
        for _ in range(2)
    ]
    for process in pair:
        out, complaint = process.communicate(timeout=60)
        assert (process.returncode, out.strip()) == (0, schema.head_revision()), complaint


def test_an_upgrade_keeps_a_copy_of_what_there_was(database, later):
    with database.write() as connection:
        facts.put(connection, "mood", "fair")
    before = backup(database)
    later('op.add_column("fact", sa.Column("more", sa.Text()))')
    schema.prepare(database)
    assert revision(database) == "0002"
    kept = sqlite3.connect(before)
    assert kept.execute("SELECT name, value FROM fact").fetchall() == [("mood", "fair")]
    assert kept.execute("SELECT version_num FROM alembic_version").fetchall() != [("0002",)]
    kept.close()


def test_a_copy_from_an_earlier_attempt_is_replaced(database, later):
    before = backup(database)
    before.write_bytes(b"stale")
    before.with_name(f"{before.name}.part").write_bytes(b"cut short")
    later("pass")
    schema.prepare(database)
    assert before.read_bytes().startswith(b"SQLite format 3")
    assert not before.with_name(f"{before.name}.part").exists()


def test_without_room_for_the_copy_nothing_is_changed(database, later, monkeypatch):
    later("pass")
    monkeypatch.setattr(schema.shutil, "disk_usage", lambda _path: shutil._ntuple_diskusage(10, 9, 1))
    with pytest.raises(StoreError, match="no room for a copy"):
        schema.prepare(database)
    assert revision(database) != "0002"


def test_a_migration_that_fails_leaves_nothing_behind(database, later):
    before = revision(database), tables(database)
    later('op.execute("CREATE TABLE half (x)"); op.execute("INSERT INTO fact VALUES (1, 2)"); raise RuntimeError')
    with pytest.raises(RuntimeError):
        schema.prepare(database)
    assert (revision(database), tables(database)) == before
    with database.write() as connection:
        assert connection.exec_driver_sql("PRAGMA foreign_keys").scalar() == 1
        assert facts.get(connection, "1") is None


def test_a_migration_that_breaks_a_reference_is_refused(database, inventory, later):
    later('op.execute("DELETE FROM site")')
    with pytest.raises(StoreError, match=r"would leave 3 rows without what they refer to, so nothing was changed"):
        schema.prepare(database)
    assert revision(database) != "0002"
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM site").scalar() == 2


def test_rebuilding_a_table_does_not_empty_its_children(database, inventory, later):
    # What SQLite does with foreign keys on: the rebuilt table is dropped once, and its children with it.
    later(
        'b = op.batch_alter_table("node"); t = b.__enter__(); t.alter_column("interval_s", nullable=True); b.__exit__(None, None, None)'
    )
    schema.prepare(database)
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM node").scalar() == 3
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM fitting").scalar() == 2
        assert connection.exec_driver_sql("PRAGMA foreign_key_check").fetchall() == []


def test_a_newer_database_is_refused_and_left_alone(database):
    with database.write() as connection:
        connection.exec_driver_sql("UPDATE alembic_version SET version_num = '9999'")
    with pytest.raises(StoreError, match=r"made by a newer version of Packfold \(schema 9999\). Install that version"):
        schema.prepare(database)
    assert revision(database) == "9999"


def test_the_database_of_another_program_is_refused_and_left_alone(tmp_path):
    other = sqlite3.connect(tmp_path / DATABASE_NAME)
    other.execute("CREATE TABLE music (title)")
    other.commit()
    other.close()
    database = Database(tmp_path)
    with pytest.raises(StoreError, match=r"is not a Packfold database. Move it away"):
        schema.prepare(database)
    assert tables(database) == {"music"}
    database.close()


def test_an_installation_without_migrations_says_so(tmp_path, monkeypatch):
    (tmp_path / "versions").mkdir()
    monkeypatch.setattr(schema, "scripts_folder", lambda: tmp_path)
    with pytest.raises(StoreError, match="Install Packfold again"):
        schema.head_revision()


def test_migrating_a_file_that_cannot_be_written_is_told(tmp_path, migrated_file):
    shutil.copy(migrated_file, tmp_path / DATABASE_NAME)
    database = Database(tmp_path, f"sqlite:///file:{tmp_path / DATABASE_NAME}?mode=ro&immutable=1&uri=true")
    with pytest.raises(StoreError, match="cannot be written"):
        schema.migrate(database, "base")
    database.close()
