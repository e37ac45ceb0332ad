import msgspec
from jobs.conftest import exports, load
from jobs.test_analysis import BARE, NODE

from hub.jobs.enrolment import take_in
from hub.store import aside, intake, inventory, readings
from hub.telemetry.message import Remark

RECEIVED_MS = 1_781_100_000_000
TOPIC = f"field/{NODE}/telemetry"


def stranger(database, *payloads, topic=TOPIC, name=NODE):
    """Messages as the collector sets them aside while nobody is enrolled under their name."""
    origin = aside.Origin("mqtt", topic, None, name, RECEIVED_MS)
    with database.write() as connection:
        for payload in payloads:
            intake.take(connection, [intake.Incoming(origin, payload, None, Remark("unknown-node", "Enrol it."))])


def message(sequence, minutes=3):
    records = [{"bt": 1_781_085_600 + 600 * sequence, "n": "boot", "v": 1}, {"n": "sequence", "v": sequence}]
    records += [{"t": 60 * m, "n": "pack_voltage", "u": "V", "v": 8.0 + m / 10} for m in range(minutes)]
    return msgspec.json.encode(records)


def everything_aside(database):
    with database.read() as connection:
        return aside.newest(connection)


def test_what_a_node_sent_before_it_was_enrolled_is_taken_in_once(new_database):
    late, early = new_database(), new_database(BARE)
    stranger(late, message(1), message(2), message(2))
    assert take_in(late) == {}
    load(late, BARE)
    assert take_in(late) == {NODE: 6}
    assert take_in(late) == {}
    assert everything_aside(late) == []
    with early.write() as connection:
        node_id = inventory.node_id(connection, NODE)
        origin = aside.Origin("mqtt", TOPIC, node_id, NODE, RECEIVED_MS)
        from hub.telemetry.senml import decode

        for sequence in (1, 2):
            item = intake.Incoming(origin, message(sequence), decode(message(sequence), RECEIVED_MS))
            intake.take(connection, [item])
    assert exports(late) == exports(early)


def test_more_than_one_batch_is_taken_in(new_database, monkeypatch):
    database = new_database()
    stranger(database, *(message(n) for n in range(1, 8)))
    load(database, BARE)
    monkeypatch.setattr(aside.waiting, "__defaults__", (3,))
    assert take_in(database) == {NODE: 21}


def test_what_cannot_be_read_stays_aside_with_its_own_reason(new_database):
    database = new_database()
    stranger(database, b"\xff nonsense", message(1))
    stranger(database, b"online", topic=f"field/{NODE}/presence")
    stranger(database, message(3), name="somebody-else", topic="field/somebody-else/telemetry")
    load(database, BARE)
    assert take_in(database) == {NODE: 3}
    assert sorted((a.node, a.reason) for a in everything_aside(database)) == [
        ("somebody-else", "unknown-node"),
        (NODE, "malformed"),
        (NODE, "unknown-node"),
    ]
    with database.read() as connection:
        assert readings.count(connection, inventory.node_id(connection, NODE)) == 3
