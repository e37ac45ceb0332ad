import json

import pytest
from hypothesis import given
from hypothesis import strategies as st
from store.strategies import DAY, as_rows, reading, times

from hub.errors import PayloadError
from hub.store import aside, intake, readings
from hub.store.intake import Incoming, note_presence, take, unknown_names
from hub.store.layout import DAY_MS
from hub.store.receipts import Receipt
from hub.telemetry import senml
from hub.telemetry.message import Message, Remark

AT = DAY * DAY_MS
NODE = aside.Origin("mqtt", "field/node-1/telemetry", 1, "node-1", AT + DAY_MS)
STRANGER = aside.Origin("mqtt", "field/nobody/telemetry", None, "nobody", AT)


def stored(connection):
    return as_rows(readings.read(connection, 1, 0, 2**62))


def test_good_and_bad_messages_of_one_transaction_each_get_their_due(scratch):
    contradicting = Message({AT: {"uptime": 2.0}}, boot=3, sequence=2, unknown={"wind": 2})
    remarked = Message(
        {AT + 1: {"uptime": 3.0}}, remarks=[Remark("unit", "furlong", AT, "signal", 1.0)], unknown={"wind": 1}
    )
    with scratch() as connection:
        taken = take(
            connection,
            [
                Incoming(NODE, b"one", Message({AT: {"uptime": 1.0}}, boot=3, sequence=1)),
                Incoming(STRANGER, b"two", refusal=Remark("unknown-node", "Nobody knows this node.")),
                Incoming(NODE, b"three", contradicting),
                Incoming(NODE, b"four", refusal=Remark("too-large", "Too large.")),
                Incoming(STRANGER, b"five", Message({AT: {"uptime": 9.0}})),
                Incoming(NODE, b"six", remarked),
            ],
        )
        assert [None if o is None else (o.new, o.repeated, len(o.contradictions)) for o in taken.outcomes] == [
            (1, 0, 0),
            None,
            (0, 1, 1),
            None,
            None,
            (1, 0, 0),
        ]
        assert taken.new == 2
        assert taken.receipts == [Receipt(1, 3, 2)]
        assert stored(connection) == {AT: {"uptime": 1000}, AT + 1: {"uptime": 3000}}
        assert aside.counts(connection, 1) == {"contradiction": 1, "too-large": 1, "unit": 1}
        assert unknown_names(connection, 1) == {"wind": 3}
        kept = connection.exec_driver_sql("SELECT reason, payload FROM set_aside ORDER BY id").fetchall()
        assert [tuple(row) for row in kept] == [
            ("unknown-node", b"two"),
            ("contradiction", None),
            ("too-large", b"four"),
            ("malformed", b"five"),
            ("unit", b"six"),
        ]


messages = st.builds(
    Message,
    st.dictionaries(times, reading, max_size=4),
    st.none() | st.integers(0, 2**63 - 1),
    st.none() | st.integers(0, 2**63 - 1),
    st.none() | st.integers(0, 2**63 - 1),
    st.dictionaries(st.text(max_size=120), st.integers(1, 9), max_size=3),
    st.lists(
        st.builds(Remark, st.just("unit"), st.text(max_size=9), st.none() | times, st.text(max_size=9), st.floats())
    ),
)
incoming = st.builds(
    Incoming,
    st.sampled_from([NODE, STRANGER]),
    st.binary(max_size=9),
    st.none() | messages,
    st.none() | st.builds(Remark, st.just("malformed"), st.text(max_size=9)),
)


@given(st.lists(incoming, max_size=5))
def test_nothing_raises_on_account_of_a_message(scratch, batch):
    with scratch() as connection:
        taken = take(connection, batch)
        assert len(taken.outcomes) == len(batch)
        for item, outcome in zip(batch, taken.outcomes, strict=True):
            good = item.message is not None and item.origin.node_id is not None
            assert (outcome is not None) == good
            if good:
                count = sum(1 for row in item.message.readings.values() if row)
                assert outcome.new + outcome.filled + outcome.repeated == count
        refused = sum(outcome is None for outcome in taken.outcomes)
        assert len(aside.newest(connection)) >= min(refused, 1)


fragments = st.sampled_from(
    ["pack_voltage", "\ud800", "n", "boot", "sequence", "oldest", "V", "", "x" * 200, "é", "\x00", "a b"]
)
numbers = st.one_of(st.floats(), st.integers(-(2**70), 2**70))
records = st.dictionaries(
    st.sampled_from(["n", "u", "v", "t", "bn", "bt", "vs"]), st.one_of(fragments, numbers), max_size=5
)


@given(st.lists(records, max_size=5))
def test_what_a_node_can_send_is_taken_or_set_aside(scratch, pack):
    payload = json.dumps(pack).encode()
    try:
        item = Incoming(NODE, payload, senml.decode(payload, NODE.received_ms))
    except PayloadError as error:
        item = Incoming(NODE, payload, refusal=Remark("malformed", str(error)))
    with scratch() as connection:
        taken = take(connection, [item])
        if item.message is None:
            assert taken.outcomes == [None]
            assert aside.counts(connection, 1) == {"malformed": 1}


def test_the_same_messages_again_change_nothing(scratch):
    batch = [
        Incoming(NODE, b"one", Message({AT: {"uptime": 1.0}}, boot=3, sequence=1)),
        Incoming(NODE, b"two", Message({AT: {"uptime": 2.0}}, boot=3, sequence=2)),
    ]
    with scratch() as connection:
        first = take(connection, batch)
        again = take(connection, batch)
        assert again.new == 0
        assert again.receipts == first.receipts == [Receipt(1, 3, 2)]
        assert aside.counts(connection, 1) == {"contradiction": 1}


@pytest.mark.parametrize(("oldest", "earned"), [(None, []), (6, [Receipt(1, 3, 7)]), (7, [Receipt(1, 3, 7)]), (8, [])])
def test_a_node_that_claims_to_have_lost_what_it_is_sending_is_not_believed(scratch, oldest, earned):
    batch = [Incoming(NODE, b"", Message({}, boot=3, sequence=n, oldest=oldest)) for n in (6, 7)]
    with scratch() as connection:
        assert take(connection, batch[1:] if oldest == 8 else batch).receipts == earned


def test_a_message_with_half_a_number_earns_no_receipt(scratch):
    with scratch() as connection:
        assert take(connection, [Incoming(NODE, b"", Message({AT: {"uptime": 1.0}}, boot=3))]).receipts == []
        assert take(connection, [Incoming(NODE, b"", Message({AT: {"uptime": 1.0}}, sequence=1))]).receipts == []


def test_a_node_that_makes_up_names_has_the_rest_counted_together(scratch, monkeypatch):
    monkeypatch.setattr(intake, "NAMES_KEPT", 3)
    with scratch() as connection:
        for _ in range(2):
            for number in range(6):
                take(connection, [Incoming(NODE, b"", Message({}, unknown={"name-0": 1, f"name-{number + 1}": 2}))])
        assert unknown_names(connection, 1) == {"(others)": 16, "name-0": 12, "name-1": 4, "name-2": 4}
        take(connection, [Incoming(NODE, b"", Message({}, unknown={f"new-{n}": 1 for n in range(9)}))])
        assert unknown_names(connection, 1)["(others)"] == 25


def test_presence_keeps_the_moment_of_the_change(scratch):
    with scratch() as connection:
        for state, at in (("online", 5), ("online", 9), ("offline", 12), ("offline", 13)):
            note_presence(connection, 1, state, at)
        assert tuple(connection.exec_driver_sql("SELECT state, changed_ms FROM presence").one()) == ("offline", 12)
