"""Check values: RFC 4180, section 2, rules 5 to 7."""

import pytest

from hub.errors import PayloadError
from hub.telemetry.cells import decimals, number, split


@pytest.mark.parametrize(
    ("text", "delimiter", "expected"),
    [
        ("a,b,c", ",", ["a", "b", "c"]),
        ("a,,", ",", ["a", "", ""]),
        ('"aaa","b,bb","c""c"', ",", ["aaa", "b,bb", 'c"c']),
        ("1,5;2", ";", ["1,5", "2"]),
        (" a , b ", ",", [" a ", " b "]),
        ("2026  1   3.5 ", " ", ["2026", "1", "3.5"]),
    ],
)
def test_cells_of_a_line(text, delimiter, expected):
    assert split(text, delimiter) == expected


@pytest.mark.parametrize("text", ['"a', '"a"b,c', 'a,"b'])
def test_an_open_quotation_mark_is_a_torn_line(text):
    with pytest.raises(PayloadError, match="torn"):
        split(text, ",")


@pytest.mark.parametrize(
    ("cell", "decimal", "expected"),
    [
        ("10.41", ".", 10.41),
        ("-4.8e-1", ".", -0.48),
        (" 7 ", ".", 7),
        ("10,41", ",", 10.41),
        ("1.33770632e0", ".", 1.33770632),
    ],
)
def test_numbers(cell, decimal, expected):
    assert number(cell, decimal) == expected


@pytest.mark.parametrize(
    ("cell", "decimal"),
    [("", "."), ("x", "."), ("1_0", "."), ("\uff11", "."), ("1,5", "."), ("1.234,5", ","), ("1,2,3", ",")],
)
def test_what_is_no_number(cell, decimal):
    with pytest.raises(ValueError, match=r".*"):
        number(cell, decimal)


def test_decimals_are_counted_behind_the_sign():
    assert [decimals(c) for c in ("10.41", "10", "10.", " 1.5 ")] == [2, 0, 0, 1]
    assert decimals("10,412", ",") == 3
