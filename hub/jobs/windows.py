"""Windows: the local days of a node, cut where another pack was fitted. Figures are computed window by window."""

import datetime as dt
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from zoneinfo import ZoneInfo

from hub.store.inventory import Fitting


@dataclass(frozen=True, slots=True)
class DayWindow:
    """A local day, or the part of one during which the same pack was in the node.

    Attributes
    ----------
    start_ms, end_ms
        ``start_ms <= time < end_ms``, UTC.
    date
        The local date, ISO.
    pack
        Label of the pack; ``None`` while no pack was fitted.
    """

    start_ms: int
    end_ms: int
    date: str
    pack: str | None


def windows(hours: Iterable[int], timezone: str, fittings: Sequence[Fitting]) -> Iterator[DayWindow]:
    """Windows of every local day that touches one of the given hours, in order.

    Parameters
    ----------
    hours
        UTC hours since 1970 in which there are readings.
    timezone
        The site's zone: its days have 23, 24 or 25 hours.
    fittings
        The node's fittings.
    """
    zone = ZoneInfo(timezone)
    seen: set[dt.date] = set()
    for hour in sorted(hours):
        for minute in (0, 59):  # an hour may lie in two days where a zone is not whole hours from UTC
            date = dt.datetime.fromtimestamp(hour * 3600 + minute * 60, zone).date()
            if date not in seen:
                seen.add(date)
                yield from _cut(date, zone, fittings)


def local_day(date: dt.date, zone: ZoneInfo) -> tuple[int, int]:
    """Start of a local day and of the next one, UTC milliseconds."""
    ends = (dt.datetime.combine(day, dt.time(), zone) for day in (date, date + dt.timedelta(days=1)))
    start, end = (round(moment.timestamp() * 1000) for moment in ends)
    return start, end


def _cut(date: dt.date, zone: ZoneInfo, fittings: Sequence[Fitting]) -> Iterator[DayWindow]:
    start, end = local_day(date, zone)
    edges = {start, end}
    for fitting in fittings:
        edges |= {edge for edge in (fitting.start_ms, fitting.end_ms) if edge is not None and start < edge < end}
    ordered = sorted(edges)
    for a, b in pairwise(ordered):
        inside = (f.pack for f in fittings if f.start_ms <= a and (f.end_ms is None or f.end_ms > a))
        yield DayWindow(a, b, date.isoformat(), next(inside, None))
