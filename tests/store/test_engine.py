import sqlite3
import subprocess
import sys
import textwrap
import threading
import time

import pytest
from sqlalchemy.exc import IntegrityError

from hub.errors import StoreError
from hub.store import engine
from hub.store.engine import DATABASE_NAME, Database, sqlite_release


def pragma(connection, name):
    return connection.exec_driver_sql(f"PRAGMA {name}").scalar()


def child(code, *arguments):
    """A Python process of its own."""
    return subprocess.Popen(
        [sys.executable, "-c", textwrap.dedent(code), *map(str, arguments)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def done(process):
    out, complaint = process.communicate(timeout=60)
    assert process.returncode == 0, complaint
    return out


def test_the_writer_is_durable_and_waits_its_turn(database):
    with database.write() as connection:
        assert pragma(connection, "journal_mode") == "wal"
        assert pragma(connection, "synchronous") == 2  # FULL: what is acknowledged survives a power cut
        assert pragma(connection, "foreign_keys") == 1
        assert pragma(connection, "busy_timeout") == 30_000
        assert pragma(connection, "temp_store") == 2
        assert pragma(connection, "journal_size_limit") == 64 * 1024 * 1024
        assert pragma(connection, "wal_autocheckpoint") == 1000
        assert pragma(connection, "auto_vacuum") == 2
        assert pragma(connection, "query_only") == 0


def test_a_reader_cannot_write(database, inventory):
    with database.read() as connection:
        assert pragma(connection, "query_only") == 1
        assert pragma(connection, "foreign_keys") == 1
        assert pragma(connection, "busy_timeout") == 10_000
    for statement in ("DELETE FROM fitting", "CREATE TABLE x (y)", "INSERT INTO fact VALUES ('a', 'b')"):
        with pytest.raises(StoreError, match="cannot be written"), database.read() as connection:
            connection.exec_driver_sql(statement)
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM fitting").scalar() == 2


def test_a_reader_sees_one_moment(database):
    with database.read() as reader:
        assert reader.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 0
        with database.write() as writer:
            writer.exec_driver_sql("INSERT INTO fact VALUES ('a', 'b')")
        assert reader.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 0
    with database.read() as reader:
        assert reader.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 1


def test_a_transaction_happens_whole_or_not_at_all(database):
    def half():
        with database.write() as connection:
            connection.exec_driver_sql("CREATE TABLE extra (x)")
            connection.exec_driver_sql("INSERT INTO fact VALUES ('a', 'b')")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        half()
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 0
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM sqlite_master WHERE name = 'extra'").scalar() == 0


def test_a_reference_to_nothing_is_refused(database):
    with pytest.raises(IntegrityError), database.write() as connection:
        connection.exec_driver_sql("INSERT INTO reading (node_id, time_ms, received_ms) VALUES (99, 1, 1)")


COUNTER = """
    import sys
    import time
    from pathlib import Path
    from hub.store import facts
    from hub.store.engine import Database
    database = Database(Path(sys.argv[1]))
    with database.read() as connection:
        print("ready", flush=True)
    sys.stdin.readline()
    for _ in range(int(sys.argv[2])):
        with database.write() as connection:
            before = facts.revision(connection)
            time.sleep(0.001)
            facts.put(connection, "revision", str(before + 1))
            facts.put(connection, f"{sys.argv[3]} {before}", "x")
    database.close()
"""


def test_two_processes_that_read_and_then_write_lose_nothing(database):
    """A transaction that begins without the lock fails at its first write once another process has written."""
    pair = [child(COUNTER, database.data, 60, name) for name in ("one", "two")]
    for process in pair:
        assert process.stdout.readline() == "ready\n"
    for process in pair:
        process.stdin.write("go\n")
        process.stdin.flush()
    for process in pair:
        done(process)
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT value FROM fact WHERE name = 'revision'").scalar() == "120"
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 121


def test_threads_of_one_hub_take_turns(database):
    def count():
        for _ in range(20):
            with database.write() as connection:
                before = connection.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar()
                connection.exec_driver_sql("INSERT INTO fact VALUES (?, '')", (str(before),))

    threads = [threading.Thread(target=count) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    with database.read() as connection:
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 80


def busy(monkeypatch, migrated_file, tmp_path):
    monkeypatch.setattr(engine, "WRITER_TIMEOUT_S", 0.1)
    (tmp_path / DATABASE_NAME).write_bytes(migrated_file.read_bytes())
    return Database(tmp_path)


def test_a_busy_database_is_told_and_can_be_tried_again(monkeypatch, migrated_file, tmp_path):
    database = busy(monkeypatch, migrated_file, tmp_path)
    other = sqlite3.connect(database.file, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    for _ in range(2):
        waiting = database.write()
        with pytest.raises(StoreError, match=r"is busy with another writer. Wait a moment and try again."), waiting:
            pass
    other.execute("COMMIT")
    other.close()
    with database.write() as connection:
        connection.exec_driver_sql("INSERT INTO fact VALUES ('a', 'b')")
    database.close()


def test_a_writer_within_a_writer_is_told_instead_of_waiting_for_ever(monkeypatch, migrated_file, tmp_path):
    database = busy(monkeypatch, migrated_file, tmp_path)
    with pytest.raises(StoreError, match="busy"), database.write(), database.write():
        pass
    database.close()


def test_a_reader_does_not_wait_for_a_writer(database):
    with database.write() as writer:
        writer.exec_driver_sql("INSERT INTO fact VALUES ('a', 'b')")
        before = time.monotonic()
        with database.read() as reader:
            assert reader.exec_driver_sql("SELECT COUNT(*) FROM fact").scalar() == 0
        assert time.monotonic() - before < 5


def test_only_the_holder_of_the_lock_moves_the_log_into_the_file(tmp_path, migrated_file):
    file = tmp_path / DATABASE_NAME
    file.write_bytes(migrated_file.read_bytes())
    holder, other = Database(tmp_path, checkpoints=True), Database(tmp_path)
    with holder.write() as connection:  # open, so that closing the other is not the last word
        connection.exec_driver_sql("SELECT 1")
    log = file.with_name(f"{file.name}-wal")
    small = file.stat().st_size
    with other.write() as connection:
        assert pragma(connection, "wal_autocheckpoint") == 0
        connection.exec_driver_sql("INSERT INTO fact VALUES ('big', zeroblob(8000000))")
    other.close()
    assert file.stat().st_size == small
    assert log.stat().st_size > 8_000_000
    with holder.write() as connection:
        connection.exec_driver_sql("INSERT INTO fact VALUES ('small', '')")
    assert file.stat().st_size > 8_000_000
    holder.close()
    assert not log.exists()


def test_a_file_that_is_no_database(tmp_path):
    (tmp_path / DATABASE_NAME).write_bytes(b"not a database at all, but long enough to be asked about" * 99)
    database = Database(tmp_path)
    for opened in (database.read, database.write):
        with pytest.raises(StoreError, match=r"is not a Packfold database. Move it away"), opened() as connection:
            connection.exec_driver_sql("SELECT * FROM fact")
    database.close()


def test_a_damaged_database(tmp_path, migrated_file):
    data = bytearray(migrated_file.read_bytes())
    data[4096:] = b"\xff" * (len(data) - 4096)
    (tmp_path / DATABASE_NAME).write_bytes(bytes(data))
    database = Database(tmp_path)
    with pytest.raises(StoreError, match=r"is damaged. Stop the hub, keep the file"), database.read() as connection:
        connection.exec_driver_sql("SELECT * FROM fact")
    database.close()


def test_a_folder_in_place_of_the_file(tmp_path):
    (tmp_path / DATABASE_NAME).mkdir()
    database = Database(tmp_path)
    with pytest.raises(StoreError, match="cannot be opened"), database.write():
        pass
    database.close()


def test_a_full_disk(database):
    with database.write() as connection:
        connection.exec_driver_sql(f"PRAGMA max_page_count={pragma(connection, 'page_count') + 5}")
    with pytest.raises(StoreError, match=r"The disk with .* is full. Free some space"), database.write() as connection:
        connection.exec_driver_sql("INSERT INTO fact VALUES ('big', zeroblob(1000000))")


def test_another_schema(database):
    for statement in ("SELECT * FROM yesterday", "SELECT yesterday FROM fact"):
        with pytest.raises(StoreError, match="another schema"), database.read() as connection:
            connection.exec_driver_sql(statement)


def test_a_fault_of_ours_keeps_its_traceback(database):
    with pytest.raises(Exception, match="syntax error") as caught, database.read() as connection:
        connection.exec_driver_sql("SELEC 1")
    assert not isinstance(caught.value, StoreError)


@pytest.mark.parametrize("name", ["plain", "with blank", "what?is=this", "100%", "#1", "ü", "a:b@c"])
def test_a_data_folder_may_have_any_name(tmp_path, name):
    database = Database(tmp_path / name / "data")
    with database.write() as connection:
        connection.exec_driver_sql("CREATE TABLE x (y)")
    database.close()
    assert (tmp_path / name / "data" / DATABASE_NAME).exists()
    assert database.file == tmp_path / name / "data" / DATABASE_NAME


def test_a_file_elsewhere(tmp_path):
    database = Database(tmp_path, f"sqlite:///{tmp_path}/other.db")
    with database.write() as connection:
        connection.exec_driver_sql("CREATE TABLE x (y)")
    database.close()
    assert database.file == tmp_path / "other.db"
    assert database.file.exists()


@pytest.mark.parametrize(
    ("url", "sentence"),
    [
        ("packfold.db", "“packfold.db” is not the address of a database."),
        ("postgresql://localhost/x", "names postgresql, which this version does not open."),
        ("sqlite+aiosqlite:///x", "names sqlite+aiosqlite, which this version does not open."),
        ("sqlite://", "names no file, and what is received must survive a restart."),
        ("sqlite:///:memory:", "names no file"),
    ],
)
def test_an_address_that_cannot_be_used(tmp_path, url, sentence):
    with pytest.raises(StoreError) as caught:
        Database(tmp_path, url)
    assert sentence in str(caught.value)
    assert str(caught.value).endswith("or write it as sqlite:////path/to/file.db.")


def test_a_quick_check_finds_damage(tmp_path, migrated_file, database):
    with database.read() as connection:
        assert Database.integrity_fault(connection) == ""
        root = connection.exec_driver_sql("SELECT rootpage FROM sqlite_master WHERE name = 'fact'").scalar()
        size = pragma(connection, "page_size")
    data = bytearray(migrated_file.read_bytes())
    # The page's list of free blocks leads nowhere (SQLite file format, "B-tree Pages", offset 1).
    data[(root - 1) * size + 1 : (root - 1) * size + 3] = b"\xff\xf0"
    (tmp_path / DATABASE_NAME).write_bytes(bytes(data))
    damaged = Database(tmp_path)
    with damaged.read() as connection:
        assert "corruption" in Database.integrity_fault(connection)
    damaged.close()


def test_the_release_of_sqlite_is_judged():
    version, sound = sqlite_release()
    assert version == sqlite3.sqlite_version
    assert sound is (tuple(map(int, version.split("."))) >= (3, 51, 3))
