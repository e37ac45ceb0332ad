"""Marks of time along the paper, in the site's own days."""

import datetime as dt
from collections.abc import Iterator
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from hub.web.days import local_date, start_of
from hub.web.words import DAY_MS, HOUR_MS, MONTHS, WEEKDAYS

# Spans up to which the paper is ruled in hours, days, weeks and months; longer ones in years.
HOURS_UP_TO_MS = 2 * DAY_MS
DAYS_UP_TO_MS = 12 * DAY_MS
WEEKS_UP_TO_MS = 75 * DAY_MS
MONTHS_UP_TO_MS = 3 * 365 * DAY_MS
HOURS_APART = 3
QUARTER_H = 6
EDGE_SHARE = 0.05


@dataclass(frozen=True, slots=True)
class Rule:
    """A line across the paper; ``heavy`` ones part what the labels name."""

    time_ms: int
    heavy: bool


@dataclass(frozen=True, slots=True)
class Label:
    """Words under the paper, centred on an instant."""

    time_ms: int
    text: str


@dataclass(frozen=True, slots=True)
class Axis:
    """All marks between two instants."""

    rules: tuple[Rule, ...]
    labels: tuple[Label, ...]


def axis(start_ms: int, end_ms: int, zone: ZoneInfo) -> Axis:
    """Marks for a span, dense enough to read and sparse enough for a phone."""
    span = end_ms - start_ms
    dates = list(_dates(start_ms, end_ms, zone))
    if span <= HOURS_UP_TO_MS:
        rules, labels = _hours(dates, zone, 1 if span <= DAY_MS * 1.2 else 2)
    elif span <= DAYS_UP_TO_MS:
        rules, labels = _days(dates, zone)
    elif span <= WEEKS_UP_TO_MS:
        rules, labels = _weeks(dates, zone)
    else:
        rules, labels = _months(dates, zone, by_year=span > MONTHS_UP_TO_MS)
    return Axis(
        tuple(rule for rule in rules if start_ms <= rule.time_ms <= end_ms),
        # A label that would hang over the edge of the paper is left out.
        tuple(label for label in labels if start_ms + EDGE_SHARE * span <= label.time_ms <= end_ms - EDGE_SHARE * span),
    )


def _dates(start_ms: int, end_ms: int, zone: ZoneInfo) -> Iterator[dt.date]:
    date, last = local_date(start_ms, zone), local_date(end_ms, zone)
    while date <= last + dt.timedelta(days=1):
        yield date
        date += dt.timedelta(days=1)


def _hour(date: dt.date, hour: int, zone: ZoneInfo) -> int:
    """When a local clock shows a full hour; of an hour that comes twice, the first."""
    return round(dt.datetime.combine(date, dt.time(hour), zone).timestamp() * 1000)


def _hours(dates: list[dt.date], zone: ZoneInfo, thin: int) -> tuple[list[Rule], list[Label]]:
    rules, labels = [], []
    for date in dates:
        for hour in range(0, 24, HOURS_APART):
            at = _hour(date, hour, zone)
            rules.append(Rule(at, heavy=hour == 0))
            if hour % (HOURS_APART * thin) == 0:
                labels.append(Label(at, f"{hour:02d}:00"))
    return rules, labels


def _days(dates: list[dt.date], zone: ZoneInfo) -> tuple[list[Rule], list[Label]]:
    rules, labels = [], []
    for date in dates:
        rules += [Rule(_hour(date, hour, zone), heavy=hour == 0) for hour in range(0, 24, QUARTER_H)]
        labels.append(Label(start_of(date, zone) + 12 * HOUR_MS, f"{WEEKDAYS[date.weekday()]} {date.day}"))
    return rules, labels


def _weeks(dates: list[dt.date], zone: ZoneInfo) -> tuple[list[Rule], list[Label]]:
    rules, labels = [], []
    for date in dates:
        monday = date.weekday() == 0
        rules.append(Rule(start_of(date, zone), heavy=monday))
        if monday:
            labels.append(Label(start_of(date, zone), f"{date.day} {MONTHS[date.month - 1]}"))
    return rules, labels


def _months(dates: list[dt.date], zone: ZoneInfo, *, by_year: bool) -> tuple[list[Rule], list[Label]]:
    rules, labels = [], []
    many = sum(date.day == 1 for date in dates)
    thin = 1 if many <= 8 else 3  # noqa: PLR2004 - labels that fit a phone
    for date in dates:
        if date.day != 1:
            continue
        year = date.month == 1
        rules.append(Rule(start_of(date, zone), heavy=year))
        if year:
            labels.append(Label(start_of(date, zone), str(date.year)))
        elif not by_year and (date.month - 1) % thin == 0:
            labels.append(Label(start_of(date, zone), MONTHS[date.month - 1]))
    return rules, labels
