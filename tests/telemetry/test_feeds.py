import json

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import RECEIVED_MS, damaged

from hub.errors import PayloadError, SettingsError
from hub.telemetry.feeds import Explained, explain, feed_from

JSON_FEED = {
    "filter": "station/+/state",
    "node_level": 2,
    "nodes": {"Gate_1": "gate-1"},
    "time": {"pointer": "/at", "format": "unix"},
    "values": [
        {"quantity": "pack_voltage", "pointer": "/battery/mv", "unit": "mV"},
        {"quantity": "pack_current", "pointer": "/battery/i/0", "scale": -0.01},
        {"quantity": "pack_temperature", "pointer": "/t~1c", "offset": -0.5},
    ],
}
SAMPLE = {"at": 1_780_000_000, "battery": {"mv": 10410, "i": [48.2]}, "t/c": "24.1"}


def test_a_json_feed():
    feed = feed_from(JSON_FEED)
    node, message = feed.decode("station/ridge-east/state", json.dumps(SAMPLE).encode(), RECEIVED_MS)
    assert node == "ridge-east"
    assert message.readings == {
        1_780_000_000_000: {
            "pack_voltage": 10.41,
            "pack_current": pytest.approx(-0.482),
            "pack_temperature": pytest.approx(23.6),
        }
    }
    assert message.remarks == []


def test_a_feed_takes_its_topics_and_translates_their_nodes():
    feed = feed_from(JSON_FEED)
    assert feed.takes("station/x/state")
    assert not feed.takes("station/x/other")
    assert feed.node_of("station/Gate_1/state") == "gate-1"
    with pytest.raises(PayloadError, match="Level 2 of the topic reads “Gate_2”"):
        feed.decode("station/Gate_2/state", b"{}", RECEIVED_MS)
    assert feed_from({**JSON_FEED, "node_level": None, "node": "a"}).node_of("station/Gate_2/state") == "a"


def test_absent_and_null_values_are_left_out_quietly_but_not_all_of_them():
    feed = feed_from(JSON_FEED)
    _, message = feed.decode("station/a/state", b'{"battery":{"mv":9000,"i":[]},"t/c":null}', RECEIVED_MS)
    assert message.readings == {RECEIVED_MS: {"pack_voltage": 9.0}}
    assert message.remarks == []
    _, message = feed.decode("station/a/state", b"{}", RECEIVED_MS)
    assert message.readings == {}
    assert [r.reason for r in message.remarks] == ["malformed"]


def test_a_value_that_is_no_number_costs_only_itself():
    payload = b'{"battery":{"mv":"full","i":[true]},"t/c":NaN}'
    _, message = feed_from(JSON_FEED).decode("station/a/state", payload, RECEIVED_MS)
    assert message.readings == {}
    assert [(r.reason, r.quantity) for r in message.remarks] == [
        ("malformed", "pack_voltage"),
        ("malformed", "pack_current"),
        ("not-finite", "pack_temperature"),
    ]


def test_times_ahead_or_of_long_ago_are_set_aside_with_their_values():
    for at, reason in ((1_990_000_000, "future"), (946_684_800, "too-old")):
        _, message = feed_from(JSON_FEED).decode(
            "station/a/state", json.dumps({"at": at, "battery": {"mv": 1000}}).encode(), RECEIVED_MS
        )
        assert message.readings == {}
        assert [(r.reason, r.values) for r in message.remarks] == [(reason, {"pack_voltage": 1.0})]


CSV_FEED = {
    "filter": "log/a",
    "node": "a",
    "format": "csv",
    "delimiter": ";",
    "decimal": ",",
    "time": {"column": 1, "format": "%d.%m.%Y %H:%M", "utc_offset": "+01:00"},
    "values": [{"quantity": "pack_voltage", "column": 2}, {"quantity": "pack_current", "column": 3, "unit": "mA"}],
}


def test_a_csv_feed_reads_lines_that_carry_their_time():
    payload = b"01.03.2026 13:00;10,4;482\n01.03.2026 13:05;;-1,5\r\n\n"
    _, message = feed_from(CSV_FEED).decode("log/a", payload, RECEIVED_MS)
    noon = 1_772_366_400_000
    assert message.readings == {
        noon: {"pack_voltage": 10.4, "pack_current": 0.482},
        noon + 300_000: {"pack_current": -0.0015},
    }


def test_a_csv_feed_without_times_reads_one_line():
    feed = feed_from({**CSV_FEED, "time": None})
    assert feed.decode("log/a", b"x;1,5;7", RECEIVED_MS)[1].readings == {
        RECEIVED_MS: {"pack_voltage": 1.5, "pack_current": 0.007}
    }
    for payload in (b"x;1;2\nx;1;2", b"", b" \n"):
        with pytest.raises(PayloadError, match="lines"):
            feed.decode("log/a", payload, RECEIVED_MS)


def test_a_line_that_is_too_short_gives_what_it_has():
    feed = feed_from({**CSV_FEED, "time": None})
    _, message = feed.decode("log/a", b"x;1,5", RECEIVED_MS)
    assert message.readings == {RECEIVED_MS: {"pack_voltage": 1.5}}
    assert [r.reason for r in feed.decode("log/a", b"x", RECEIVED_MS)[1].remarks] == ["malformed"]


def test_a_message_without_its_time_counts_from_receipt():
    for payload in (b'{"battery":{"mv":1000}}', b'{"at":null,"battery":{"mv":1000}}'):
        assert feed_from(JSON_FEED).decode("station/a/state", payload, RECEIVED_MS)[1].readings == {
            RECEIVED_MS: {"pack_voltage": 1.0}
        }


def test_a_plain_number_and_plain_numbers_by_topic():
    single = feed_from(
        {"filter": "mast/volts", "node": "mast", "format": "number", "values": [{"quantity": "pack_voltage"}]}
    )
    assert single.decode("mast/volts", b" 10.4\n", RECEIVED_MS)[1].readings == {RECEIVED_MS: {"pack_voltage": 10.4}}
    several = feed_from(
        {
            "filter": "s/+/+",
            "node_level": 2,
            "quantity_level": 3,
            "format": "number",
            "values": [
                {"quantity": "pack_voltage", "word": "u", "unit": "mV"},
                {"quantity": "pack_current", "word": "i"},
            ],
        }
    )
    assert several.decode("s/a/u", b"10400", RECEIVED_MS) == ("a", several.decode("s/a/u", b"10400.0", RECEIVED_MS)[1])
    assert several.decode("s/a/i", b"-0.5", RECEIVED_MS)[1].readings == {RECEIVED_MS: {"pack_current": -0.5}}
    with pytest.raises(PayloadError, match="reads “x”, which this feed does not know"):
        several.decode("s/a/x", b"1", RECEIVED_MS)
    assert [r.reason for r in single.decode("mast/volts", b"offline", RECEIVED_MS)[1].remarks] == ["malformed"]


@pytest.mark.parametrize(
    ("payload", "sentence"),
    [
        (b'{"at":', "not whole JSON"),
        (b"\xff", "not UTF-8"),
        (b'{"at":[1]}', "neither text nor number"),
        (b'{"at":"noon"}', "not a number of seconds"),
        (b"x" * (1 << 21), "reads at most"),
    ],
)
def test_a_message_that_cannot_be_read_as_a_whole(payload, sentence):
    with pytest.raises(PayloadError, match=sentence):
        feed_from(JSON_FEED).decode("station/a/state", payload, RECEIVED_MS)


def test_a_sample_is_explained_place_by_place():
    rows = explain(
        feed_from(JSON_FEED), "station/a/state", b'{"at":1780000000,"battery":{"mv":10410,"i":["x"]}}', RECEIVED_MS
    )
    assert rows == [
        Explained("time", "/at", "1780000000", 1_780_000_000_000, "ms"),
        Explained("pack_voltage", "/battery/mv", "10410", 10.41, "V"),
        Explained(
            "pack_current",
            "/battery/i/0",
            "x",
            None,
            "A",
            "pack_current reads “x”, which is no number; it was left out.",
        ),
        Explained("pack_temperature", "/t~1c", None, None, "°C", "There is nothing at this place in the sample."),
    ]
    assert explain(feed_from(JSON_FEED), "station/a/state", b'{"at":"noon"}', RECEIVED_MS)[0].remark.startswith(
        "The time “noon”"
    )
    with pytest.raises(PayloadError, match="not taken by the filter"):
        explain(feed_from(JSON_FEED), "x", b"{}", RECEIVED_MS)


VALUE = {"quantity": "pack_voltage", "pointer": "/u"}


@pytest.mark.parametrize(
    ("change", "sentence"),
    [
        ({"filter": "a/#/b"}, "# stands alone"),
        ({"values": []}, "needs values"),
        ({"values": ["x"]}, "Value 1 of the feed must be a table"),
        ({"values": [{**VALUE, "poniter": "/u"}]}, "unknown key “poniter”; the nearest name is pointer"),
        ({"values": [{**VALUE, "quantity": "pack_volts"}]}, "nearest name is pack_voltage"),
        ({"values": [{**VALUE, "unit": "A"}]}, "send it in V, mV or kV"),
        ({"values": [{**VALUE, "scale": 0.0}]}, "other than 0"),
        ({"values": [{**VALUE, "offset": float("nan")}]}, "offset finite"),
        ({"values": [{**VALUE, "pointer": "u"}]}, "must begin with /"),
        ({"values": [{"quantity": "pack_voltage"}]}, "a pointer and no column"),
        ({"values": [{**VALUE, "column": 1}]}, "a pointer and no column"),
        ({"values": [{**VALUE, "word": "u"}]}, "exactly where the feed has quantity_level"),
        ({"values": [VALUE, VALUE]}, "twice"),
        ({"node_level": None}, "either node, or node_level"),
        ({"node": "a"}, "either node, or node_level"),
        ({"node_level": 0}, "counted from 1"),
        ({"nodes": {"x": "Not A Node"}}, "1 to 64 characters"),
        ({"node_level": None, "node": "A"}, "1 to 64 characters"),
        ({"quantity_level": 2}, "goes with format"),
        ({"format": "xml"}, "cannot be read at format"),
        ({"format": "csv"}, "a column and no pointer"),
        ({"format": "csv", "decimal": ","}, "both a comma"),
        ({"format": "csv", "delimiter": "::"}, "one of comma"),
        ({"format": "csv", "values": [{"quantity": "pack_voltage", "column": 0}]}, "counted from 1"),
        (
            {"format": "number", "values": [{"quantity": "pack_voltage"}, {"quantity": "pack_current"}]},
            "need quantity_level",
        ),
        (
            {"format": "number", "values": [{"quantity": "pack_voltage"}], "time": {"pointer": "/t"}},
            "no room for a time",
        ),
        ({"time": {"pointer": "/t", "format": "%d.%m.%Y %H:%M"}}, "exactly one of"),
        ({"time": {"column": 1}}, "a pointer and no column"),
        ({"time": {"zone": "x"}}, "The time of the feed has the unknown key “zone”"),
        ({"topic": "x"}, "The feed has the unknown key “topic”"),
    ],
)
def test_a_feed_that_does_not_fit_is_refused_in_one_sentence(change, sentence):
    table = {"filter": "a/+", "node_level": 2, "values": [VALUE]} | change
    with pytest.raises(SettingsError, match=sentence) as problem:
        feed_from(table)
    assert str(problem.value).endswith(".")


PAYLOADS = st.one_of(
    damaged(st.just(json.dumps(SAMPLE).encode())),
    damaged(st.just(b"01.03.2026 13:00;10,4;482\n")),
    st.binary(max_size=80),
)


@given(
    PAYLOADS,
    st.sampled_from(
        [
            JSON_FEED,
            CSV_FEED,
            {"filter": "x", "node": "a", "format": "number", "values": [{"quantity": "pack_voltage"}]},
        ]
    ),
)
def test_any_message_is_read_or_refused_and_nothing_else(payload, table):
    feed = feed_from(table)
    topic = table["filter"].replace("+", "a")
    try:
        _, message = feed.decode(topic, payload, RECEIVED_MS)
        rows = explain(feed, topic, payload, RECEIVED_MS)
    except PayloadError:
        return
    assert message.readings or message.remarks
    assert len(rows) == len(feed.values) + (feed.time is not None)
