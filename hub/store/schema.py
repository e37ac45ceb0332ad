"""Bringing a database to this version's schema, or saying why it cannot be."""

import shutil
from pathlib import Path

from alembic import command
from alembic.config import Config
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import Connection, inspect

from hub.errors import StoreError
from hub.store.engine import Database, in_plain_words


def scripts_folder() -> Path:
    """The migrations: inside the package once installed, beside it in a checkout."""
    package = Path(__file__).parents[1]
    inside = package / "migrations"
    return inside if inside.is_dir() else package.parent / "migrations"


def configuration(connection: Connection | None = None) -> Config:
    """Alembic's configuration, built in code: an installed hub has no ini file."""
    config = Config()
    config.set_main_option("script_location", str(scripts_folder()))
    if connection is not None:
        config.attributes["connection"] = connection
    return config


def head_revision() -> str:
    """The schema revision this version works with."""
    head = ScriptDirectory.from_config(configuration()).get_current_head()
    if head is None:
        raise StoreError("This installation has no migrations. Install Packfold again.")
    return head


def revision_of(connection: Connection) -> str | None:
    """The schema revision of a database; ``None`` for an empty one."""
    return MigrationContext.configure(connection).get_current_revision()


def prepare(database: Database) -> None:
    """Create or upgrade the schema in one transaction; a copy of the file is kept before an upgrade.

    Raises
    ------
    StoreError
        The file is another program's or a newer version's, there is no room for the copy, or the upgrade would break
        a reference.
    """
    head = head_revision()
    with database.write() as connection:
        current = revision_of(connection)
        foreign = current is None and bool(inspect(connection).get_table_names())
    if current == head:
        return
    if foreign:
        raise StoreError(
            f"The file {database.file} is not a Packfold database. Move it away or choose another --data folder."
        )
    known = {script.revision for script in ScriptDirectory.from_config(configuration()).walk_revisions()}
    if current is not None and current not in known:
        raise StoreError(
            f"The database {database.file} was made by a newer version of Packfold (schema {current}). "
            "Install that version, or choose another --data folder."
        )
    if current is not None:
        _keep_copy(database, current)
    migrate(database, "head")


def migrate(database: Database, revision: str) -> None:
    """Move the schema to a revision, forward or back, as one transaction."""
    with in_plain_words(database.file), database.writer.connect() as connection:
        driver = connection.connection.driver_connection
        assert driver is not None
        driver.execute("PRAGMA foreign_keys=OFF")
        try:
            with connection.begin():
                config = configuration(connection)
                script = ScriptDirectory.from_config(config)
                target = script.get_current_head() if revision == "head" else revision
                current = revision_of(connection)
                behind = {s.revision for s in script.iterate_revisions(current, "base")} if current else set()
                if target in behind or target == "base":
                    command.downgrade(config, revision)
                else:
                    command.upgrade(config, revision)
                broken = connection.exec_driver_sql("PRAGMA foreign_key_check").fetchall()
                if broken:
                    raise StoreError(
                        f"The upgrade of {database.file} would leave {len(broken)} rows without what they refer to, "
                        "so nothing was changed. Restore the last backup and report this."
                    )
        finally:
            driver.execute("PRAGMA foreign_keys=ON")


def _keep_copy(database: Database, current: str) -> None:
    """A consistent copy beside the database before its schema changes, in place of one from an earlier attempt."""
    target = database.file.with_name(f"{database.file.name}.before-{current}")
    if shutil.disk_usage(database.file.parent).free < 2 * database.file.stat().st_size:
        raise StoreError(
            f"There is no room for a copy of {database.file} before its upgrade. Free twice as much space as it has."
        )
    unfinished = target.with_name(f"{target.name}.part")
    unfinished.unlink(missing_ok=True)
    with in_plain_words(database.file), database.writer.connect() as connection:
        driver = connection.connection.driver_connection
        assert driver is not None
        driver.execute("VACUUM INTO ?", (str(unfinished),))
    unfinished.replace(target)
