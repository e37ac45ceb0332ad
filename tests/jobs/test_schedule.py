import time

import pytest
from jobs.conftest import send
from jobs.test_analysis import BARE, NODE

from hub.jobs import schedule
from hub.settings import Analysis, Settings
from hub.store import figures, inventory

READINGS = {1_781_085_600_000 + i * 300_000: {"pack_voltage": 8.0, "pack_current": 0.1} for i in range(24)}


@pytest.fixture
def scheduled(new_database):
    database = new_database(BARE)
    made = schedule.Schedule(database, database.data, Settings(analysis=Analysis(every_s=0.5)), None, lambda: 1)
    yield database, made
    made.stop()


def days(database):
    with database.read() as connection:
        return figures.days(connection, inventory.node_id(connection, NODE))


def wait_for(what, limit_s=60):
    end = time.monotonic() + limit_s
    while time.monotonic() < end:
        if what():
            return
        time.sleep(0.1)
    pytest.fail("it did not happen in time")


def test_it_computes_what_is_there_at_the_start_and_what_comes_later(scheduled):
    database, made = scheduled
    send(database, NODE, READINGS)
    made.start()
    wait_for(lambda: len(days(database)) == 1)
    send(database, NODE, {t + 86_400_000: v for t, v in READINGS.items()})
    wait_for(lambda: len(days(database)) == 2)
    wait_for(lambda: made.status()["last_computed"] == 2)
    assert (made.status()["failures_in_a_row"], made.status()["last_error"]) == (0, "")


def test_nothing_new_starts_no_process(scheduled, monkeypatch):
    database, made = scheduled
    send(database, NODE, READINGS)
    made.run_once()
    assert made.status()["last_computed"] == 1
    monkeypatch.setattr(schedule.subprocess, "Popen", lambda *_a, **_k: pytest.fail("a process was started"))
    made.run_once()


def test_a_failure_is_told_and_tried_again(scheduled, monkeypatch):
    database, made = scheduled
    send(database, NODE, READINGS)
    monkeypatch.setattr(made, "_command", ["sh", "-c", "echo 'packfold: out of luck.' >&2; exit 1"])
    made.run_once()
    assert made.status()["last_error"] == "packfold: out of luck."
    made.run_once()
    assert made.status()["failures_in_a_row"] == 2


def test_stopping_ends_a_run_that_is_under_way(scheduled, monkeypatch):
    database, made = scheduled
    send(database, NODE, READINGS)
    monkeypatch.setattr(made, "_command", ["sleep", "60"])
    made.start()
    wait_for(lambda: made._child is not None)
    begun = time.monotonic()
    made.stop()
    assert time.monotonic() - begun < 20
