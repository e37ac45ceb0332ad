import datetime as dt
from zoneinfo import ZoneInfo

from hypothesis import given
from hypothesis import strategies as st

from hub.web.axis import axis
from hub.web.days import start_of

BERLIN = ZoneInfo("Europe/Berlin")
HOUR, DAY = 3_600_000, 86_400_000


def at(text: str) -> int:
    return round(dt.datetime.fromisoformat(text).replace(tzinfo=BERLIN).timestamp() * 1000)


def words(start: int, end: int) -> list[str]:
    return [label.text for label in axis(start, end, BERLIN).labels]


def test_a_day_is_ruled_in_hours_of_the_local_clock():
    assert words(at("2026-06-01"), at("2026-06-02")) == [f"{hour:02d}:00" for hour in range(3, 24, 3)]


def test_the_short_and_the_long_day_keep_their_midnights():
    for first, hours in ((dt.date(2026, 3, 29), 23), (dt.date(2026, 10, 25), 25)):
        start, end = start_of(first, BERLIN), start_of(first + dt.timedelta(days=1), BERLIN)
        assert end - start == hours * HOUR
        heavy = [rule.time_ms for rule in axis(start, end, BERLIN).rules if rule.heavy]
        assert heavy == [start, end]


def test_a_week_is_ruled_at_midnights_and_named_at_noon():
    start = at("2026-05-25T13:00")
    drawn = axis(start, start + 7 * DAY, BERLIN)
    assert sum(rule.heavy for rule in drawn.rules) == 7
    assert words(start, start + 7 * DAY) == ["Tue 26", "Wed 27", "Thu 28", "Fri 29", "Sat 30", "Sun 31"]


def test_weeks_are_named_at_their_mondays():
    assert words(at("2026-05-04T12:00"), at("2026-06-01T12:00")) == ["11 May", "18 May", "25 May"]


def test_a_life_is_named_by_months_and_years():
    assert words(at("2025-09-15"), at("2026-04-15")) == ["Oct", "Nov", "Dec", "2026", "Feb", "Mar", "Apr"]
    assert words(at("2022-06-15"), at("2026-04-15")) == ["2023", "2024", "2025", "2026"]


@given(st.integers(0, 4_000_000_000_000), st.integers(HOUR, 4000 * DAY))
def test_marks_lie_on_the_paper_in_order_and_are_few(start, span):
    drawn = axis(start, start + span, BERLIN)
    for marks in (drawn.rules, drawn.labels):
        times = [mark.time_ms for mark in marks]
        assert times == sorted(times)
        assert all(start <= time <= start + span for time in times)
    assert len(drawn.labels) <= 13
    assert len(drawn.rules) <= 140
