"""Times of log lines and mapped feeds to UTC milliseconds. An offset from UTC is stated or the time is not read."""

import re
from collections.abc import Callable
from datetime import UTC, datetime, timedelta, timezone, tzinfo
from typing import Final, Literal
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from hub.errors import PayloadError, UsageError
from hub.telemetry import cells
from hub.telemetry.units import shortened

Clock = Callable[[str], int]
"""Text of a time to UTC milliseconds; raises `PayloadError` with one sentence where it is no time."""

# Seconds beyond this (the year 5138) are milliseconds or nonsense.
LATEST_S: Final = 1e11
# A row that follows another by less than this, on a night with a repeated hour, belongs to the first time round.
_HOUR: Final = timedelta(hours=1)

_MS: Final = timedelta(milliseconds=1)
_EPOCH: Final = datetime(1970, 1, 1, tzinfo=UTC)
_RFC3339: Final = re.compile(r"\d{4}-\d\d-\d\d[Tt ]\d\d:\d\d:(\d\d)(?:\.\d+)?(?:[Zz]|[+-]\d\d:\d\d)", re.ASCII)
_LOCAL: Final = re.compile(r"\d{4}-\d\d-\d\d[Tt ]\d\d:\d\d(:\d\d(\.\d+)?)?", re.ASCII)
_OFFSET: Final = re.compile(r"([+-])(\d\d):(\d\d)", re.ASCII)


def rfc3339_ms(text: str) -> int:
    """A time of RFC 3339, as ``2026-06-01T10:00:00Z``; a leap second counts as the second after it."""
    found = _RFC3339.fullmatch(text)
    if found is None:
        if _LOCAL.fullmatch(text):
            raise PayloadError(
                f"The time {shortened(text)} has no offset from UTC; add Z, or map the log with its time zone."
            )
        raise PayloadError(f"The time {shortened(text)} is neither RFC 3339 nor Unix seconds; dates are not guessed.")
    leap = found[1] == "60"
    if leap:
        text = f"{text[:17]}59{text[19:]}"
    try:
        at = datetime.fromisoformat(text.upper())
        return (at - _EPOCH) // _MS + (1000 if leap else 0)
    except (ValueError, OverflowError):
        raise PayloadError(f"The time {shortened(text)} does not exist in the calendar.") from None


def unix_ms(text: str) -> int:
    """Unix seconds, with decimals where the logger has them."""
    return _unix(text, 1000)


def unix_milliseconds(text: str) -> int:
    """Unix time in milliseconds."""
    return _unix(text, 1)


def native_ms(text: str) -> int:
    """The time column of a node log: RFC 3339 or Unix seconds."""
    return rfc3339_ms(text) if text[4:5] == "-" or not text[:1].isdigit() else unix_ms(text)


def clock(
    form: str | None,
    zone_name: str | None = None,
    utc_offset: str | None = None,
    rule: Literal["order"] | None = None,
) -> Clock:
    """A clock for times of one form: ``rfc3339``, ``unix``, ``unix-ms``, a pattern, or ``None`` for the first two."""
    if form is None or form in FORMS:
        return FORMS[form]
    zone: tzinfo | None = None
    if zone_name:
        zone = named_zone(zone_name)
    elif utc_offset:
        zone = offset_zone(utc_offset)
    return pattern_clock(form, zone, rule)


def check_format(form: str | None, zone_name: str | None, utc_offset: str | None, rule: str | None) -> None:
    """Refuse a form of times that does not fix the instant.

    Raises
    ------
    UsageError
        With one sentence on what is missing or contradicts itself.
    """
    if form is None or form in FORMS:
        if zone_name or utc_offset or rule:
            raise UsageError("Only a date pattern takes timezone, utc_offset or rule; the other formats are in UTC.")
        return
    check_pattern(form)
    if ("%z" in form) + bool(zone_name) + bool(utc_offset) != 1:
        raise UsageError(
            "A date pattern needs exactly one of %z in the pattern, timezone and utc_offset; "
            "the hub does not guess the offset from UTC."
        )
    if utc_offset:
        offset_zone(utc_offset)
    if zone_name:
        named_zone(zone_name)
    if rule and not zone_name:
        raise UsageError("rule goes with timezone; a fixed offset repeats no hour.")


def check_pattern(pattern: str) -> None:
    """Refuse a date pattern that does not fix the instant.

    Raises
    ------
    UsageError
        Where the pattern is none of Python's ``strptime``, or leaves out day, month, year or minute.
    """
    probe = datetime(2026, 10, 25, 14, 35, tzinfo=UTC)
    try:
        back = datetime.strptime(probe.strftime(pattern), pattern)  # noqa: DTZ007 - only compared
    except ValueError:
        raise UsageError(
            f"The time format {shortened(pattern)} is no date pattern; use rfc3339, unix, unix-ms or one like "
            "%d.%m.%Y %H:%M:%S."
        ) from None
    if back.replace(tzinfo=UTC) != probe:
        raise UsageError(
            f"The time format {shortened(pattern)} leaves out part of the date or the time of day; "
            "a pattern needs day, month, year, hour and minute."
        )


def offset_zone(offset: str) -> timezone:
    """A fixed offset such as ``+01:00``."""
    if offset == "Z":
        return UTC
    found = _OFFSET.fullmatch(offset)
    if found is None or int(found[2]) > 23 or int(found[3]) > 59:  # noqa: PLR2004 - hours and minutes
        raise UsageError(f"The utc_offset {shortened(offset)} is not of the form +01:00.")
    size = timedelta(hours=int(found[2]), minutes=int(found[3]))
    return timezone(size if found[1] == "+" else -size)


def named_zone(name: str) -> ZoneInfo:
    """A time zone by its name in the IANA database, such as ``Europe/Berlin``."""
    try:
        return ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise UsageError(f"There is no time zone {shortened(name)}; write one like Europe/Berlin.") from None


def pattern_clock(pattern: str, zone: tzinfo | None, rule: Literal["order"] | None) -> Clock:
    """A clock for times written by a ``strptime`` pattern, in local time of ``zone`` or with an offset of their own.

    On the night the clocks go back an hour comes twice. Without a rule its rows raise, for which of the two is meant
    cannot be seen. With ``order`` the rows of the log tell: they belong to the first time round until the local time
    steps back. A log that begins in that hour, or comes to it after a gap of an hour or more, stays undecided until
    the step is seen; so do rows an hour apart, which show no step. The clock remembers the rows, so each file needs a
    new one.
    """
    order = _Order() if rule == "order" else None

    def read(text: str) -> int:
        try:
            at = datetime.strptime(text, pattern)  # noqa: DTZ007 - the zone follows
        except ValueError:
            raise PayloadError(f"The time {shortened(text)} is not written as {pattern}.") from None
        if at.tzinfo is None:
            if zone is None:
                raise PayloadError(f"The time {shortened(text)} has no offset from UTC; state timezone or utc_offset.")
            at = _localised(at, zone, order, text)
        return (at - _EPOCH) // _MS

    return read


class _Order:
    """What the rows before tell about the repeated hour."""

    def __init__(self) -> None:
        self.before: datetime | None = None
        self.clear = False
        self.fold: int | None = None

    def decide(self, local: datetime, *, ambiguous: bool) -> int | None:
        """Which pass of a repeated hour a row belongs to: 0, 1, or ``None`` where the rows do not tell."""
        before, clear = self.before, self.clear
        self.before, self.clear = local, not ambiguous
        if not ambiguous:
            self.fold = None
        elif before is not None and timedelta(0) < before - local < _HOUR:
            self.fold = 1
        elif before is not None and clear and local - before < _HOUR:
            self.fold = 0
        return self.fold


def _localised(local: datetime, zone: tzinfo, order: _Order | None, text: str) -> datetime:
    first, second = local.replace(tzinfo=zone, fold=0), local.replace(tzinfo=zone, fold=1)
    if first.utcoffset() == second.utcoffset():
        if order:
            order.decide(local, ambiguous=False)
        return first
    if first.astimezone(UTC).astimezone(zone).replace(tzinfo=None) != local:
        raise PayloadError(f"The time {shortened(text)} does not exist there: the clocks went forward over it.")
    fold = order.decide(local, ambiguous=True) if order else None
    if fold is None:
        raise PayloadError(
            f"The time {shortened(text)} came twice that night, when the clocks went back; log in UTC, or set "
            'rule = "order" where the rows are in the order they were written.'
        )
    return second if fold else first


def _unix(text: str, factor: int) -> int:
    try:
        value = cells.number(text)
    except ValueError:
        raise PayloadError(f"The time {shortened(text)} is not a number of seconds or milliseconds.") from None
    if not -LATEST_S * 1000 < value * factor < LATEST_S * 1000:
        hint = "; these look like milliseconds, which need a mapping" if factor > 1 else ""
        raise PayloadError(f"The time {shortened(text)} is beyond any calendar{hint}.")
    return round(value * factor)


FORMS: Final[dict[str | None, Clock]] = {
    None: native_ms,
    "rfc3339": rfc3339_ms,
    "unix": unix_ms,
    "unix-ms": unix_milliseconds,
}
