"""Opening the database: one writer, readers that cannot write, and the rules that keep SQLite dependable.

Received data is durable before it is acknowledged (``synchronous=FULL``); a writing transaction takes the lock at its
start (``BEGIN IMMEDIATE``), because one that reads first and writes later fails at once when somebody else wrote in
between. Only the process that holds the data folder's lock moves the write-ahead log into the database file: two
processes doing that at once is the one known way to damage such a file (the "WAL-reset bug" described on sqlite.org,
fixed in SQLite 3.51.3).
"""

import fcntl
import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Engine, create_engine, event, make_url
from sqlalchemy.exc import DatabaseError, OperationalError
from sqlalchemy.pool import NullPool

from hub.errors import AlreadyRunningError, StoreError

WRITER_TIMEOUT_S = 30.0
READER_TIMEOUT_S = 10.0
WAL_LIMIT_BYTES = 64 * 1024 * 1024
DATABASE_NAME = "packfold.db"


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
        try:
            data.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise StoreError(
                f"The data folder {data} cannot be made: {error.strerror}. Choose another with --data."
            ) from None
        self.url = url or f"sqlite:///{data / DATABASE_NAME}"
        parsed = make_url(self.url)
        self.sqlite = parsed.get_backend_name() == "sqlite"
        if not self.sqlite:
            raise StoreError(
                f"database.url names {parsed.get_backend_name()}, which this version does not open. "
                "Leave it empty for SQLite in the data folder."
            )
        self.file = Path(parsed.database or "")
        self._writer = _engine(self.url, writing=True, checkpoints=checkpoints)
        self._reader = _engine(self.url, writing=False, checkpoints=False)

    @contextmanager
    def write(self) -> Iterator[Connection]:
        """One writing transaction: all of it is durable when the block ends, or none of it happened."""
        with _in_plain_words(self.file), self._writer.begin() as connection:
            yield connection

    @contextmanager
    def read(self) -> Iterator[Connection]:
        """A snapshot for reading; the connection refuses to write."""
        with _in_plain_words(self.file), self._reader.begin() as connection:
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


def _engine(url: str, *, writing: bool, checkpoints: bool) -> Engine:
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
def _in_plain_words(file: Path) -> Iterator[None]:
    """Driver errors as sentences that say what to do."""
    try:
        yield
    except (OperationalError, DatabaseError) as error:
        if not isinstance(error.orig, sqlite3.DatabaseError):
            raise
        text = str(error.orig)
        for mark, advice in _ADVICE:
            if mark in text:
                raise StoreError(advice.format(file=file)) from error
        raise


_ADVICE = (
    ("locked", "The database {file} is busy with another writer. Wait a moment and try again."),
    ("full", "The disk with {file} is full. Free some space; nothing that was receipted is lost."),
    ("readonly", "The database {file} cannot be written. Make its folder writable for the hub's user."),
    ("unable to open", "The database {file} cannot be opened. Check that its folder exists and is writable."),
    ("malformed", "The database {file} is damaged. Stop the hub, keep the file, and restore the last backup."),
    ("not a database", "The file {file} is not a Packfold database. Move it away or choose another --data folder."),
    ("disk I/O", "The disk with {file} reports an error. Check the card or disk, then restore the last backup."),
)


class FolderLock:
    """The mark that a part of a hub works on a data folder; the system drops it when the process ends, however.

    The part that collects is the one that moves the write-ahead log.
    """

    def __init__(self, data: Path, part: str = "collect") -> None:
        self._path = data / f"{part}.lock"
        self._handle: int | None = None

    def take(self) -> None:
        """Take the lock, or say who has it.

        Raises
        ------
        AlreadyRunningError
            Another process holds it.
        """
        self._path.parent.mkdir(parents=True, exist_ok=True)
        handle = os.open(self._path, os.O_RDWR | os.O_CREAT, 0o600)
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            owner = os.read(handle, 32).decode(errors="replace").strip()
            os.close(handle)
            raise AlreadyRunningError(
                f"Another hub{f' (process {owner})' if owner else ''} already works on the data folder "
                f"{self._path.parent}. Stop it first, or give this one its own folder with --data."
            ) from None
        os.ftruncate(handle, 0)
        os.write(handle, f"{os.getpid()}\n".encode())
        self._handle = handle

    def try_take(self) -> bool:
        """Take the lock if nobody has it."""
        try:
            self.take()
        except AlreadyRunningError:
            return False
        return True

    def release(self) -> None:
        """Give the lock back."""
        if self._handle is not None:
            os.close(self._handle)
            self._handle = None
