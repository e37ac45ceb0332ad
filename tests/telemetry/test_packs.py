"""Check values: RFC 8949, appendix A (encodings of numbers)."""

import time

import cbor2
import pytest

from hub.errors import PayloadError
from hub.telemetry import packs


@pytest.mark.parametrize(
    ("payload", "content"),
    [
        (b"[]", "json"),
        (b" \r\n[", "json"),
        (b"\xef\xbb\xbf[]", "json"),
        (b"{}", "json"),
        (b"\x80", "cbor"),
        (b"\x9f\xff", "cbor"),
        (b"\xd9\xd9\xf7\x80", "cbor"),
    ],
)
def test_the_first_byte_tells_the_encoding(payload, content):
    assert packs.sniff(payload) == content


@pytest.mark.parametrize("payload", [b"", b"online", b"\x00", b"12.5", b"\xff\xfe[\x00"])
def test_what_begins_neither_is_refused(payload):
    with pytest.raises(PayloadError, match=r"\.$"):
        packs.sniff(payload)


@pytest.mark.parametrize(
    ("encoded", "value"),
    [
        ("fb3ff199999999999a", 1.1),
        ("f93e00", 1.5),
        ("fa47c35000", 100_000.0),
        ("fbc010666666666666", -4.1),
        ("c48221196ab3", 273.15),  # RFC 8949, section 3.4.4: decimal fraction
        ("c24401000000", 2**24),
        ("c34401000000", -1 - 2**24),
    ],
)
def test_numbers_of_cbor(encoded, value):
    assert packs.parse_cbor(b"\x81" + bytes.fromhex(encoded)) == [value]


def test_the_mark_of_self_described_cbor_is_taken_off():
    assert packs.parse_cbor(b"\xd9\xd9\xf7\x81\xa1\x02\x01") == [{2: 1}]


@pytest.mark.parametrize(
    ("payload", "sentence"),
    [
        (b"\x87\xa7", "ends too early"),
        (b"\x80\x80", "follows the CBOR array"),
        (b"\xa0", "no array"),
        (b"\x81" * 100 + b"\x00", "not CBOR that the hub can read"),
        (b"\xff", "not CBOR that the hub can read"),
        (b"\x81\xc2\x49" + b"\x01" * 9, "not CBOR that the hub can read"),  # an integer of 72 bits
        (b"\x81\xc4\x81\x01", "not CBOR that the hub can read"),
    ],
)
def test_cbor_that_is_no_pack_is_refused(payload, sentence):
    with pytest.raises(PayloadError, match=sentence):
        packs.parse_cbor(payload)


def test_a_decimal_fraction_with_a_huge_mantissa_costs_no_time():
    mantissa = b"\xc2\x5a\x00\x0f\xff\x00" + b"\xff" * 0xFFF00  # a megabyte: minutes of arithmetic where it is built
    began = time.perf_counter()
    with pytest.raises(PayloadError):
        packs.parse_cbor(b"\x81\xc4\x82\x01" + mantissa)
    assert time.perf_counter() - began < 5


def test_a_decimal_fraction_with_a_huge_exponent_is_infinite():
    assert packs.parse_cbor(bytes.fromhex("81c4821a7fffffff01")) == [float("inf")]


@pytest.mark.parametrize("tag", [0, 1, 5, 28, 30, 35, 36, 37, 258, 999])
def test_other_tags_are_left_alone(tag):
    held = packs.parse_cbor(cbor2.dumps([cbor2.CBORTag(tag, "(")]))
    assert isinstance(held[0], cbor2.CBORTag)


@pytest.mark.parametrize(
    ("payload", "sentence"),
    [
        (b'[{"v":1}', "not whole JSON"),
        (b'[{"n":"\xff"}]', "not UTF-8"),
        (b"[" * 200_000, "nested too deeply"),
        (b'{"v":1}', "no array"),
        (b"[" + b"9" * 10_000 + b"]", "not whole JSON"),
    ],
)
def test_json_that_is_no_pack_is_refused(payload, sentence):
    with pytest.raises(PayloadError, match=sentence):
        packs.parse_json(payload)


def test_labels_of_cbor_become_those_of_json():
    labels = {
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
    }  # RFC 8428, table 6
    assert packs.labelled({number: label for label, number in labels.items()}) == {label: label for label in labels}
    assert packs.labelled({"x_": 1, True: 2, 77: 3}) == {"x_": 1, True: 2, 77: 3}


def test_numbers_are_neither_text_nor_truth():
    assert packs.number(3) == 3.0
    assert packs.number(2**2000) == float("inf")
    assert packs.number(-(2**2000)) == float("-inf")
    assert [packs.number(x) for x in (True, "3", None, [3])] == [None] * 4


def test_data_values():
    assert packs.data("aGkgCg") == b"hi \n"  # RFC 8428, section 5.1.5
    assert packs.data(b"hi \n") == b"hi \n"
    assert [packs.data(x) for x in ("a", "*", "é", 3)] == [None] * 4


@pytest.mark.parametrize("name", ["urn:dev:mac:0024befffe804ff1:pack_voltage", "2001:db8::2/temperature", "a-b.c_d"])
def test_legal_names(name):
    assert packs.legal_name(name)


@pytest.mark.parametrize("name", ["", "-a", "_a", ":a", "a b", "é", "a\n", "[2001:db8::2]"])
def test_illegal_names(name):
    assert not packs.legal_name(name)
    assert packs.illegal(name).endswith(".")
