"""The stretch of time a node's page shows, from its address: works by links alone."""

import datetime as dt
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from hub.errors import UsageError
from hub.web.days import local_date, start_of
from hub.web.words import DAY_MS, day_words

DAYS = {"1d": 1, "7d": 7, "28d": 28}
NAMES = {"1d": "1 day", "7d": "7 days", "28d": "28 days", "all": "All"}


@dataclass(frozen=True, slots=True)
class Range:
    """A stretch of time.

    Attributes
    ----------
    kind
        ``1d``, ``7d``, ``28d`` or ``all``.
    start_ms, end_ms
        ``start_ms <= time < end_ms``.
    first, last
        Local dates of its ends, inclusive.
    to
        The date asked for; ``None`` where it simply ends now.
    earlier, later
        Dates that the neighbouring stretches end on; ``None`` where there is none.
    """

    kind: str
    start_ms: int
    end_ms: int
    first: dt.date
    last: dt.date
    to: dt.date | None
    earlier: dt.date | None
    later: dt.date | None

    @property
    def words(self) -> str:
        """“the last 7 days”, “Tue 24 Nov 2026”, “1 Nov 2026 to 28 Nov 2026”."""
        if self.kind == "all":
            return "all that is known"
        if self.to is None:
            return "the last 24 hours" if self.kind == "1d" else f"the last {NAMES[self.kind]}"
        if self.first == self.last:
            return day_words(self.last, weekday=True)
        return f"{day_words(self.first)} to {day_words(self.last)}"


def chosen(kind: str, to: str | None, now_ms: int, zone: ZoneInfo, known: tuple[int, int] | None) -> Range:
    """The stretch that an address asks for.

    Parameters
    ----------
    kind, to
        As in the address: a name of ``NAMES``, and an ISO date on which it ends.
    known
        First and last instant of the node's readings.

    Raises
    ------
    UsageError
        There is no such range, or the date cannot be read.
    """
    if kind not in NAMES:
        raise UsageError(f"There is no range “{kind}”. The ranges are {', '.join(NAMES)}.")
    today = local_date(now_ms, zone)
    first_known = local_date(known[0], zone) if known else today
    if kind == "all":
        start = start_of(first_known, zone)
        return Range(kind, min(start, now_ms - DAY_MS), now_ms, first_known, today, None, None, None)
    asked = _date(to)
    if asked is not None and asked > today:
        asked = None
    days = DAYS[kind]
    last = asked or today
    first = last - dt.timedelta(days=days - 1)
    if asked is None:
        start_ms, end_ms = now_ms - days * DAY_MS, now_ms
        first = local_date(start_ms, zone)
    else:
        start_ms, end_ms = start_of(first, zone), start_of(last + dt.timedelta(days=1), zone)
    before = last - dt.timedelta(days=days)
    after = last + dt.timedelta(days=days)
    return Range(
        kind,
        start_ms,
        end_ms,
        first,
        last,
        asked,
        before if known and before >= first_known else None,
        None if asked is None or last >= today else min(after, today),
    )


def _date(text: str | None) -> dt.date | None:
    if not text:
        return None
    try:
        found = dt.date.fromisoformat(text)
    except ValueError:
        found = None
    # Years beyond these have no local midnight in milliseconds that anybody could mean.
    if found is None or not 2000 <= found.year <= 2200:  # noqa: PLR2004
        raise UsageError(f"“{text}” is not a date like 2026-03-01.")
    return found
