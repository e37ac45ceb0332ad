"""Check values: RFC 3339, section 5.8; daylight-saving dates of the IANA time zone database."""

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest

from hub.errors import PayloadError, UsageError
from hub.telemetry import logtime
from hub.telemetry.logtime import check_format, clock, native_ms, rfc3339_ms, unix_milliseconds, unix_ms


def utc_ms(*parts):
    return round(datetime(*parts, tzinfo=UTC).timestamp() * 1000)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1985-04-12T23:20:50.52Z", utc_ms(1985, 4, 12, 23, 20, 50, 520_000)),
        ("1996-12-19T16:39:57-08:00", utc_ms(1996, 12, 20, 0, 39, 57)),
        ("1990-12-31T23:59:60Z", utc_ms(1991, 1, 1)),
        ("1990-12-31T15:59:60-08:00", utc_ms(1991, 1, 1)),
        ("1937-01-01T12:00:27.87+00:20", utc_ms(1937, 1, 1, 11, 40, 27, 870_000)),
        ("2026-06-01t10:00:00z", utc_ms(2026, 6, 1, 10)),
        ("2026-06-01 10:00:00-00:00", utc_ms(2026, 6, 1, 10)),
        ("2026-06-01T10:00:00.1234567891Z", utc_ms(2026, 6, 1, 10, 0, 0, 123_000)),
    ],
)
def test_times_of_rfc_3339(text, expected):
    assert rfc3339_ms(text) == expected
    assert native_ms(text) == expected


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("2026-06-01T10:00:00", "no offset from UTC"),
        ("2026-06-01 10:00", "no offset from UTC"),
        ("01/06/2026 10:00", "not guessed"),
        ("2026-13-01T10:00:00Z", "does not exist"),
        ("2026-02-29T10:00:00Z", "does not exist"),
        ("0001-01-01T00:00:00+23:00", None),
        ("2026-06-01T10:00:00+25:00", "does not exist"),
        ("", "not guessed"),
    ],
)
def test_what_is_no_time_of_rfc_3339(text, sentence):
    if sentence is None:
        assert rfc3339_ms(text) < 0
        return
    with pytest.raises(PayloadError, match=sentence):
        rfc3339_ms(text)


def test_unix_times():
    assert unix_ms("1780000000") == native_ms("1780000000") == 1_780_000_000_000
    assert unix_ms("1780000000.25") == 1_780_000_000_250
    assert unix_milliseconds("1780000000250") == 1_780_000_000_250
    for text in ("1780000000250", "nan", "inf", "x", "1e300"):
        with pytest.raises(PayloadError):
            unix_ms(text)


def berlin(rule=None):
    return clock("%d.%m.%Y %H:%M", "Europe/Berlin", None, rule)


def test_a_pattern_with_a_zone():
    assert berlin()("01.06.2026 12:00") == utc_ms(2026, 6, 1, 10)
    assert clock("%Y-%m-%d %H:%M:%S", None, "+01:00")("2026-06-01 12:00:00") == utc_ms(2026, 6, 1, 11)
    assert clock("%Y-%m-%d %H:%M:%S", None, "Z")("2026-06-01 12:00:00") == utc_ms(2026, 6, 1, 12)
    assert clock("%Y-%m-%d %H:%M:%S%z")("2026-06-01 12:00:00-0200") == utc_ms(2026, 6, 1, 14)
    with pytest.raises(PayloadError, match="state timezone or utc_offset"):
        clock("%Y-%m-%d %H:%M")("2026-06-01 12:00")
    with pytest.raises(PayloadError, match="not written as"):
        berlin()("2026-06-01 12:00")


def test_the_skipped_hour_does_not_exist():
    with pytest.raises(PayloadError, match="went forward"):
        berlin("order")("29.03.2026 02:30")


def test_the_repeated_hour_is_set_aside_without_a_rule():
    read = berlin()
    assert read("25.10.2026 01:59") == utc_ms(2026, 10, 24, 23, 59)
    with pytest.raises(PayloadError, match="came twice"):
        read("25.10.2026 02:30")
    assert read("25.10.2026 03:00") == utc_ms(2026, 10, 25, 2)


@pytest.mark.parametrize(("zone", "month", "day"), [("Europe/Berlin", 10, 25), ("Australia/Sydney", 4, 5)])
@pytest.mark.parametrize("step_min", [1, 5, 30])
def test_by_the_order_of_rows_the_long_day_has_25_hours(zone, month, day, step_min):
    start = datetime(2026, month, day, tzinfo=ZoneInfo(zone)).astimezone(UTC)
    end = datetime(2026, month, day + 1, tzinfo=ZoneInfo(zone)).astimezone(UTC)
    assert end - start == timedelta(hours=25)
    instants = [start + timedelta(minutes=step_min * i) for i in range(25 * 60 // step_min)]
    read = clock("%Y-%m-%d %H:%M", zone, None, "order")
    written = [at.astimezone(ZoneInfo(zone)).strftime("%Y-%m-%d %H:%M") for at in instants]
    assert [read(text) for text in written] == [round(at.timestamp() * 1000) for at in instants]


def test_rows_that_repeat_a_minute_are_no_step_back():
    read = berlin("order")
    texts = ["25.10.2026 01:59", "25.10.2026 02:00", "25.10.2026 02:00", "25.10.2026 02:01"]
    assert [read(text) for text in texts] == [
        utc_ms(2026, 10, 24, 23, 59 + m) if m == 0 else utc_ms(2026, 10, 25, 0, m - 1) for m in (0, 1, 1, 2)
    ]


def test_hourly_rows_show_no_step_and_stay_undecided():
    read = berlin("order")
    read("25.10.2026 01:00")
    for _ in range(2):
        with pytest.raises(PayloadError, match="came twice"):
            read("25.10.2026 02:00")
    assert read("25.10.2026 03:00") == utc_ms(2026, 10, 25, 2)


def test_the_long_day_of_five_minute_rows_has_300_of_them():
    start = datetime(2026, 10, 25, tzinfo=ZoneInfo("Europe/Berlin")).astimezone(UTC)
    end = datetime(2026, 10, 26, tzinfo=ZoneInfo("Europe/Berlin")).astimezone(UTC)
    assert (end - start) // timedelta(minutes=5) == 300


def test_a_log_that_begins_in_the_repeated_hour_stays_undecided_until_the_step_is_seen():
    read = berlin("order")
    for text in ("25.10.2026 02:30", "25.10.2026 02:50"):
        with pytest.raises(PayloadError, match="came twice"):
            read(text)
    assert read("25.10.2026 02:10") == utc_ms(2026, 10, 25, 1, 10)


def test_a_gap_of_an_hour_before_the_repeated_hour_is_not_guessed():
    read = berlin("order")
    read("25.10.2026 01:00")
    with pytest.raises(PayloadError, match="came twice"):
        read("25.10.2026 02:30")


@pytest.mark.parametrize(
    ("arguments", "sentence"),
    [
        (("%d.%m.%Y %H:%M", None, None, None), "exactly one of"),
        (("%d.%m.%Y %H:%M", "Europe/Berlin", "+01:00", None), "exactly one of"),
        (("%d.%m.%Y %H:%M %z", "Europe/Berlin", None, None), "exactly one of"),
        (("%d.%m.%Y", "Europe/Berlin", None, None), "leaves out part"),
        (("%H:%M", "Europe/Berlin", None, None), "leaves out part"),
        (("iso", "Europe/Berlin", None, None), "no date pattern|leaves out part"),
        (("%Q", "Europe/Berlin", None, None), "no date pattern"),
        (("%d.%m.%Y %H:%M", "Mars/Olympus", None, None), "no time zone"),
        (("%d.%m.%Y %H:%M", "../etc/passwd", None, None), "no time zone"),
        (("%d.%m.%Y %H:%M", None, "1h", None), "not of the form"),
        (("%d.%m.%Y %H:%M", None, "+24:00", None), "not of the form"),
        (("%d.%m.%Y %H:%M", None, "+01:00", "order"), "rule goes with timezone"),
        (("unix", "Europe/Berlin", None, None), "Only a date pattern"),
    ],
)
def test_forms_that_do_not_fix_the_instant_are_refused(arguments, sentence):
    with pytest.raises(UsageError, match=sentence):
        check_format(*arguments)


@pytest.mark.parametrize(
    "arguments",
    [
        (None, None, None, None),
        ("unix-ms", None, None, None),
        ("%d.%m.%Y %H:%M:%S", "Europe/Berlin", None, "order"),
        ("%d/%m/%y %H:%M", None, "-03:30", None),
        ("%Y-%m-%dT%H:%M:%S%z", None, None, None),
    ],
)
def test_forms_that_do(arguments):
    check_format(*arguments)
    assert callable(logtime.clock(*arguments))
