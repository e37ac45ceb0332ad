"""Numbers, times and dates as the pages write them."""

import datetime as dt
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from markupsafe import Markup

NOT_KNOWN = "not known"
NBSP = "\u00a0"
MINUS = "\u2212"
MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
WEEKDAYS = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")

SECOND_MS = 1000
MINUTE_MS = 60 * SECOND_MS
HOUR_MS = 60 * MINUTE_MS
DAY_MS = 24 * HOUR_MS


def number(value: float, decimals: int = 0) -> str:
    """A number with a decimal point, a true minus, and no minus before a rounded nothing."""
    text = f"{abs(value):.{decimals}f}"
    negative = value < 0 and float(text) != 0
    return f"{MINUS if negative else ''}{text}"


def figure(value: float | None, unit: str, decimals: int = 0) -> str:
    """A number with its unit, kept on one line; “not known” where there is none."""
    if value is None or value != value:  # noqa: PLR0124 - NaN
        return NOT_KNOWN
    return f"{number(value, decimals)}{NBSP}{unit}"


def percent(ratio: float | None) -> str:
    """A ratio as per cent."""
    return figure(None if ratio is None else 100 * ratio, "%", 0)


def count(many: int, thing: str, things: str | None = None) -> str:
    """“1 day”, “3 days”."""
    return f"{many}{NBSP}{thing if many == 1 else things or f'{thing}s'}"


def listed(parts: list[str]) -> str:
    """“a”, “a and b”, “a, b and c”."""
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}" if parts else ""


def duration(span_ms: float) -> str:
    """A stretch of time in its two largest units at most."""
    seconds = max(0, round(span_ms / SECOND_MS))
    if seconds < 60:  # noqa: PLR2004 - a minute
        return f"{seconds}{NBSP}s"
    minutes = round(seconds / 60)
    if minutes < 120:  # noqa: PLR2004 - two hours
        return f"{minutes}{NBSP}min"
    hours, rest = divmod(minutes, 60)
    if hours < 48:  # noqa: PLR2004 - two days
        return f"{hours}{NBSP}h" + (f" {rest}{NBSP}min" if rest and hours < 10 else "")  # noqa: PLR2004
    return count(round(hours / 24), "day")


def day_words(date: str | dt.date, *, weekday: bool = False, year: bool = True) -> str:
    """“1 Mar 2026”, “Sun 1 Mar 2026”, “Sun 1 Mar”."""
    day = dt.date.fromisoformat(date) if isinstance(date, str) else date
    parts = [WEEKDAYS[day.weekday()]] if weekday else []
    parts += [str(day.day), MONTHS[day.month - 1]]
    return NBSP.join([*parts, str(day.year)] if year else parts)


@dataclass(frozen=True, slots=True)
class Moment:
    """An instant at a site.

    Attributes
    ----------
    local
        The instant in the site's zone.
    """

    local: dt.datetime

    @property
    def zone(self) -> str:
        """What the zone calls itself at that instant: “GMT”, “CEST”, or “UTC+05:30” where it has no name."""
        name = self.local.tzname() or ""
        return name if name and not name.startswith(("+", "-")) else offset(self.local)

    @property
    def clock(self) -> str:
        """“13:42”."""
        return f"{self.local:%H:%M}"

    @property
    def utc(self) -> str:
        """“2026-03-01 12:42:05 UTC”."""
        return f"{self.local.astimezone(dt.UTC):%Y-%m-%d %H:%M:%S} UTC"

    @property
    def machine(self) -> str:
        """RFC 3339 in UTC."""
        return f"{self.local.astimezone(dt.UTC):%Y-%m-%dT%H:%M:%S}Z"


def moment(time_ms: int, zone: ZoneInfo) -> Moment:
    """An instant in a zone."""
    return Moment(dt.datetime.fromtimestamp(time_ms / 1000, zone))


def offset(local: dt.datetime) -> str:
    """“UTC+01:00”."""
    minutes = round((local.utcoffset() or dt.timedelta()).total_seconds() / 60)
    sign = MINUS if minutes < 0 else "+"
    return f"UTC{sign}{abs(minutes) // 60:02d}:{abs(minutes) % 60:02d}"


def when(time_ms: int, zone: ZoneInfo, now_ms: int | None = None) -> str:
    """An instant in words: the clock alone for the same local day as ``now_ms``, with the date otherwise."""
    at = moment(time_ms, zone)
    clock = f"{at.clock}{NBSP}{at.zone}"
    if now_ms is not None:
        today = moment(now_ms, zone).local.date()
        days = (today - at.local.date()).days
        if days == 0:
            return clock
        if days == 1:
            return f"yesterday {clock}"
        if 1 < days < 7:  # noqa: PLR2004 - within the week a weekday says enough
            return f"{WEEKDAYS[at.local.weekday()]} {clock}"
    return f"{day_words(at.local.date())}, {clock}"


def stamp(time_ms: int, zone: ZoneInfo, now_ms: int | None = None, *, short_after: int | None = None) -> Markup:
    """The same as an element that also gives UTC; ``short_after``: the clock alone on the day of that instant."""
    at = moment(time_ms, zone)
    words = when(time_ms, zone, now_ms)
    if short_after is not None and moment(short_after, zone).local.date() == at.local.date():
        words = f"{at.clock}{NBSP}{at.zone}"
    return Markup('<time datetime="{}" title="{}">{}</time>').format(at.machine, at.utc, words)


def zone_sentence(zone: ZoneInfo, now_ms: int) -> str:
    """Which zone the times of a page are in, and how far that is from UTC."""
    at = moment(now_ms, zone)
    shift = offset(at.local)
    named = f"now {at.zone} ({shift})" if at.zone != shift else f"now {shift}"
    return f"Times are {zone.key}, {named}."
