"""Local days of a site, and what is known of each."""

import datetime as dt
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol
from zoneinfo import ZoneInfo


class Row(Protocol):
    """A row of figures, from the store or from elsewhere: anything that gives a value by a column's name."""

    def __getitem__(self, name: str, /) -> Any:  # noqa: ANN401 - numbers, texts and nothing
        """The value of a column."""


@dataclass(frozen=True, slots=True)
class Day:
    """What is known of a node's local day.

    Attributes
    ----------
    date
        ISO date.
    coverage
        Share of the day with usable readings; ``None`` where no figures were computed.
    full_at_ms
        When the pack was first full that day; ``None`` where it was not, or nobody saw it.
    """

    date: str
    coverage: float | None = None
    full_at_ms: int | None = None


def local_date(time_ms: int, zone: ZoneInfo) -> dt.date:
    """The date at a site."""
    return dt.datetime.fromtimestamp(time_ms / 1000, zone).date()


def start_of(date: dt.date, zone: ZoneInfo) -> int:
    """When a local day begins, UTC milliseconds."""
    return round(dt.datetime.combine(date, dt.time(), zone).timestamp() * 1000)


def date_back(now_ms: int, zone: ZoneInfo, days: int) -> dt.date:
    """The local date so many days ago."""
    return local_date(now_ms, zone) - dt.timedelta(days=days)


def by_date(rows: Iterable[Row]) -> dict[str, Day]:
    """Day figures, of which there are two where another pack was fitted, as one ``Day`` a date."""
    spans: dict[str, tuple[float, float]] = {}
    full: dict[str, int] = {}
    for row in rows:
        seen, whole = spans.get(row["date"], (0.0, 0.0))
        spans[row["date"]] = (seen + row["observed_s"], whole + (row["end_ms"] - row["start_ms"]) / 1000)
        if row["full_at_ms"] is not None:
            full[row["date"]] = min(row["full_at_ms"], full.get(row["date"], row["full_at_ms"]))
    return {
        date: Day(date, min(1.0, seen / whole) if whole else 0.0, full.get(date))
        for date, (seen, whole) in spans.items()
    }


def last_days(known: Mapping[str, Day], today: dt.date, many: int) -> list[Day]:
    """The days before today, oldest first; unknown ones are there without coverage."""
    dates = [(today - dt.timedelta(days=back)).isoformat() for back in range(many, 0, -1)]
    return [known.get(date, Day(date)) for date in dates]
