"""How the columns of a foreign log are read: written once by the keeper, checked when built."""

from collections.abc import Mapping
from datetime import datetime
from typing import Any, Final, Literal

import msgspec

from hub.errors import PayloadError, UsageError
from hub.quantities import BY_NAME
from hub.telemetry import logtime
from hub.telemetry.cells import DELIMITERS
from hub.telemetry.tables import to_struct
from hub.telemetry.units import Conversion, conversion, misfit, shortened, suggestion

Column = int | str
"""A column by its number, counted from 1, or by its name in the header."""

EXAMPLE: Final = (
    'time = {column = "when", format = "%d.%m.%Y %H:%M:%S", timezone = "Europe/Berlin"} and '
    'columns = [{name = "U", quantity = "pack_voltage", unit = "mV"}]'
)


class TimeMapping(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """Where the time of a row comes from.

    Either ``column`` with ``format`` (``rfc3339``, ``unix``, ``unix-ms`` or a pattern of ``strptime``; a list of
    columns is joined by spaces) and, for a pattern without an offset, ``timezone`` or ``utc_offset``; or ``start``
    (RFC 3339) with ``step_s`` for a log without times. ``rule = "order"`` tells the two passes of a repeated hour
    apart by the order of rows.
    """

    column: Column | list[Column] | None = None
    format: str | None = None
    timezone: str | None = None
    utc_offset: str | None = None
    rule: Literal["order"] | None = None
    start: str | None = None
    step_s: float | None = None


class ColumnMapping(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """One column: ``value * scale + offset`` is in ``unit`` (SenML; the catalogue's where absent)."""

    quantity: str
    number: int | None = None
    name: str | None = None
    unit: str | None = None
    scale: float = 1.0
    offset: float = 0.0

    @property
    def column(self) -> Column:
        """The column by number or name; construction has seen to it that there is exactly one."""
        return self.number if self.number is not None else self.name or ""

    @property
    def conversion(self) -> Conversion:
        """From ``unit`` to the catalogue's unit."""
        found = conversion(BY_NAME[self.quantity], self.unit)
        assert found is not None
        return found


class LogMapping(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """How to read a log that is not in the form of the node interface.

    ``skip_until`` is the text the first data line (the header, where there is one) starts with; everything before is
    left out. The last line that starts so counts where ``skip_until_last`` is set, else the first.
    """

    time: TimeMapping
    columns: list[ColumnMapping]
    header: bool = True
    delimiter: str = ","
    decimal: Literal[".", ","] = "."
    skip_until: str | None = None
    skip_until_last: bool = False


def mapping_from(table: Mapping[str, Any]) -> LogMapping:
    """Build and check a mapping from a table of TOML.

    Raises
    ------
    UsageError
        With one sentence on the first thing that does not fit.
    """
    plain = dict(table)
    time = _table(plain.get("time"), "time")
    if isinstance(time.get("start"), datetime):
        time["start"] = time["start"].isoformat()
    plain["time"] = to_struct(time, TimeMapping, "The time of the log mapping", UsageError)
    columns = plain.get("columns")
    if not isinstance(columns, list) or not columns:
        raise UsageError(f"The log mapping needs columns, a list of tables; for example {EXAMPLE}.")
    plain["columns"] = [
        to_struct(_table(c, "columns"), ColumnMapping, f"Column {i} of the log mapping", UsageError)
        for i, c in enumerate(columns, 1)
    ]
    mapping = to_struct(plain, LogMapping, "The log mapping", UsageError)
    check_mapping(mapping)
    return mapping


def check_mapping(mapping: LogMapping) -> None:
    """Raise `UsageError` where the parts of a mapping contradict each other."""
    if mapping.delimiter not in {*DELIMITERS, "|", " "}:
        raise UsageError(f"The delimiter {shortened(mapping.delimiter)} is none of comma, semicolon, tab, | and space.")
    if mapping.delimiter == mapping.decimal:
        raise UsageError("Delimiter and decimal sign are both a comma; a log with decimal commas is cut by ; or tab.")
    if mapping.skip_until == "" or (mapping.skip_until_last and mapping.skip_until is None):
        raise UsageError("skip_until needs the text the first data line starts with.")
    _check_time(mapping.time)
    seen: set[str] = set()
    for column in mapping.columns:
        _check_column(column)
        if column.quantity in seen:
            raise UsageError(f"The log mapping gives {column.quantity} twice; keep one of the columns.")
        seen.add(column.quantity)
    used = [c.column for c in mapping.columns] + time_columns(mapping.time)
    for place in used:
        if isinstance(place, int) and place < 1:
            raise UsageError("Columns are counted from 1.")
        if isinstance(place, str) and not mapping.header:
            raise UsageError(f"A log without a header has no column named {shortened(place)}; give its number.")


def time_columns(time: TimeMapping) -> list[Column]:
    """The columns a time is read from; none for a log without times."""
    if time.column is None:
        return []
    return list(time.column) if isinstance(time.column, list) else [time.column]


def clock_of(time: TimeMapping) -> logtime.Clock:
    """A clock for the time columns of one file."""
    return logtime.clock(time.format, time.timezone, time.utc_offset, time.rule)


def _table(value: object, name: str) -> dict[str, Any]:
    if not isinstance(value, Mapping):
        raise UsageError(f"The log mapping needs {name} as a table; for example {EXAMPLE}.")
    return dict(value)


def _check_time(time: TimeMapping) -> None:
    if (time.column is None) == (time.start is None):
        raise UsageError("The time of a log mapping is either column with format, or start with step_s.")
    if time.start is not None:
        if time.step_s is None or not 0.001 <= time.step_s <= 86_400 or time.format:  # noqa: PLR2004 - 1 ms to a day
            raise UsageError("A log without times needs start and step_s, the seconds from row to row, and no format.")
        try:
            logtime.rfc3339_ms(time.start)
        except PayloadError as problem:
            raise UsageError(str(problem)) from None
        return
    if time.column == [] or time.step_s is not None:
        raise UsageError("The time of a log mapping is either column with format, or start with step_s.")
    logtime.check_format(time.format, time.timezone, time.utc_offset, time.rule)


def _check_column(column: ColumnMapping) -> None:
    if (column.number is None) == (column.name is None):
        raise UsageError(f"A column of the log mapping ({column.quantity}) needs either number or name.")
    quantity = BY_NAME.get(column.quantity)
    if quantity is None:
        near = suggestion(column.quantity, list(BY_NAME))
        raise UsageError(f"There is no quantity {shortened(column.quantity)}{near}.")
    if conversion(quantity, column.unit) is None:
        raise UsageError(misfit(quantity, column.unit or ""))
    if not (abs(column.scale) <= 1e12 and column.scale != 0 and abs(column.offset) <= 1e12):  # noqa: PLR2004
        raise UsageError(f"The scale of {column.quantity} must be a finite number other than 0, its offset finite.")
