"""Hypothesis strategies that several tests share: packs, logs, and the ways they are damaged on the road."""

import json

import cbor2
from hypothesis import strategies as st

RECEIVED_MS = 1_780_000_700_000
LABELS = {
    "bver": -1,
    "bn": -2,
    "bt": -3,
    "bu": -4,
    "bv": -5,
    "bs": -6,
    "n": 0,
    "u": 1,
    "v": 2,
    "vs": 3,
    "vb": 4,
    "s": 5,
    "t": 6,
    "ut": 7,
    "vd": 8,
}

NAMES = st.sampled_from(
    [
        "pack_voltage",
        "pack_current",
        "pack_temperature",
        "charger_duty",
        "uptime",
        "boot",
        "sequence",
        "oldest",
        "wind_speed",
        "bad name",
    ]
)
UNITS = st.sampled_from(["V", "mV", "A", "mA", "Cel", "K", "/", "%", "s", "min", "furlong", "count"])
NUMBERS = st.one_of(
    st.integers(-(2**70), 2**70),
    st.floats(allow_nan=False, allow_infinity=False),
    st.sampled_from([0, -0.0, 10.41, 85.0, 1e12, 1e300, 268_435_455.9, 268_435_456, 1_780_000_000]),
)
TIMES = st.one_of(st.integers(-3600, 3600), st.floats(-1e12, 1e12), st.sampled_from([0, 1_780_000_000, 2**28]))


@st.composite
def plain_records(draw):
    """Packs that use base name, base time, base unit, name, unit, value and time only, without illegal names."""
    record = st.fixed_dictionaries(
        {"v": NUMBERS.filter(lambda v: abs(v) < 2**63), "n": NAMES.filter(lambda n: " " not in n)},
        optional={
            "u": UNITS,
            "t": TIMES.filter(lambda t: abs(t) < 1e9),
            "bu": UNITS,
            "bn": st.just("urn:dev:ow:1:"),
            "bt": st.sampled_from([1_780_000_000, 0, 1_600_000_000.5]),
        },
    )
    return draw(st.lists(record, min_size=1, max_size=12))


@st.composite
def any_records(draw):
    """Packs that use all of the standard and some of what it forbids."""
    anything = st.one_of(st.none(), st.booleans(), NUMBERS, st.text(max_size=5), st.lists(st.integers(), max_size=2))
    known = {label: st.one_of(anything, NAMES, TIMES) for label in LABELS}
    record = st.fixed_dictionaries(
        {}, optional={**known, "v": NUMBERS, "n": NAMES, "t": TIMES, "x": anything, "must_": anything}
    )
    return draw(st.lists(st.one_of(record, anything), max_size=8))


def as_json(records):
    return json.dumps(records, separators=(",", ":")).encode()


def as_cbor(records):
    return cbor2.dumps([{LABELS.get(k, k): v for k, v in r.items()} if isinstance(r, dict) else r for r in records])


@st.composite
def damaged(draw, payloads):
    """A payload with bytes flipped, cut off, doubled or thrust in."""
    data = bytearray(draw(payloads))
    for _ in range(draw(st.integers(0, 4))):
        at = draw(st.integers(0, len(data)))
        match draw(st.sampled_from(["flip", "cut", "insert", "double"])):
            case "flip" if at < len(data):
                data[at] = draw(st.integers(0, 255))
            case "cut":
                del data[at : at + draw(st.integers(1, 40))]
            case "insert":
                data[at:at] = draw(st.binary(max_size=8))
            case "double":
                data[at:at] = data[max(0, at - 30) : at]
    return bytes(data)


@st.composite
def node_logs(draw):
    """Logs in the form of the node interface, with repeated headers."""
    rows = []
    for i in range(draw(st.integers(0, 12))):
        if draw(st.integers(0, 5)) == 0:
            rows.append("time,pack_voltage_V,pack_current_mA,boot")
        stamp = draw(st.sampled_from([str(1_780_000_000 + i), f"2026-05-28T20:26:{i:02d}Z", "2000-01-01T00:00:00Z"]))
        rows.append(f"{stamp},{draw(st.floats(0, 20)):.2f},{draw(st.integers(-900, 900))},{draw(st.integers(1, 2))}")
    end = draw(st.sampled_from(["", "\n"]))
    return ("\n".join(["time,pack_voltage_V,pack_current_mA,boot", *rows]) + end).encode()
