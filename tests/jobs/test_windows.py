import datetime as dt
from itertools import pairwise
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.jobs.windows import DayWindow, local_day, windows
from hub.store.inventory import Fitting

HOUR_MS = 3_600_000


def hours_of(start: str, end: str) -> range:
    first, last = (int(dt.datetime.fromisoformat(text).timestamp() // 3600) for text in (start, end))
    return range(first, last + 1)


@pytest.mark.parametrize(
    ("date", "zone", "hours"),
    [
        # EU rules: the last Sundays of March and October. Australia's south-east: first Sundays of October and April.
        ("2026-03-29", "Europe/Berlin", 23),
        ("2026-10-25", "Europe/Berlin", 25),
        ("2026-10-04", "Australia/Sydney", 23),
        ("2026-04-05", "Australia/Sydney", 25),
        ("2026-06-21", "Europe/Berlin", 24),
    ],
)
def test_a_local_day_has_the_hours_that_its_zone_gives_it(date, zone, hours):
    start, end = local_day(dt.date.fromisoformat(date), ZoneInfo(zone))
    assert (end - start) / HOUR_MS == hours


def test_a_day_is_cut_where_another_pack_was_fitted():
    noon, three = (int(dt.datetime(2026, 6, 1, hour, 10, tzinfo=dt.UTC).timestamp() * 1000) for hour in (12, 15))
    fittings = (Fitting("A", "n", 0, noon), Fitting("B", "n", three))
    found = list(windows(hours_of("2026-06-01T05:00Z", "2026-06-01T20:00Z"), "UTC", fittings))
    midnight = noon - 12 * HOUR_MS - 10 * 60_000
    assert found == [
        DayWindow(midnight, noon, "2026-06-01", "A"),
        DayWindow(noon, three, "2026-06-01", None),
        DayWindow(three, midnight + 24 * HOUR_MS, "2026-06-01", "B"),
    ]


def test_a_zone_that_is_not_whole_hours_from_utc_opens_both_days_of_an_hour():
    # 18:00 to 19:00 UTC is 23:45 to 00:45 in Kathmandu.
    found = list(windows(hours_of("2026-06-01T18:00Z", "2026-06-01T18:00Z"), "Asia/Kathmandu", ()))
    assert [w.date for w in found] == ["2026-06-01", "2026-06-02"]


@given(
    st.sets(st.integers(min_value=490_000, max_value=495_000), max_size=40),
    st.sampled_from(["UTC", "Europe/London", "Asia/Kathmandu", "Australia/Lord_Howe", "America/St_Johns"]),
    st.lists(st.integers(min_value=490_000 * 60, max_value=495_000 * 60), unique=True, max_size=6),
)
def test_windows_follow_each_other_and_hold_every_hour(hours, zone, changes):
    edges = sorted(minute * 60_000 for minute in changes)
    fittings = [Fitting(f"P{i}", "n", a, b) for i, (a, b) in enumerate(pairwise(edges))]
    found = list(windows(hours, zone, fittings))
    assert all(a.end_ms <= b.start_ms for a, b in pairwise(found))
    assert all(w.start_ms < w.end_ms for w in found)
    for hour in hours:
        middle = hour * HOUR_MS + HOUR_MS // 2
        assert sum(w.start_ms <= middle < w.end_ms for w in found) == 1
    for window in found:
        inside = [f.pack for f in fittings if f.start_ms <= window.start_ms and f.end_ms >= window.end_ms]
        assert window.pack == (inside[0] if inside else None)
