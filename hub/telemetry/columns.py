"""Which cell of a log line is what: from a header in the form of the node interface, or from a mapping."""

from dataclasses import dataclass, field
from typing import Final, NamedTuple

from hub.errors import PayloadError
from hub.quantities import MESSAGE_FIELDS
from hub.telemetry import logtime
from hub.telemetry.cells import DELIMITERS, Decimal, split
from hub.telemetry.logmapping import EXAMPLE, Column, LogMapping, clock_of, time_columns
from hub.telemetry.units import Conversion, shortened, split_column, suggestion

NAMED_IN_A_SENTENCE: Final = 8


class Cell(NamedTuple):
    """The place of one quantity in a line, counted from 0: ``value * scale + shift`` is converted by ``unit``."""

    place: int
    quantity: str
    scale: float
    shift: float
    unit: Conversion


@dataclass(slots=True)
class Layout:
    """How the lines below a header are read.

    Attributes
    ----------
    delimiter, decimal
        What cuts the cells, and the decimal sign in them.
    width, exact
        Cells a line needs, and whether it may have no more.
    clock, times
        How a time is read, and the places it is read from; no clock for a log without times.
    columns
        The quantities.
    boot
        Place of the count of restarts, where there is one.
    unknown
        Headings that are nothing the hub knows.
    """

    delimiter: str
    decimal: Decimal
    width: int
    exact: bool
    clock: logtime.Clock | None
    times: list[int]
    columns: list[Cell]
    boot: int | None = None
    unknown: list[str] = field(default_factory=list)


def native_layout(text: str) -> Layout | None:
    """The layout of a header line of the node interface, ``None`` where the line is no such header.

    A header cut by semicolons, as spreadsheets write it, goes with decimal commas.
    """
    if "time" not in text:
        return None
    for delimiter in DELIMITERS:
        headings = _headings(text, delimiter)
        if "time" in headings:
            decimal: Decimal = "," if delimiter == ";" else "."
            times = [headings.index("time")]
            layout = Layout(delimiter, decimal, len(headings), True, logtime.native_ms, times, [])
            _assign(layout, headings)
            return layout
    return None


def mapped_layout(mapping: LogMapping, text: str) -> Layout:
    """The layout of a foreign log; ``text`` is its header, or its first line where it has none.

    Raises
    ------
    PayloadError
        Where the header lacks a column the mapping reads.
    """
    headings = _headings(text, mapping.delimiter) if mapping.header else []
    times = [_place(column, headings) for column in time_columns(mapping.time)]
    columns = [Cell(_place(c.column, headings), c.quantity, c.scale, c.offset, c.conversion) for c in mapping.columns]
    needed = 1 + max(times + [c.place for c in columns])
    if mapping.header and needed > len(headings):
        raise PayloadError(f"The mapping uses column {needed} and the header {shortened(text)} has {len(headings)}.")
    return Layout(
        mapping.delimiter,
        mapping.decimal,
        max(needed, len(headings)),
        mapping.header,
        clock_of(mapping.time) if times else None,
        times,
        columns,
    )


def foreign(text: str) -> PayloadError:
    """The error for a log of another form that came without a mapping; ``text`` is its first line."""
    delimiter = next((d for d in DELIMITERS if d in text), ",")
    headings = _headings(text, delimiter)
    unknown = [shortened(h, 30) for h in headings if split_column(h) is None and h != "time"]
    which = ", ".join(unknown[:NAMED_IN_A_SENTENCE]) + (" and more" if len(unknown) > NAMED_IN_A_SENTENCE else "")
    return PayloadError(
        f"The log begins with {shortened(text, 120)}, which is not the header of a node log (unknown: "
        f"{which or 'nothing, but there is no time column'}); write a mapping, for example {EXAMPLE}."
    )


def _headings(text: str, delimiter: str) -> list[str]:
    try:
        return [cell.strip() for cell in split(text, delimiter)]
    except PayloadError:
        return [text]


def _assign(layout: Layout, headings: list[str]) -> None:
    taken: set[str] = set()
    for place, heading in enumerate(headings):
        found = split_column(heading)
        if found is not None and found[0].name not in taken:
            taken.add(found[0].name)
            layout.columns.append(Cell(place, found[0].name, 1.0, 0.0, found[1]))
        elif heading == "boot":
            layout.boot = place
        elif heading not in ("time", "", *MESSAGE_FIELDS):
            layout.unknown.append(heading)


def _place(column: Column, headings: list[str]) -> int:
    if isinstance(column, int):
        return column - 1
    if column not in headings:
        near = suggestion(column, headings)
        raise PayloadError(f"The mapping reads the column {shortened(column)}, which the header does not have{near}.")
    return headings.index(column)
