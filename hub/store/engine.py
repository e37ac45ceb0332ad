"""Opening the database: one writer, readers that cannot write, and the rules that keep SQLite dependable.

Received data is durable before it is acknowledged (``synchronous=FULL``); a writing transaction takes the lock at its
start (``BEGIN IMMEDIATE``), because one that reads first and writes later fails at once when somebody else wrote in
between. Only the process that holds the data folder's lock moves the write-ahead log into the database file: two
processes doing that at once is the one known way to damage such a file (the "WAL-reset bug" described on sqlite.org,
fixed in SQLite 3.51.3).
"""

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from sqlalchemy import URL, Connection, Engine, create_engine, event, make_url
from sqlalchemy.exc import ArgumentError, DatabaseError
from sqlalchemy.exc import TimeoutError as PoolTimeoutError
from sqlalchemy.pool import NullPool

from hub.errors import StoreError
from hub.store.folder import FolderLock, make_folder, refuse_network_share

__all__ = ["Database", "FolderLock", "in_plain_words", "sqlite_release"]

WRITER_TIMEOUT_S = 30.0
READER_TIMEOUT_S = 10.0
WAL_LIMIT_BYTES = 64 * 1024 * 1024
DATABASE_NAME = "packfold.db"
SQLITE_SOUND = (3, 51, 3)


class Database:
    """The database of one data folder.

    Parameters
    ----------
    data
        The data folder; made if it does not exist.
    url
        SQLAlchemy URL; empty for the file in the data folder.
    checkpoints
        Whether this process moves the write-ahead log into the file. True only for the holder of the folder's lock.
    """

    def __init__(self, data: Path, url: str = "", *, checkpoints: bool = False) -> None:
        self.data = data
        make_folder(data)
        found = _parsed(url) if url else URL.create("sqlite", database=str(data / DATABASE_NAME))
        self.file = Path(found.database or "")
        refuse_network_share(self.file.absolute().parent)
        self._writer = _engine(found, writing=True, checkpoints=checkpoints)
        self._reader = _engine(found, writing=False, checkpoints=False)

    @contextmanager
    def write(self) -> Iterator[Connection]:
        """One writing transaction: all of it is durable when the block ends, or none of it happened."""
        with in_plain_words(self.file), self._writer.begin() as connection:
            yield connection

    @contextmanager
    def read(self) -> Iterator[Connection]:
        """A snapshot for reading; the connection refuses to write."""
        with in_plain_words(self.file), self._reader.begin() as connection:
            yield connection

    @staticmethod
    def integrity_fault(connection: Connection) -> str:
        """What a quick check of the file finds wrong; empty when it is sound."""
        found = [str(row[0]) for row in connection.exec_driver_sql("PRAGMA quick_check(5)").fetchall()]
        return "" if found == ["ok"] else "; ".join(found)

    @property
    def writer(self) -> Engine:
        """The writing engine, for the migrations."""
        return self._writer

    def close(self) -> None:
        """Close every connection."""
        self._reader.dispose()
        self._writer.dispose()


def _parsed(url: str) -> URL:
    """The URL of a SQLite file.

    Raises
    ------
    StoreError
        It is none.
    """
    advice = "Leave it empty for a file in the data folder, or write it as sqlite:////path/to/file.db."
    try:
        found = make_url(url)
    except ArgumentError:
        raise StoreError(f"database.url “{url}” is not the address of a database. {advice}") from None
    if found.drivername not in {"sqlite", "sqlite+pysqlite"}:
        raise StoreError(f"database.url names {found.drivername}, which this version does not open. {advice}")
    if not found.database or ":memory:" in found.database:
        raise StoreError(f"database.url names no file, and what is received must survive a restart. {advice}")
    return found


def _engine(url: URL, *, writing: bool, checkpoints: bool) -> Engine:
    timeout = WRITER_TIMEOUT_S if writing else READER_TIMEOUT_S
    arguments: dict[str, Any] = {"timeout": timeout, "check_same_thread": False}
    if writing:
        engine = create_engine(url, pool_size=1, max_overflow=0, pool_timeout=WRITER_TIMEOUT_S, connect_args=arguments)
    else:
        # A reader is opened for one question and closed after it: a reader left open keeps the log from shrinking.
        engine = create_engine(url, poolclass=NullPool, connect_args=arguments)

    @event.listens_for(engine, "connect")
    def _prepare(connection: sqlite3.Connection, _record: object) -> None:
        # The driver must not begin transactions itself: it skips BEGIN before DDL, and pragmas would do nothing.
        connection.isolation_level = None
        cursor = connection.cursor()
        cursor.execute("PRAGMA foreign_keys=ON")
        cursor.execute("PRAGMA temp_store=MEMORY")
        if writing:
            # New files can give pages back later; has no effect on a file that already has tables.
            cursor.execute("PRAGMA auto_vacuum=INCREMENTAL")
            cursor.execute("PRAGMA journal_mode=WAL")
            cursor.execute("PRAGMA synchronous=FULL")
            cursor.execute(f"PRAGMA journal_size_limit={WAL_LIMIT_BYTES}")
            cursor.execute(f"PRAGMA wal_autocheckpoint={1000 if checkpoints else 0}")
            cursor.execute("PRAGMA cache_size=-16384")
        else:
            cursor.execute("PRAGMA query_only=ON")
        cursor.close()

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        connection.exec_driver_sql("BEGIN IMMEDIATE" if writing else "BEGIN")

    return engine


@contextmanager
def in_plain_words(file: Path) -> Iterator[None]:
    """Driver errors as sentences that say what to do."""
    try:
        yield
    except PoolTimeoutError as error:
        raise StoreError(_ADVICE[0][1].format(file=file)) from error
    except (DatabaseError, sqlite3.DatabaseError) as error:
        fault = error.orig if isinstance(error, DatabaseError) else error
        for mark, advice in _ADVICE if isinstance(fault, sqlite3.DatabaseError) else ():
            if mark in str(fault):
                raise StoreError(advice.format(file=file)) from error
        raise


_ADVICE = (
    ("locked", "The database {file} is busy with another writer. Wait a moment and try again."),
    ("full", "The disk with {file} is full. Free some space; nothing that was receipted is lost."),
    ("readonly", "The database {file} cannot be written. Make its folder writable for the hub's user."),
    ("unable to open", "The database {file} cannot be opened. Check that its folder exists and is writable."),
    ("malformed", "The database {file} is damaged. Stop the hub, keep the file, and restore the last backup."),
    ("not a database", "The file {file} is not a Packfold database. Move it away or choose another --data folder."),
    ("no such table", "The database {file} has another schema. Start the hub once to bring it up to date."),
    ("no such column", "The database {file} has another schema. Start the hub once to bring it up to date."),
    ("disk I/O", "The disk with {file} reports an error. Check the card or disk, then restore the last backup."),
)


def sqlite_release() -> tuple[str, bool]:
    """The version of SQLite in use, and whether it is free of the fault described above."""
    return sqlite3.sqlite_version, sqlite3.sqlite_version_info >= SQLITE_SOUND
