import datetime as dt
from typing import Annotated, Literal

import pytest
from hypothesis import given
from hypothesis import strategies as st
from msgspec import UNSET, Meta, Struct, UnsetType, field

from hub.stated import convert, must_be, nearest, slips, struct_of

words = st.text("abcd", max_size=6)


class Inner(Struct, frozen=True):
    share: Annotated[float, Meta(ge=0, le=1)] = 0.5
    kind: Literal["one", "two", "three"] = "one"


class Outer(Struct, frozen=True):
    number: Annotated[int, Meta(ge=1)]
    inner: Inner = field(default_factory=Inner)
    at: Annotated[dt.datetime, Meta(tz=True)] | UnsetType = UNSET
    day: dt.date | UnsetType = UNSET
    name: Annotated[str, Meta(pattern=r"\A[a-z]+\Z", description="small letters")] = "x"


@pytest.mark.parametrize(
    ("one", "other", "count"),
    [
        ("port", "port", 0),
        ("prot", "port", 1),
        ("pot", "port", 1),
        ("porrt", "port", 1),
        ("pork", "port", 1),
        ("", "port", 4),
        # The example that tells optimal string alignment from the unrestricted distance, where it is 2.
        ("ca", "abc", 3),
    ],
)
def test_slips_are_letters_left_out_added_changed_or_swapped(one, other, count):
    assert slips(one, other) == count


@given(words, words)
def test_slips_are_the_same_both_ways_and_no_more_than_letters(one, other):
    assert slips(one, other) == slips(other, one)
    assert (slips(one, other) == 0) == (one == other)
    assert abs(len(one) - len(other)) <= slips(one, other) <= max(len(one), len(other))


KEYS = ["embedded", "kind", "listen", "host", "port", "root", "tls", "latitude", "altitude_m"]


@pytest.mark.parametrize(
    ("word", "meant"),
    [("prot", "port"), ("hots", "host"), ("listn", "listen"), ("Root", "root"), ("altitude", "altitude_m"), ("latitud", "latitude")],
)  # fmt: skip
def test_the_word_that_was_meant(word, meant):
    assert nearest(word, KEYS) == f" Did you mean “{meant}”?"


def test_without_a_likely_word_all_are_told():
    assert nearest("xyzzy", ["host", "port"]) == " Known here: host, port."
    assert nearest("", ["host"]) == " Known here: host."


def test_what_is_right_is_converted():
    found = convert({"number": 3, "inner": {"share": 1}, "name": "ab"}, Outer)
    assert found == Outer(3, Inner(1.0), name="ab")


@pytest.mark.parametrize(
    ("document", "sentence"),
    [
        ({}, "number is missing"),
        ({"number": 0}, "number must be a whole number of at least 1, not 0"),
        ({"number": "3"}, "number must be a whole number of at least 1, not “3”"),
        ({"number": 1.5}, "number must be a whole number of at least 1, not 1.5"),
        ({"number": False}, "number must be a whole number of at least 1, not false"),
        ({"number": 1, "inner": 5}, "inner must be a table of keys, not 5"),
        ({"number": 1, "inner": {"share": 2}}, "inner.share must be a number from 0 to 1, not 2"),
        ({"number": 1, "inner": {"share": float("nan")}}, "inner.share must be a number from 0 to 1, not nan"),
        ({"number": 1, "inner": {"share": float("-inf")}}, "inner.share must be a number from 0 to 1, not -inf"),
        ({"number": 1, "inner": {"kind": "four"}}, "inner.kind must be “one”, “two” or “three”, not “four”"),
        ({"number": 1, "inner": {"kind": ["one"]}}, "inner.kind must be “one”, “two” or “three”, not a list"),
        ({"number": 1, "inner": {"kind": {}}}, "inner.kind must be “one”, “two” or “three”, not a table"),
        ({"number": 1, "name": "A"}, "name must be small letters, not “A”"),
        ({"number": 1, "name": "y" * 50 + "Z"}, f"name must be small letters, not “{'y' * 40}…”"),
        ({"number": 1, "day": "x"}, "day must be a date, such as 2026-03-01, not “x”"),
        ({"number": 1, "at": dt.datetime(2026, 3, 1)}, "at must be an instant with its zone, such as 2026-03-01T09:00:00Z, not 2026-03-01T00:00:00"),  # noqa: DTZ001 - the fault in question
        ({"number": 1, "at": dt.time(9)}, "at must be an instant with its zone, such as 2026-03-01T09:00:00Z, not 09:00:00"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_told_by_key_by_what_it_must_be_and_by_what_it_is(document, sentence):
    with pytest.raises(ValueError, match=r"must be|is missing") as caught:
        convert(document, Outer)
    assert str(caught.value) == sentence


@pytest.mark.parametrize(
    ("hint", "words"),
    [
        (int, "a whole number"),
        (bool, "true or false"),
        (str, "text in quotation marks"),
        (Annotated[str, Meta(max_length=9)], "text in quotation marks of 0 to 9 characters"),
        (Annotated[float, Meta(gt=0)], "a number above 0"),
        (Annotated[float, Meta(gt=0, le=365)] | UnsetType, "a number above 0 and at most 365"),
        (Annotated[int, Meta(le=9)], "a whole number of at most 9"),
        (Literal["x"], "“x”"),
        (list[int], "something else"),
    ],
)
def test_what_a_key_may_hold(hint, words):
    assert must_be(hint) == words


def test_the_structure_within_a_hint():
    assert struct_of(Inner) is struct_of(Annotated[Inner, "x"]) is struct_of(Inner | UnsetType) is Inner
    assert struct_of(int) is struct_of(None) is None
