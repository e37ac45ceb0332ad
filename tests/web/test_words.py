from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.web import words

LONDON, KOLKATA, SAO_PAULO = ZoneInfo("Europe/London"), ZoneInfo("Asia/Kolkata"), ZoneInfo("America/Sao_Paulo")
MARCH_MS = 1_772_355_600_000  # 2026-03-01T09:00:00Z
JULY_MS = 1_782_907_200_000  # 2026-07-01T12:00:00Z
N = "\u00a0"


@pytest.mark.parametrize(
    ("value", "decimals", "text"),
    [
        (2.104, 1, "2.1"),
        (-0.25, 2, "\u22120.25"),
        (-0.004, 2, "0.00"),
        (-0.0, 1, "0.0"),
        (1234.5, 0, "1234"),
        (0.5, 0, "0"),
    ],
)
def test_numbers(value, decimals, text):
    assert words.number(value, decimals) == text


@given(st.floats(-1e9, 1e9), st.integers(0, 6))
def test_a_number_reads_back_to_what_it_was_rounded_to(value, decimals):
    text = words.number(value, decimals).replace(words.MINUS, "-")
    assert abs(float(text) - value) <= 0.5 * 10**-decimals + 1e-6


def test_an_unknown_figure_is_never_a_nought_or_a_dash():
    assert words.figure(None, "Ah") == words.figure(float("nan"), "Ah") == words.percent(None) == "not known"
    assert words.figure(0.0, "Ah", 1) == f"0.0{N}Ah"
    assert words.percent(0.876) == f"88{N}%"


@pytest.mark.parametrize(
    ("ms", "text"),
    [
        (0, "0 s"),
        (-5, "0 s"),
        (59_400, "59 s"),
        (59_600, "1 min"),
        (119 * 60_000, "119 min"),
        (2 * 3_600_000, "2 h"),
        (2 * 3_600_000 + 600_000, "2 h 10 min"),
        (31 * 3_600_000 + 600_000, "31 h"),
        (48 * 3_600_000, "2 days"),
        (400 * 86_400_000, "400 days"),
    ],
)
def test_durations(ms, text):
    assert words.duration(ms) == text.replace(" ", N).replace(f"h{N}", "h ")


def test_counts_and_lists():
    assert words.count(1, "day") == f"1{N}day"
    assert words.count(0, "day") == f"0{N}days"
    assert words.listed([]) == ""
    assert words.listed(["a"]) == "a"
    assert words.listed(["a", "b", "c"]) == "a, b and c"


def test_dates():
    assert words.day_words("2026-03-01") == f"1{N}Mar{N}2026"
    assert words.day_words("2026-03-01", weekday=True) == f"Sun{N}1{N}Mar{N}2026"
    assert words.day_words("2026-03-01", weekday=True, year=False) == f"Sun{N}1{N}Mar"


def test_a_moment_names_its_zone_and_gives_utc():
    winter, summer = words.moment(MARCH_MS, LONDON), words.moment(JULY_MS, LONDON)
    assert (winter.clock, winter.zone) == ("09:00", "GMT")
    assert (summer.clock, summer.zone) == ("13:00", "BST")
    assert summer.utc == "2026-07-01 12:00:00 UTC"
    assert summer.machine == "2026-07-01T12:00:00Z"


def test_a_zone_without_letters_is_named_by_its_offset():
    assert words.moment(JULY_MS, SAO_PAULO).zone == "UTC\u221203:00"
    assert words.moment(JULY_MS, KOLKATA).zone == "IST"
    assert words.offset(words.moment(JULY_MS, KOLKATA).local) == "UTC+05:30"


def test_both_hours_of_an_autumn_night_can_be_told_apart():
    # 2026-10-25: at 01:00 UTC the clocks of London go from 02:00 back to 01:00.
    first, second = 1_792_888_200_000, 1_792_891_800_000
    assert words.moment(first, LONDON).clock == words.moment(second, LONDON).clock == "01:30"
    assert words.when(first, LONDON, first) == f"01:30{N}BST"
    assert words.when(second, LONDON, second) == f"01:30{N}GMT"


def test_when_says_as_much_of_the_date_as_is_needed():
    day = 86_400_000
    assert words.when(MARCH_MS, LONDON, MARCH_MS + 3_600_000) == f"09:00{N}GMT"
    assert words.when(MARCH_MS, LONDON, MARCH_MS + day) == f"yesterday 09:00{N}GMT"
    assert words.when(MARCH_MS, LONDON, MARCH_MS + 3 * day) == f"Sun 09:00{N}GMT"
    assert words.when(MARCH_MS, LONDON, MARCH_MS + 9 * day) == f"1{N}Mar{N}2026, 09:00{N}GMT"
    assert words.when(MARCH_MS, LONDON) == f"1{N}Mar{N}2026, 09:00{N}GMT"


def test_a_stamp_is_an_element_with_utc():
    text = str(words.stamp(JULY_MS, LONDON, JULY_MS))
    assert text == f'<time datetime="2026-07-01T12:00:00Z" title="2026-07-01 12:00:00 UTC">13:00{N}BST</time>'
    assert f">13:00{N}BST<" in words.stamp(JULY_MS, LONDON, short_after=JULY_MS - 3_600_000)
    assert f">1{N}Jul{N}2026, 13:00{N}BST<" in words.stamp(JULY_MS, LONDON, short_after=JULY_MS - 86_400_000)


def test_the_zone_of_a_page():
    assert words.zone_sentence(LONDON, JULY_MS) == "Times are Europe/London, now BST (UTC+01:00)."
    assert words.zone_sentence(SAO_PAULO, JULY_MS) == "Times are America/Sao_Paulo, now UTC\u221203:00."
