import datetime as dt
from zoneinfo import ZoneInfo

from hub.web.days import Day, by_date, date_back, last_days, local_date, start_of

BERLIN = ZoneInfo("Europe/Berlin")
HOUR_MS = 3_600_000


def row(date, start_h, end_h, observed_h, full_at_ms=None):
    return {
        "date": date,
        "start_ms": start_h * HOUR_MS,
        "end_ms": end_h * HOUR_MS,
        "observed_s": observed_h * 3600,
        "full_at_ms": full_at_ms,
    }


def test_the_local_date_is_the_site_s():
    late = 1_772_406_000_000  # 2026-03-01T23:00:00Z
    assert local_date(late, BERLIN) == dt.date(2026, 3, 2)
    assert local_date(late, ZoneInfo("UTC")) == dt.date(2026, 3, 1)
    assert date_back(late, BERLIN, 7) == dt.date(2026, 2, 23)


def test_days_have_23_24_and_25_hours():
    # Europe/Berlin 2026: 29 March and 25 October.
    for date, hours in ((dt.date(2026, 3, 29), 23), (dt.date(2026, 3, 30), 24), (dt.date(2026, 10, 25), 25)):
        length = start_of(date + dt.timedelta(days=1), BERLIN) - start_of(date, BERLIN)
        assert length == hours * HOUR_MS


def test_two_rows_of_one_date_are_one_day():
    days = by_date([row("2026-03-01", 0, 10, 10), row("2026-03-01", 10, 24, 7, 55), row("2026-03-02", 24, 48, 24, 99)])
    assert days["2026-03-01"] == Day("2026-03-01", 17 / 24, 55)
    assert days["2026-03-02"] == Day("2026-03-02", 1.0, 99)


def test_the_first_full_charge_of_a_day_counts():
    days = by_date([row("2026-03-01", 0, 10, 10, 70), row("2026-03-01", 10, 24, 7, 55)])
    assert days["2026-03-01"].full_at_ms == 55


def test_coverage_is_never_more_than_whole():
    assert by_date([row("2026-03-01", 0, 24, 25)])["2026-03-01"].coverage == 1.0
    assert by_date([row("2026-03-01", 5, 5, 0)])["2026-03-01"].coverage == 0.0


def test_days_nobody_knows_are_there_without_coverage():
    known = {"2026-02-27": Day("2026-02-27", 1.0)}
    found = last_days(known, dt.date(2026, 3, 1), 3)
    assert [day.date for day in found] == ["2026-02-26", "2026-02-27", "2026-02-28"]
    assert [day.coverage for day in found] == [None, 1.0, None]
