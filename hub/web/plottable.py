"""The figures of a plot as a table, for those who cannot see it or want the numbers."""

import datetime as dt
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from zoneinfo import ZoneInfo

import numpy as np

from hub.web.ranges import Range
from hub.web.reduction import Binned
from hub.web.words import DAY_MS, MONTHS, NBSP, day_words, number

COLUMNS = (
    ("cell_voltage", "Cell voltage, V", 3),
    ("pack_voltage", "Pack voltage, V", 2),
    ("pack_current", "Current, A", 3),
    ("charge_in", "Charge in a day, Ah", 2),
    ("charge_out", "Charge out a day, Ah", 2),
    ("pack_temperature", "Pack, °C", 1),
    ("air_temperature", "Air, °C", 1),
)


@dataclass(frozen=True, slots=True)
class PlotTable:
    """Least and greatest value by stretch of time; ``stretch`` names what a row is."""

    stretch: str
    headings: tuple[str, ...]
    rows: tuple[tuple[str, tuple[str, ...]], ...]


def tabulate(traces: Mapping[str, Binned], within: Range, zone: ZoneInfo) -> PlotTable:
    """Hours of a day, days of some weeks, months of a life."""
    shown = [column for column in COLUMNS if column[0] in traces and traces[column[0]].known]
    if "cell_voltage" in (name for name, _, _ in shown):
        shown = [column for column in shown if column[0] != "pack_voltage"]
    stretch, name = _grouping(within)
    groups: dict[str, dict[str, tuple[float, float]]] = {}
    for quantity, _, _ in shown:
        trace = traces[quantity]
        for i in np.flatnonzero(np.isfinite(trace.low)).tolist():
            # The middle of the column: a column that lies across midnight belongs to the larger part.
            at = dt.datetime.fromtimestamp((trace.start_ms + (i + 0.5) * trace.step_ms) / 1000, zone)
            group = groups.setdefault(name(at), {})
            low, high = group.get(quantity, (np.inf, -np.inf))
            group[quantity] = (min(low, float(trace.low[i])), max(high, float(trace.high[i])))
    rows = tuple(
        (label, tuple(_span(group.get(quantity), decimals) for quantity, _, decimals in shown))
        for label, group in groups.items()
    )
    return PlotTable(stretch, tuple(heading for _, heading, _ in shown), rows)


def _grouping(within: Range) -> tuple[str, Callable[[dt.datetime], str]]:
    if within.end_ms - within.start_ms <= 2 * DAY_MS:
        return "Hour", lambda at: f"{day_words(at.date(), year=False)} {at:%H}:00{NBSP}{at.tzname() or ''}"
    if within.kind == "all":
        return "Month", lambda at: f"{MONTHS[at.month - 1]}{NBSP}{at.year}"
    return "Day", lambda at: day_words(at.date(), weekday=True)


def _span(extremes: tuple[float, float] | None, decimals: int) -> str:
    if extremes is None:
        return "no reading"
    low, high = (number(value, decimals) for value in extremes)
    return low if low == high else f"{low} to {high}"
