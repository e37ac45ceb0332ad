"""Storing a batch when the database will not, and when one message of it cannot be stored."""

import threading
import time

import pytest
from mqtt.nodes import stored_count

from hub.errors import StoreError
from hub.mqtt import committing
from hub.mqtt.committing import Committer
from hub.mqtt.sorting import Presence, Sorted
from hub.store import aside, intake
from hub.store import inventory as nodes
from hub.store.aside import Origin
from hub.store.intake import Incoming
from hub.telemetry.message import Message

NOW = 1_790_000_000_000


@pytest.fixture
def node_id(database, inventory):
    with database.read() as connection:
        return nodes.node_id(connection, "ridge-east")


def batch(node_id: int, count: int, presence: list[Presence] | None = None) -> Sorted:
    origin = Origin("mqtt", "field/ridge-east/telemetry", node_id, "ridge-east", NOW)
    return Sorted(
        [
            Incoming(origin, f"message {n}".encode(), Message({NOW - n * 1000: {"pack_voltage": 5.0}}, 1, n + 1))
            for n in range(count)
        ],
        presence or [],
    )


def poisoned(monkeypatch, *numbers: int) -> list[int]:
    """Make the store fail on some messages in a way that is not the database's; the sizes of the batches it was given."""
    sizes: list[int] = []
    take = intake.take

    def failing(connection, incoming):
        sizes.append(len(incoming))
        if any(item.message is not None and item.message.sequence in numbers for item in incoming):
            raise OverflowError("int too large")
        return take(connection, incoming)

    monkeypatch.setattr(committing.intake, "take", failing)
    return sizes


def test_a_batch_is_one_transaction(database, node_id):
    committer = Committer(database, threading.Event())
    taken = committer.commit(batch(node_id, 20, [Presence(node_id, "online", NOW)]))
    assert taken.new == 20
    assert [(r.boot, r.sequence) for r in taken.receipts] == [(1, 20)]
    with database.read() as connection:
        assert intake.presence_of(connection) == {node_id: ("online", NOW)}
    assert (committer.trouble, committer.faults) == ("", 0)


def test_the_guilty_message_is_found_and_the_others_are_stored(database, node_id, monkeypatch):
    sizes = poisoned(monkeypatch, 14)
    committer = Committer(database, threading.Event())
    taken = committer.commit(batch(node_id, 40, [Presence(node_id, "offline", NOW)]))
    assert [n for n, outcome in enumerate(taken.outcomes) if outcome is None] == [13]
    assert taken.new == 39
    # What lies after the missing one is not receipted.
    assert [(r.boot, r.sequence) for r in taken.receipts] == [(1, 13)]
    assert stored_count(database, "ridge-east") == 39
    with database.read() as connection:
        (kept,) = aside.newest(connection, node_id)
        assert intake.presence_of(connection) == {node_id: ("offline", NOW)}
    assert "OverflowError: int too large" in kept.detail
    assert committer.faults == 1
    assert len(sizes) < 20


def test_several_guilty_ones_are_found(database, node_id, monkeypatch):
    poisoned(monkeypatch, 1, 2, 30)
    taken = Committer(database, threading.Event()).commit(batch(node_id, 30))
    assert [n for n, outcome in enumerate(taken.outcomes) if outcome is None] == [0, 1, 29]


def test_a_value_no_column_takes_harms_only_its_message(database, node_id):
    given = batch(node_id, 3)
    given.incoming[1].message.readings[NOW - 1000]["pack_voltage"] = float("nan")
    taken = Committer(database, threading.Event()).commit(given)
    assert [outcome is None for outcome in taken.outcomes] == [False, True, False]


def test_a_presence_that_cannot_be_noted_stops_nothing(database, node_id):
    committer = Committer(database, threading.Event())
    taken = committer.commit(batch(node_id, 3, [Presence(9999, "online", NOW)]))
    assert taken.new == 3
    assert committer.faults == 2


def test_a_database_that_takes_nothing_at_all_is_not_blamed_on_a_message(database, node_id, monkeypatch):
    stopping = threading.Event()
    committer = Committer(database, stopping)
    monkeypatch.setattr(committing.intake, "take", lambda *_: 1 / 0)
    threading.Timer(0.3, stopping.set).start()
    assert committer.commit(batch(node_id, 5)) is None
    assert "takes nothing" in committer.trouble
    with database.read() as connection:
        assert aside.newest(connection) == []


def test_a_busy_database_is_asked_until_it_answers(database, node_id, monkeypatch):
    monkeypatch.setattr(committing, "FIRST_WAIT_S", 0.01)
    once, told, calls = Committer._once, [], []
    committer = Committer(database, threading.Event())

    def busy(self, incoming, presence):
        told.append(self.trouble)
        calls.append(len(incoming))
        if len(calls) < 4:
            raise StoreError("The database is busy.")
        return once(self, incoming, presence)

    monkeypatch.setattr(Committer, "_once", busy)
    assert committer.commit(batch(node_id, 7)).new == 7
    assert told == ["", "The database is busy.", "The database is busy.", "The database is busy."]
    # The batch was kept whole: a database that is busy is no message's fault.
    assert calls == [7, 7, 7, 7]
    assert committer.trouble == ""


def test_a_full_disk_keeps_the_batch_until_there_is_room(database, node_id, monkeypatch):
    monkeypatch.setattr(committing, "FIRST_WAIT_S", 0.02)
    with database.write() as connection:
        pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()
        connection.exec_driver_sql(f"PRAGMA max_page_count={pages + 2}")
    committer = Committer(database, threading.Event())
    taken = []
    worker = threading.Thread(target=lambda: taken.append(committer.commit(batch(node_id, 5000))))
    worker.start()
    end = time.monotonic() + 10
    while "is full" not in committer.trouble and time.monotonic() < end:
        time.sleep(0.01)
    assert "is full" in committer.trouble
    assert stored_count(database, "ridge-east") == 0
    end = time.monotonic() + 10
    while True:
        try:
            with database.write() as connection:
                connection.exec_driver_sql("PRAGMA max_page_count=1000000")
            break
        except StoreError:
            assert time.monotonic() < end
    worker.join(10)
    assert taken[0].new == 5000
    assert stored_count(database, "ridge-east") == 5000


def test_the_end_of_the_hub_gives_a_batch_up(database, node_id, monkeypatch):
    stopping = threading.Event()

    def busy(*_):
        raise StoreError("busy")

    monkeypatch.setattr(Committer, "_once", busy)
    threading.Timer(0.1, stopping.set).start()
    began = time.monotonic()
    assert Committer(database, stopping).commit(batch(node_id, 1)) is None
    assert time.monotonic() - began < 5


def test_receipts_of_several_transactions_are_the_newest_of_each_boot(database, node_id, monkeypatch):
    poisoned(monkeypatch, 40)
    given = batch(node_id, 40)
    given.incoming.reverse()
    taken = Committer(database, threading.Event()).commit(given)
    assert [(r.node_id, r.boot, r.sequence) for r in taken.receipts] == [(node_id, 1, 39)]
