import threading

from hub.cli.common import Context, progress
from hub.store.engine import FolderLock


def test_a_command_beside_a_running_hub_leaves_the_log_to_it(tmp_path):
    lock = FolderLock(tmp_path)
    with Context(None, tmp_path).database():
        pass  # a first command makes the schema
    lock.take()
    try:
        with Context(None, tmp_path).database() as database, database.write() as connection:
            assert connection.exec_driver_sql("PRAGMA wal_autocheckpoint").scalar() == 0
    finally:
        lock.release()
    with Context(None, tmp_path).database() as database, database.write() as connection:
        assert connection.exec_driver_sql("PRAGMA wal_autocheckpoint").scalar() > 0


def test_progress_is_silent_where_nobody_watches(capsys):
    with progress("Rows", 3) as told:
        for n in range(3):
            told(n)
    assert capsys.readouterr().err == ""
    assert threading.active_count() >= 1
