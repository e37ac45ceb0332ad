"""Check values: every example of RFC 8428, sections 5.1 and 6, with its resolved form (sections 4.6 and 5.1.4)."""

import json
from datetime import UTC, datetime

import cbor2
import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import NAMES, NUMBERS, RECEIVED_MS, UNITS, any_records, as_cbor, as_json, damaged, plain_records

from hub.errors import PayloadError
from hub.quantities import BY_NAME, MESSAGE_FIELDS
from hub.telemetry import packs, senml
from hub.telemetry.message import FUTURE_LIMIT_MS, Message
from hub.telemetry.senml import MAX_PAYLOAD_BYTES, MAX_RECORDS, Resolved, decode, resolve

NOW_S = RECEIVED_MS / 1000
HERE = "urn:dev:ow:10e2073a01080063"
HUMID_S = 1_320_067_464
CURRENT = '[{"bn":"urn:dev:ow:10e2073a0108006:","bt":1.276020076001e+09,"bu":"A","bver":5,"n":"voltage","u":"V","v":120.1},{"n":"current","t":-5,"v":1.2},{"n":"current","t":-4,"v":1.3},{"n":"current","t":-3,"v":1.4},{"n":"current","t":-2,"v":1.5},{"n":"current","t":-1,"v":1.6},{"n":"current","v":1.7}]'
CURRENT_RESOLVED = [
    *[("urn:dev:ow:10e2073a0108006:current", "A", 1276020071.001 + i, 1.2 + i / 10) for i in range(5)],
    ("urn:dev:ow:10e2073a0108006:voltage", "V", 1276020076.001, 120.1),
    ("urn:dev:ow:10e2073a0108006:current", "A", 1276020076.001, 1.7),
]

# Section, pack, and the resolved records as (name, unit, Unix time, value) in order of time.
EXAMPLES = [
    ("5.1.1", '[{"n":"urn:dev:ow:10e2073a01080063","u":"Cel","v":23.1}]', [(HERE, "Cel", NOW_S, 23.1)]),
    (
        "5.1.2 now",
        '[{"bn":"urn:dev:ow:10e2073a01080063:","n":"voltage","u":"V","v":120.1},{"n":"current","u":"A","v":1.2}]',
        [(f"{HERE}:voltage", "V", NOW_S, 120.1), (f"{HERE}:current", "A", NOW_S, 1.2)],
    ),
    ("5.1.2 timed", CURRENT, CURRENT_RESOLVED),
    (
        "5.1.2 stream",
        '[{"bn":"urn:dev:ow:10e2073a01080063","bt":1.320067464e+09,"bu":"%RH","v":21.2},{"t":10,"v":21.3},{"t":20,"v":21.4},{"t":30,"v":21.4},{"t":40,"v":21.5},{"t":50,"v":21.5},{"t":60,"v":21.5},{"t":70,"v":21.6},{"t":80,"v":21.7}]',
        [
            (HERE, "%RH", HUMID_S + 10 * i, v)
            for i, v in enumerate([21.2, 21.3, 21.4, 21.4, 21.5, 21.5, 21.5, 21.6, 21.7])
        ],
    ),
    (
        "5.1.3 and 5.1.4",
        '[{"bn":"urn:dev:ow:10e2073a01080063","bt":1.320067464e+09,"bu":"%RH","v":20},{"u":"lon","v":24.30621},{"u":"lat","v":60.07965},{"t":60,"v":20.3},{"u":"lon","t":60,"v":24.30622},{"u":"lat","t":60,"v":60.07965},{"t":120,"v":20.7},{"u":"lon","t":120,"v":24.30623},{"u":"lat","t":120,"v":60.07966},{"u":"%EL","t":150,"v":98},{"t":180,"v":21.2},{"u":"lon","t":180,"v":24.30628},{"u":"lat","t":180,"v":60.07967}]',
        [
            (HERE, "%RH", 1.320067464e9, 20),
            (HERE, "lon", 1.320067464e9, 24.30621),
            (HERE, "lat", 1.320067464e9, 60.07965),
            (HERE, "%RH", 1.320067524e9, 20.3),
            (HERE, "lon", 1.320067524e9, 24.30622),
            (HERE, "lat", 1.320067524e9, 60.07965),
            (HERE, "%RH", 1.320067584e9, 20.7),
            (HERE, "lon", 1.320067584e9, 24.30623),
            (HERE, "lat", 1.320067584e9, 60.07966),
            (HERE, "%EL", 1.320067614e9, 98),
            (HERE, "%RH", 1.320067644e9, 21.2),
            (HERE, "lon", 1.320067644e9, 24.30628),
            (HERE, "lat", 1.320067644e9, 60.07967),
        ],
    ),
    (
        "5.1.5",
        '[{"bn":"urn:dev:ow:10e2073a01080063:","n":"temp","u":"Cel","v":23.1},{"n":"label","vs":"Machine Room"},{"n":"open","vb":false},{"n":"nfc-reader","vd":"aGkgCg"}]',
        [
            (f"{HERE}:temp", "Cel", NOW_S, 23.1),
            (f"{HERE}:label", None, NOW_S, "Machine Room"),
            (f"{HERE}:open", None, NOW_S, False),
            (f"{HERE}:nfc-reader", None, NOW_S, b"hi \n"),
        ],
    ),
    (
        "5.1.6",
        '[{"bn":"2001:db8::2/","bt":1.320078429e+09,"n":"temperature","u":"Cel","v":25.2},{"n":"humidity","u":"%RH","v":30},{"bn":"2001:db8::1/","n":"temperature","u":"Cel","v":12.3},{"n":"humidity","u":"%RH","v":67}]',
        [
            ("2001:db8::2/temperature", "Cel", 1.320078429e9, 25.2),
            ("2001:db8::2/humidity", "%RH", 1.320078429e9, 30),
            ("2001:db8::1/temperature", "Cel", 1.320078429e9, 12.3),
            ("2001:db8::1/humidity", "%RH", 1.320078429e9, 67),
        ],
    ),
    (
        "5.1.7 thermostat",
        '[{"bn":"urn:dev:ow:10e2073a01080063:"},{"n":"temp","u":"Cel","v":23.1},{"n":"heat","u":"/","v":1},{"n":"fan","u":"/","v":0}]',
        [(f"{HERE}:temp", "Cel", NOW_S, 23.1), (f"{HERE}:heat", "/", NOW_S, 1), (f"{HERE}:fan", "/", NOW_S, 0)],
    ),
    (
        "5.1.7 lights on",
        '[{"bt":1.320078429e+09,"bu":"/","n":"2001:db8::3","v":1},{"n":"2001:db8::4","v":1}]',
        [("2001:db8::3", "/", 1320078429, 1), ("2001:db8::4", "/", 1320078429, 1)],
    ),
    (
        "5.1.7 lights off",
        '[{"bt":1.320078429e+09,"bu":"/","n":"2001:db8::3","v":0.5},{"n":"2001:db8::4","v":0.5},{"n":"2001:db8::3","t":0.1,"v":0},{"n":"2001:db8::4","t":0.1,"v":0}]',
        [
            ("2001:db8::3", "/", 1320078429, 0.5),
            ("2001:db8::4", "/", 1320078429, 0.5),
            ("2001:db8::3", "/", 1320078429.1, 0),
            ("2001:db8::4", "/", 1320078429.1, 0),
        ],
    ),
]

# Section 6: the pack of section 5.1.2 in CBOR, 195 bytes.
CBOR_EXAMPLE = bytes.fromhex(
    "87a721781b75726e3a6465763a6f773a3130653230373361303130383030363a22fb41d303a15b00106223614120050067766f6c746167650161"
    "5602fb405e066666666666a3006763757272656e74062402fb3ff3333333333333a3006763757272656e74062302fb3ff4cccccccccccda300"
    "6763757272656e74062202fb3ff6666666666666a3006763757272656e74062102f93e00a3006763757272656e74062002fb3ff99999999999"
    "9aa3006763757272656e74060002fb3ffb333333333333"
)


def assert_resolved(found, expected):
    assert [(r.name, r.unit, r.value) for r in found] == [
        (name, unit, pytest.approx(v, rel=1e-12) if isinstance(v, float) else v) for name, unit, _, v in expected
    ]
    assert [r.time_s for r in found] == pytest.approx([t for _, _, t, _ in expected], abs=1e-6)


@pytest.mark.parametrize(("section", "pack", "expected"), EXAMPLES, ids=[e[0] for e in EXAMPLES])
def test_examples_of_the_rfc_resolve_to_their_stated_form(section, pack, expected):
    assert_resolved(resolve(json.loads(pack), NOW_S), expected)


def test_the_cbor_example_is_the_json_example():
    assert len(CBOR_EXAMPLE) == 195
    records = [packs.labelled(record) for record in packs.parse_cbor(CBOR_EXAMPLE)]
    assert_resolved(resolve(records, NOW_S), CURRENT_RESOLVED)


def test_an_indefinite_array_of_a_stream_is_read_too():
    stream = (
        b"\x9f" + b"".join(cbor2.dumps({0: "pack_voltage", 2: v, 6: t}) for t, v in [(0, 10.5), (-10, 10.4)]) + b"\xff"
    )
    assert decode(stream, RECEIVED_MS).readings == {
        RECEIVED_MS: {"pack_voltage": 10.5},
        RECEIVED_MS - 10_000: {"pack_voltage": 10.4},
    }


def test_a_resolved_pack_resolves_to_itself():
    for _, pack, _ in EXAMPLES:
        once = [r for r in resolve(json.loads(pack), NOW_S) if isinstance(r.value, float)]
        again = resolve(
            [{"n": r.name, "t": r.time_s, "v": r.value, **({"u": r.unit} if r.unit else {})} for r in once], 0
        )
        assert again == once


def test_base_values_and_sums_are_added():
    records = [
        {"n": "a", "bv": 10, "bs": 100, "v": 0.5, "s": 5},
        {"n": "a", "t": 1, "v": -1},
        {"n": "a", "t": 2, "s": 7},
    ]
    assert resolve(records, NOW_S) == [
        Resolved("a", None, NOW_S, 10.5, 105.0),
        Resolved("a", None, NOW_S + 1, 9.0, 100.0),
        Resolved("a", None, NOW_S + 2, None, 107.0),
    ]


def test_update_time_is_handed_on():
    assert resolve([{"n": "a", "v": 1, "ut": 60}], 0)[0].update_s == 60.0


def test_a_time_below_2_to_the_28_is_relative_and_from_there_on_absolute():
    edge = 2**28
    assert datetime.fromtimestamp(edge, UTC) == datetime(1978, 7, 4, 21, 24, 16, tzinfo=UTC)
    found = resolve([{"n": "a", "v": 1, "bt": edge - 10, "t": 10}, {"n": "a", "v": 2, "t": 9.5}], NOW_S)
    assert [(r.time_s, r.value) for r in found] == [(edge, 1.0), (NOW_S + edge - 0.5, 2.0)]


@pytest.mark.parametrize("version", [1, 5, 10, 26])
def test_versions_up_to_10_and_secondary_units_are_read(version):
    assert resolve([{"bver": version, "n": "a", "v": 1}, {"bver": version, "n": "a", "v": 2}], NOW_S)


@pytest.mark.parametrize("version", [11, 16, 27, 42, 0, -1, 10.0, "10", True, None])
def test_other_versions_are_refused(version):
    with pytest.raises(PayloadError, match="version"):
        decode(as_json([{"bver": version, "n": "pack_voltage", "v": 1}]), RECEIVED_MS)


def test_a_pack_has_one_version():
    with pytest.raises(PayloadError, match="changes the version"):
        resolve([{"bver": 5, "n": "a", "v": 1}, {"bver": 10, "n": "a", "v": 1}], NOW_S)


def test_unknown_fields_are_ignored_unless_they_must_be_understood():
    assert decode(b'[{"n":"pack_voltage","v":1,"future":[{}]}]', RECEIVED_MS).readings == {
        RECEIVED_MS: {"pack_voltage": 1.0}
    }
    with pytest.raises(PayloadError, match="must be understood"):
        decode(b'[{"n":"pack_voltage","v":1},{"n":"x","v":1,"future_":0}]', RECEIVED_MS)


@pytest.mark.parametrize(
    "record",
    [
        {"n": "pack_voltage"},
        {"n": "pack_voltage", "v": 1, "vs": "x"},
        {"n": "pack_voltage", "v": "10.4"},
        {"n": "pack_voltage", "v": True},
        {"n": "pack_voltage", "v": None},
        {"n": "pack_voltage", "v": 1, "t": "now"},
        {"n": "pack_voltage", "v": 1, "t": 1e300},
        {"n": "pack_voltage", "v": 1, "u": 5},
        {"n": "pack voltage", "v": 1},
        {"n": "_pack_voltage", "v": 1},
        {"n": 5, "v": 1},
        {"v": 1},
        {"n": "a", "vd": "*"},
        {"n": "a", "vb": 1},
        {"n": "a", "s": "x"},
        17,
        None,
    ],
)
def test_a_record_that_cannot_be_read_costs_only_itself(record):
    whole = [{"n": "pack_voltage", "v": 10.4}, record]
    for message in (decode(as_json(whole), RECEIVED_MS), decode(as_cbor(whole), RECEIVED_MS)):
        assert message.readings == {RECEIVED_MS: {"pack_voltage": 10.4}}
        assert [r.reason for r in message.remarks] == ["malformed"]
    with pytest.raises(PayloadError):
        resolve(whole, NOW_S)


@pytest.mark.parametrize("base", [{"bn": 1}, {"bu": 1}, {"bt": "x"}, {"bv": True}, {"bs": None}, {"bt": float("inf")}])
def test_a_spoilt_base_field_spoils_the_pack(base):
    with pytest.raises(PayloadError, match="cannot be read without it"):
        decode(as_json([{"n": "pack_voltage", "v": 1}, {**base, "n": "pack_voltage", "v": 2}]), RECEIVED_MS)


def test_the_example_of_the_node_interface():
    pack = b"""[{"bn":"urn:dev:mac:0024befffe804ff1:","bt":1780000000,"n":"pack_voltage","u":"V","v":10.41},
     {"n":"pack_current","u":"A","v":0.482},{"n":"pack_temperature","u":"Cel","v":23.6},
     {"n":"panel_voltage","u":"V","v":17.9},{"n":"panel_current","u":"A","v":0.31},
     {"t":10,"n":"pack_voltage","u":"V","v":10.42},{"t":10,"n":"pack_current","u":"A","v":0.481}]"""
    assert decode(pack, RECEIVED_MS) == Message(
        {
            1_780_000_000_000: {
                "pack_voltage": 10.41,
                "pack_current": 0.482,
                "pack_temperature": 23.6,
                "panel_voltage": 17.9,
                "panel_current": 0.31,
            },
            1_780_000_010_000: {"pack_voltage": 10.42, "pack_current": 0.481},
        }
    )


def test_a_clockless_node_counts_back_from_receipt():
    pack = as_json([{"n": "pack_voltage", "t": t, "v": 10 + t / 100} for t in (-20, -10, 0)])
    assert decode(pack, RECEIVED_MS).readings == {
        RECEIVED_MS - 20_000: {"pack_voltage": 9.8},
        RECEIVED_MS - 10_000: {"pack_voltage": 9.9},
        RECEIVED_MS: {"pack_voltage": 10.0},
    }


def test_boot_sequence_and_oldest_are_taken_out():
    pack = as_json(
        [
            {"bn": "urn:x:", "bt": 1_780_000_000, "n": "boot", "v": 17},
            {"n": "sequence", "v": 1234},
            {"n": "oldest", "v": 1200, "u": "count"},
            {"n": "pack_voltage", "v": 1},
        ]
    )
    message = decode(pack, RECEIVED_MS)
    assert (message.boot, message.sequence, message.oldest) == (17, 1234, 1200)
    assert message.readings == {1_780_000_000_000: {"pack_voltage": 1.0}}
    assert decode(as_json([{"n": "boot", "v": 1}]), RECEIVED_MS) == Message(boot=1)


def test_units_are_converted_and_impossible_ones_kept_out():
    pack = as_json(
        [
            {"n": "pack_voltage", "u": "mV", "v": 10410},
            {"n": "pack_temperature", "u": "K", "v": 296.75},
            {"n": "air_temperature", "u": "V", "v": 3},
            {"n": "charge_in", "u": "C", "v": 3600},
            {"n": "pack_current", "v": 0.5},
        ]
    )
    message = decode(pack, RECEIVED_MS)
    assert message.readings[RECEIVED_MS] == {
        "pack_voltage": 10.41,
        "pack_temperature": pytest.approx(23.6),
        "charge_in": 1.0,
        "pack_current": 0.5,
    }
    assert [(r.reason, r.quantity, r.value, r.time_ms) for r in message.remarks] == [
        ("unit", "air_temperature", 3.0, RECEIVED_MS)
    ]


def test_the_base_unit_holds_where_a_record_has_none():
    message = decode(
        as_json([{"bu": "mV", "n": "pack_voltage", "v": 1000}, {"n": "pack_temperature", "v": 3}]), RECEIVED_MS
    )
    assert message.readings == {RECEIVED_MS: {"pack_voltage": 1.0}}
    assert [r.reason for r in message.remarks] == ["unit"]


def test_names_outside_the_catalogue_are_counted_and_other_types_too():
    pack = as_json(
        [
            {"n": "urn:x:wind", "v": 1},
            {"n": "wind", "v": 2},
            {"n": "note", "vs": "x"},
            {"n": "door", "vb": True},
            {"n": "pack_voltage", "s": 3},
        ]
    )
    message = decode(pack, RECEIVED_MS)
    assert message.unknown == {"wind": 2}
    assert message.ignored == 3
    assert message.readings == {}


def test_duplicates_are_one_reading_and_contradictions_are_kept_out():
    pack = as_json([{"n": "pack_voltage", "v": v, "t": t} for v, t in [(1, 0), (1, 0.0001), (2, 0.0002), (3, 1)]])
    message = decode(pack, RECEIVED_MS)
    assert message.readings == {RECEIVED_MS: {"pack_voltage": 1.0}, RECEIVED_MS + 1000: {"pack_voltage": 3.0}}
    assert [(r.reason, r.value) for r in message.remarks] == [("contradiction", 2.0)]


def test_not_a_number_and_infinity_are_refused_one_by_one():
    for pack in (
        b'[{"n":"pack_voltage","v":NaN},{"n":"pack_current","v":1e999},{"n":"pack_temperature","v":20}]',
        as_cbor(
            [
                {"n": "pack_voltage", "v": float("nan")},
                {"n": "pack_current", "v": float("inf")},
                {"n": "pack_temperature", "v": 20},
            ]
        ),
    ):
        message = decode(pack, RECEIVED_MS)
        assert message.readings == {RECEIVED_MS: {"pack_temperature": 20.0}}
        assert [(r.reason, r.quantity) for r in message.remarks] == [
            ("not-finite", "pack_voltage"),
            ("not-finite", "pack_current"),
        ]


def test_values_that_cannot_be_stored_are_remarks():
    message = decode(
        as_json(
            [{"n": "pack_voltage", "v": 1e13}, {"n": "pack_current", "v": 2**80}, {"n": "panel_voltage", "v": 1e12}]
        ),
        RECEIVED_MS,
    )
    assert message.readings == {RECEIVED_MS: {"panel_voltage": 1e12}}
    assert [r.reason for r in message.remarks] == ["out-of-range", "out-of-range"]


def test_readings_of_a_wrong_clock_keep_their_values_in_a_remark():
    pack = as_json(
        [{"n": "pack_voltage", "t": t, "v": v} for t, v in [(946_684_800, 1), (1_780_000_000, 2), (2_000_000_000, 3)]]
    )
    message = decode(pack, RECEIVED_MS)
    assert message.readings == {1_780_000_000_000: {"pack_voltage": 2.0}}
    assert [(r.reason, r.time_ms, r.values) for r in message.remarks] == [
        ("too-old", 946_684_800_000, {"pack_voltage": 1.0}),
        ("future", 2_000_000_000_000, {"pack_voltage": 3.0}),
    ]
    ahead = FUTURE_LIMIT_MS // 1000
    assert decode(as_json([{"n": "pack_voltage", "t": ahead, "v": 1}]), RECEIVED_MS).remarks == []


def test_limits_of_size():
    with pytest.raises(PayloadError, match="in several messages"):
        decode(b"[" + b" " * MAX_PAYLOAD_BYTES, RECEIVED_MS)
    record = b'{"v":1,"n":"a"}'
    assert decode(b"[" + b",".join([record] * MAX_RECORDS) + b"]", RECEIVED_MS).unknown == {"a": MAX_RECORDS}
    with pytest.raises(PayloadError, match="50001 records"):
        decode(b"[" + b",".join([record] * (MAX_RECORDS + 1)) + b"]", RECEIVED_MS)
    with pytest.raises(PayloadError, match="50001 records"):
        decode(b"\x99\xc3\x51" + b"\xa0" * (MAX_RECORDS + 1), RECEIVED_MS)


@pytest.mark.parametrize(
    "payload",
    [
        b"",
        b"online",
        b"{}",
        b"[",
        b"[1",
        b"\x87\xa7",
        CBOR_EXAMPLE[:-1],
        b"[" * 100_000,
        b"\x81" * 100_000,
        b'[{"n":"a","v":1}]x',
    ],
)
def test_what_is_no_pack_is_refused_in_one_sentence(payload):
    with pytest.raises(PayloadError, match=r"^[A-Z][^\n]*\.$"):
        decode(payload, RECEIVED_MS)


def test_the_encoding_can_be_stated():
    with pytest.raises(PayloadError):
        decode(b"[]", RECEIVED_MS, content="cbor")
    assert decode(b"[]", RECEIVED_MS, content="json") == Message()


def test_a_year_of_one_name_does_not_fill_the_cache_of_names_for_ever():
    assert senml._place.cache_info().maxsize is not None


@given(plain_records())
def test_both_paths_and_both_encodings_agree(records):
    quick = decode(as_json(records), RECEIVED_MS)
    thorough = decode(as_json([{"bver": 10, **records[0]}, *records[1:]]), RECEIVED_MS)
    assert quick == thorough == decode(as_cbor(records), RECEIVED_MS)


@given(st.lists(st.fixed_dictionaries({"n": NAMES, "v": NUMBERS}, optional={"u": UNITS}), max_size=20))
def test_every_record_is_accounted_for(records):
    timed = [{**r, "t": -i} for i, r in enumerate(records) if r["n"] not in MESSAGE_FIELDS]
    message = decode(as_json(timed), RECEIVED_MS)
    stored = sum(len(values) for values in message.readings.values())
    assert stored + len(message.remarks) + sum(message.unknown.values()) == len(timed)


@given(
    st.one_of(
        any_records().map(as_json),
        any_records().map(as_cbor),
        damaged(plain_records().map(as_json)),
        damaged(plain_records().map(as_cbor)),
        st.binary(max_size=200),
    ),
    st.sampled_from([None, "json", "cbor"]),
)
def test_anything_is_read_or_refused_and_nothing_else(payload, content):
    message, problem = _outcome(payload, content)
    assert problem is None or (problem.endswith(".") and "\n" not in problem and len(problem) < 400)
    for time_ms, values in message.readings.items():
        assert values
        assert 1_577_836_800_000 <= time_ms <= RECEIVED_MS + FUTURE_LIMIT_MS
        assert all(abs(value) <= 1e12 for value in values.values())
    for remark in message.remarks:
        assert remark.detail.endswith(".")
        assert len(remark.detail) < 400


def _outcome(payload, content=None):
    try:
        return decode(payload, RECEIVED_MS, content=content), None
    except PayloadError as problem:
        return Message(), str(problem)


@given(any_records())
def test_no_record_of_a_general_pack_is_lost(records):
    message, problem = _outcome(as_json(records))
    if problem is not None:
        return
    stored = sum(len(values) for values in message.readings.values())
    aside = sum(len(r.values) if r.values is not None else 1 for r in message.remarks)
    seen = stored + aside + message.ignored + sum(message.unknown.values())
    regular = {"n", "u", "t", "ut", "v", "vs", "vb", "vd", "s"}
    only_base = sum(isinstance(r, dict) and not regular & r.keys() for r in records)
    # Counts and repeats leave no trace of their own; whatever else is there must be seen.
    traceless = sum(isinstance(r, dict) and r.get("n") in (*MESSAGE_FIELDS, *BY_NAME) for r in records)
    assert len(records) - only_base - traceless <= seen <= len(records)


@pytest.mark.parametrize("record", [{"bn": "a" * 256}, {"bu": "a" * 256}])
def test_endless_base_names_and_units_are_refused(record):
    for payload in (as_json([{**record, "v": 1}]), as_cbor([{**record, "v": 1}])):
        with pytest.raises(PayloadError, match="at most 255 characters"):
            decode(payload, RECEIVED_MS)


@pytest.mark.parametrize("record", [{"n": "a" * 256}, {"n": "a", "u": "V" * 256}])
def test_endless_names_and_units_cost_only_their_record(record):
    for payload in (
        as_json([{**record, "v": 1}, {"n": "b", "v": 1}]),
        as_cbor([{**record, "v": 1}, {"n": "b", "v": 1}]),
    ):
        message = decode(payload, RECEIVED_MS)
        assert [r.reason for r in message.remarks] == ["malformed"]
        assert message.unknown == {"b": 1}
