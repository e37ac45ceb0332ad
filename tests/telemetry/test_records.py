"""Check values: RFC 8428, sections 4.1 to 4.5; RFC 9100, sections 2 and 4 (versions as sums of features)."""

import pytest

from hub.errors import PayloadError
from hub.telemetry.records import SECONDARY_UNITS, VERSION, combined


def names(records):
    return [record.name for record in combined(records, None)]


def test_a_base_field_holds_until_the_next_of_its_kind():
    records = [
        {"n": "a", "v": 1},
        {"bn": "x:", "n": "a", "v": 1},
        {"n": "b", "v": 1},
        {"bn": "", "n": "c", "v": 1},
        {"bn": "y", "v": 1},
    ]
    assert names(records) == ["a", "x:a", "x:b", "c", "y"]
    units = [
        r.unit
        for r in combined([{"n": "a", "v": 1, "bu": "V"}, {"n": "a", "v": 1, "u": "A"}, {"n": "a", "v": 1}], None)
    ]
    assert units == ["V", "A", "V"]
    times = [
        r.at_s
        for r in combined(
            [{"n": "a", "v": 1, "t": 5}, {"n": "a", "v": 1, "bt": 100}, {"n": "a", "v": 1, "t": -1}], None
        )
    ]
    assert times == [5, 100, 99]


def test_a_base_field_counts_even_in_a_record_that_cannot_be_read():
    remarks = []
    assert [r.name for r in combined([{"bn": "x:", "n": "a", "v": "?"}, {"n": "b", "v": 1}], remarks)] == ["x:b"]
    assert [r.reason for r in remarks] == ["malformed"]


def test_records_that_only_set_base_fields_are_none():
    assert names([{"bn": "x:", "bt": 5}, {}, {"future": 1}]) == []


def test_the_version_with_secondary_units_is_the_sum_of_its_features():
    assert VERSION == 2**1 + 2**3  # the reserved features 1 and 3
    assert SECONDARY_UNITS == 2**4
    assert names([{"bver": VERSION + SECONDARY_UNITS, "n": "a", "u": "mV", "v": 1}]) == ["a"]


@pytest.mark.parametrize(
    ("record", "sentence"),
    [
        ({"n": "a"}, r"Record 1 \(“a”\) has no value; a record carries exactly one value\."),
        ({"n": "a", "v": 1, "vs": "x"}, "has v and vs"),
        ({"n": "a", "v": "1"}, "without quotation marks"),
        ({"n": "a b", "v": 1}, "“a b” is not allowed"),
        ({"v": 1}, "has no name"),
        ({"n": "a", "v": 1, "t": float("nan")}, "field t of “a” is no finite number"),
        ({"n": "a", "v": 1, "ut": "x"}, "field ut of “a” is no finite number"),
        ({"n": "a", "v": 1, "t": 2e11}, "is no time"),
        ({"n": "a", "v": 1, "x_": 1}, "“x_”, which must be understood"),
        ([], "Record 1 is no object"),
    ],
)
def test_what_is_wrong_with_a_record_is_said_in_one_sentence(record, sentence):
    with pytest.raises(PayloadError, match=sentence):
        list(combined([record], None))
