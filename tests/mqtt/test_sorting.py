"""What becomes of each kind of message, down to the database's own list of nodes."""

import pytest
from mqtt.nodes import EPOCH_S, pack

from hub.errors import StoreError
from hub.mqtt.sorting import Presence, Sorter, apart
from hub.mqtt.tray import Letter
from hub.store import inventory as nodes
from hub.store import inventory_change, inventory_file
from hub.store.aside import Origin
from hub.store.engine import Database
from hub.store.intake import Incoming
from hub.telemetry.message import Message

NOW = (EPOCH_S + 500_000) * 1000


def letter(topic: str, payload: bytes = b"", *, retained: bool = False) -> Letter:
    return Letter(topic, payload, 1, 1, retained, 1, NOW)


@pytest.fixture
def sorter(database, inventory):
    return Sorter(database, "field", 100_000)


@pytest.fixture
def ids(database, inventory):
    with database.read() as connection:
        return nodes.node_ids(connection)


def test_a_reading_is_read_and_belongs_to_its_node(sorter, ids):
    found = sorter.sort([letter("field/ridge-east/telemetry", pack(7))])
    (item,) = found.incoming
    assert item.origin == Origin("mqtt", "field/ridge-east/telemetry", ids["ridge-east"], "ridge-east", NOW)
    assert item.message.boot == 1
    assert item.message.sequence == 7
    assert [list(values) for values in item.message.readings.values()] == [["pack_voltage"]]
    assert sorter.name_of(ids["ridge-east"]) == "ridge-east"


@pytest.mark.parametrize("payload", [b"", b"junk", b"\xff\xff", b"[" * 100_000, b'{"n":1}'])
def test_what_cannot_be_read_is_refused_and_nothing_raises(sorter, ids, payload):
    (item,) = sorter.sort([letter("field/ridge-east/telemetry", payload)]).incoming
    assert item.message is None
    assert item.refusal.reason == "malformed"
    assert item.refusal.detail.endswith(".")
    assert item.origin.node_id == ids["ridge-east"]
    assert item.payload == payload


def test_a_message_beyond_the_limit_is_not_even_read(database, inventory):
    def read(_payload: bytes, _ms: int) -> Message:
        raise AssertionError("it was read")

    (item,) = Sorter(database, "field", 10, read).sort([letter("field/ridge-east/telemetry", b"x" * 11)]).incoming
    assert item.refusal.reason == "too-large"
    assert "11 bytes" in item.refusal.detail


def test_a_reader_that_fails_in_its_own_way_harms_only_the_one_message(database, inventory):
    def read(payload: bytes, _ms: int) -> Message:
        if payload == b"poison":
            raise RecursionError("deep inside")
        return Message()

    letters = [letter("field/ridge-east/telemetry", p) for p in (b"good", b"poison", b"good")]
    found = Sorter(database, "field", 100, read).sort(letters)
    assert [item.message is None for item in found.incoming] == [False, True, False]
    assert "RecursionError: deep inside" in found.incoming[1].refusal.detail


def test_a_node_nobody_enrolled_is_told_apart(sorter):
    (item,) = sorter.sort([letter("field/stranger/telemetry", pack(1))]).incoming
    assert (item.message, item.refusal.reason) == (None, "unknown-node")
    assert (item.origin.node_id, item.origin.node_name) == (None, "stranger")
    assert "No node is enrolled as “stranger”" in item.refusal.detail


@pytest.mark.parametrize("topic", ["field/No_Name/telemetry", "field/a/b/c", "field/ridge-east/other", "elsewhere"])
def test_a_topic_that_is_no_nodes_is_set_aside_too(sorter, topic):
    (item,) = sorter.sort([letter(topic, b"x")]).incoming
    assert item.refusal.reason == "unknown-node"
    assert item.origin.node_id is None


def test_a_node_enrolled_in_between_is_found(sorter, database):
    assert sorter.sort([letter("field/late/telemetry", pack(1))]).incoming[0].message is None
    rows = inventory_file.parse('[[node]]\nname="late"\nsite="ridge"\n', "test")
    with database.write() as connection:
        inventory_change.apply(connection, rows, who="test", now_ms=0)
        late = nodes.node_id(connection, "late")
    (item,) = sorter.sort([letter("field/late/telemetry", pack(2))]).incoming
    assert item.origin.node_id == late
    assert item.message is not None


def test_presence_is_noted_in_order(sorter, ids):
    topic = "field/ridge-east/presence"
    found = sorter.sort([letter(topic, b"online"), letter(topic, b"offline", retained=True)])
    assert found.presence == [
        Presence(ids["ridge-east"], "online", NOW),
        Presence(ids["ridge-east"], "offline", NOW),
    ]
    assert found.incoming == []


def test_a_presence_that_says_something_else_is_set_aside(sorter):
    (item,) = sorter.sort([letter("field/ridge-east/presence", b"ready")]).incoming
    assert item.refusal.reason == "malformed"


def test_a_presence_taken_back_at_the_broker_says_nothing(sorter):
    found = sorter.sort([letter("field/ridge-east/presence", b"", retained=True)])
    assert (found.incoming, found.presence) == ([], [])


def test_a_strangers_kept_presence_is_not_set_aside_again_with_each_connection(sorter):
    found = sorter.sort([letter("field/stranger/presence", b"online", retained=True)])
    assert (found.incoming, found.presence) == ([], [])
    assert len(sorter.sort([letter("field/stranger/presence", b"online")]).incoming) == 1


def test_a_list_of_nodes_that_cannot_be_read_decides_nothing(tmp_path):
    database = Database(tmp_path)
    with database.write():
        pass
    database.file.write_bytes(b"not a database" * 1000)
    sorter = Sorter(database, "field", 1000)
    with pytest.raises(StoreError):
        sorter.sort([letter("field/ridge-east/telemetry", pack(1))])
    database.close()


def test_something_unforeseen_while_placing_is_survived(sorter, monkeypatch):
    monkeypatch.setattr("hub.mqtt.sorting.parse_topic", lambda *_: 1 / 0)
    (item,) = sorter.sort([letter("field/ridge-east/telemetry", b"x")]).incoming
    assert "ZeroDivisionError" in item.refusal.detail


def test_apart_keeps_origin_and_bytes_and_names_the_fault():
    item = Incoming(Origin("mqtt", "t", 1, "n", 2), b"bytes", Message())
    aside = apart(item, ValueError("first line\nsecond line"))
    assert (aside.origin, aside.payload, aside.message) == (item.origin, b"bytes", None)
    assert "ValueError: first line)" in aside.refusal.detail
