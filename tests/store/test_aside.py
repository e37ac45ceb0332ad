import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.store import aside
from hub.store.aside import Origin, counts, keep, newest
from hub.telemetry.message import Remark

LIVE = Origin("mqtt", "field/node-1/telemetry", 1, "node-1", 1000)
STRANGER = Origin("mqtt", "field/nobody/telemetry", None, "nobody", 1000)
CARD = Origin("log", "card.csv", 1, None, 1000, 1)

remarks = st.builds(
    Remark,
    st.sampled_from(["malformed", "unit", "future", "contradiction", "line"]),
    st.text(max_size=20),
    st.none() | st.integers(0, 2**53),
    st.none() | st.text(max_size=20),
    st.none() | st.floats(),
    st.none() | st.integers(1, 10**6),
    st.none() | st.dictionaries(st.text(max_size=5), st.floats(allow_nan=False), max_size=2),
)


def payloads(connection):
    return connection.exec_driver_sql("SELECT payload FROM set_aside ORDER BY id").scalars().all()


@given(st.lists(remarks, max_size=5), st.binary(max_size=50), st.sampled_from([LIVE, STRANGER]), st.text(max_size=9))
def test_whatever_is_remarked_can_be_kept(scratch, some, payload, origin, topic):
    origin = Origin(origin.source, topic, origin.node_id, topic, origin.received_ms)
    with scratch() as connection:
        keep(connection, origin, some, payload)
        assert len(newest(connection)) <= len(some)
        assert bool(newest(connection)) == bool(some)


def test_the_bytes_are_kept_with_the_first_remark(scratch):
    with scratch() as connection:
        keep(connection, LIVE, [Remark("unit", "a"), Remark("unit", "b")], b"\x00\xffbytes")
        assert payloads(connection) == [b"\x00\xffbytes", None]


def test_bytes_beyond_64_kib_are_cut(scratch):
    with scratch() as connection:
        keep(connection, LIVE, [Remark("too-large", "a")], b"x" * 100_000)
        assert [len(p) for p in payloads(connection)] == [65_536]


def test_a_flood_is_kept_in_part_and_counted_whole(scratch, monkeypatch):
    monkeypatch.setattr(aside, "PAYLOADS_KEPT", 3)
    monkeypatch.setattr(aside, "ROWS_KEPT", 5)
    with scratch() as connection:
        for number in range(9):
            keep(connection, LIVE, [Remark("malformed", f"the {number}th")], b"bytes")
        keep(connection, LIVE, [Remark("unit", "another reason")], b"bytes")
        keep(connection, STRANGER, [Remark("malformed", "another node")], b"bytes")
        assert counts(connection, 1) == {"malformed": 9, "unit": 1}
        assert counts(connection, 2) == {}
        assert payloads(connection) == [b"bytes"] * 3 + [None] * 2 + [b"bytes"] * 2


def test_no_line_of_a_log_is_only_counted(scratch, monkeypatch):
    monkeypatch.setattr(aside, "ROWS_KEPT", 2)
    with scratch() as connection:
        keep(connection, CARD, [Remark("line", "torn", line=line) for line in range(1, 8)])
        assert [a.line for a in newest(connection, 1)] == [7, 6, 5, 4, 3, 2, 1]


def test_the_same_again_is_kept_once(scratch):
    contradiction = Remark("contradiction", "said otherwise", 50, "uptime", 2.0)
    with scratch() as connection:
        for _ in range(3):
            keep(connection, LIVE, [contradiction, Remark("future", "too new", 60, values={"uptime": 1.0})])
        keep(connection, LIVE, [Remark("contradiction", "said otherwise", 50, "uptime", 2.5), contradiction])
        assert counts(connection, 1) == {"contradiction": 2, "future": 1}


def test_lines_that_say_the_same_are_kept_each(scratch):
    with scratch() as connection:
        keep(connection, CARD, [Remark("too-old", "2000", 50, line=line) for line in (3, 9)])
        assert counts(connection, 1) == {"too-old": 2}


def test_remarks_without_an_instant_are_kept_each(scratch):
    with scratch() as connection:
        for _ in range(2):
            keep(connection, LIVE, [Remark("malformed", "cut short")], b"[")
        assert counts(connection, 1) == {"malformed": 2}


def test_the_newest_come_first_with_the_name_of_their_node(scratch):
    with scratch() as connection:
        keep(connection, Origin("mqtt", "t", 2, None, 7), [Remark("unit", "furlong", 5, "uptime", 1.5, 3)])
        keep(connection, STRANGER, [Remark("unknown-node", "who?")])
        found = newest(connection)
        assert [a.node for a in found] == ["nobody", "node-2"]
        assert newest(connection, 2) == found[1:]
        assert newest(connection, limit=1) == found[:1]
        assert (
            found[1].reason,
            found[1].detail,
            found[1].time_ms,
            found[1].quantity,
            found[1].value,
            found[1].line,
        ) == (
            *("unit", "furlong", 5, "uptime", 1.5),
            3,
        )


@pytest.mark.parametrize("text", ["half \ud800 a pair", "\udcff", "plain", "nul \x00", ""])
def test_any_text_can_be_stored(scratch, text):
    with scratch() as connection:
        keep(connection, Origin("mqtt", text, None, text, 0), [Remark("malformed", text, None, text)])
        assert newest(connection)[0].detail == aside.storable(text)
    assert aside.storable("plain ±é") == "plain ±é"


def test_contradictions_are_handed_out_for_free_places_only_the_first_and_its_equals(scratch):
    def said(time_ms, quantity, value):
        return Remark("contradiction", "other", time_ms, quantity, value)

    with scratch() as connection:
        keep(connection, LIVE, [said(50, "uptime", 2.0), said(50, "uptime", 3.0), said(50, "signal", 1.0)])
        keep(connection, LIVE, [said(51, "uptime", 4.0), Remark("unit", "x", 50, "uptime", 9.0)])
        keep(connection, CARD, [said(50, "uptime", 2.0004)])
        taken = aside.take_contradictions(connection, 1, {(50, "uptime"), (52, "uptime")})
        assert [(c.time_ms, c.quantity, c.value, c.import_id) for c in taken] == [
            (50, "uptime", 2.0, None),
            (50, "uptime", 2.0004, 1),
        ]
        assert counts(connection, 1) == {"contradiction": 3, "unit": 1}
        assert aside.take_contradictions(connection, 2, {(51, "uptime")}) == []


def test_what_was_set_aside_of_late_is_counted_by_node_and_reason(scratch):
    with scratch() as connection:
        for received_ms, node_id, name, reason in (
            (10, 1, None, "unit"),
            (20, 1, None, "unit"),
            (20, 1, None, "future"),
            (20, None, "stranger", "unknown-node"),
            (20, None, None, "malformed"),
        ):
            origin = aside.Origin("mqtt", "field/x/telemetry", node_id, name, received_ms)
            aside.keep(connection, origin, [Remark(reason, f"A sentence at {received_ms}.")])
        assert aside.since(connection, 15) == {
            "node-1": {"unit": 1, "future": 1},
            "stranger": {"unknown-node": 1},
            "": {"malformed": 1},
        }
        assert aside.since(connection, 0, 1) == {"node-1": {"unit": 2, "future": 1}}
