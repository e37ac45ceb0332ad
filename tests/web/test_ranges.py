import datetime as dt
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.errors import UsageError
from hub.web.ranges import NAMES, chosen

LONDON = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000  # 2026-06-01T12:02:00Z
DAY = 86_400_000
KNOWN = (NOW - 40 * DAY, NOW)


def pick(kind="1d", to=None, known=KNOWN):
    return chosen(kind, to, NOW, LONDON, known)


def test_without_a_date_it_ends_now():
    found = pick("7d")
    assert (found.start_ms, found.end_ms) == (NOW - 7 * DAY, NOW)
    assert found.words == "the last 7 days"
    assert found.earlier == dt.date(2026, 5, 25)
    assert found.later is None


def test_a_date_gives_whole_local_days():
    found = pick("1d", "2026-05-20")
    assert found.end_ms - found.start_ms == DAY
    assert dt.datetime.fromtimestamp(found.start_ms / 1000, LONDON).hour == 0
    assert found.words.replace("\u00a0", " ") == "Wed 20 May 2026"
    assert (found.earlier, found.later) == (dt.date(2026, 5, 19), dt.date(2026, 5, 21))


def test_the_day_of_the_clock_change_is_23_hours():
    found = chosen("1d", "2026-03-29", NOW, LONDON, (0, NOW))
    assert found.end_ms - found.start_ms == 23 * 3_600_000


def test_neighbours_join_without_gap_or_overlap():
    found = pick("7d", "2026-05-20")
    before = pick("7d", found.earlier.isoformat())
    assert before.end_ms == found.start_ms


def test_there_is_nothing_earlier_than_the_first_reading():
    assert pick("28d", "2026-04-25").earlier is None
    assert pick(known=None).earlier is None


def test_later_never_goes_beyond_today():
    assert pick("7d", "2026-05-30").later == dt.date(2026, 6, 1)
    assert pick("7d", "2026-06-01").later is None
    assert pick("7d", "2030-01-01") == pick("7d")


def test_all_begins_with_the_first_reading():
    found = pick("all")
    assert found.first == dt.date(2026, 4, 22)
    assert found.end_ms == NOW
    assert found.words == "all that is known"
    fresh = chosen("all", None, NOW, LONDON, None)
    assert fresh.end_ms - fresh.start_ms == DAY


@pytest.mark.parametrize(
    ("kind", "to"), [("2d", None), ("", None), ("1d", "yesterday"), ("1d", "1999-12-31"), ("1d", "9999-12-31")]
)
def test_what_cannot_be_read_is_refused_with_what_can(kind, to):
    with pytest.raises(UsageError, match=r"There is no range|is not a date like 2026-03-01"):
        pick(kind, to)


@given(st.sampled_from(sorted(NAMES)), st.dates(dt.date(2000, 1, 1), dt.date(2200, 12, 31)))
def test_a_range_is_never_empty(kind, to):
    found = pick(kind, to.isoformat())
    assert found.start_ms < found.end_ms
    assert found.first <= found.last
