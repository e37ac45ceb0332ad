"""Export tables: one place that knows their columns and their order.

The same rows serve the command line, the pages and the interface. Rows come in the order of a key; the key, as text, is
the cursor behind which a reader may go on.
"""

import datetime as dt
import json
import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection

from hub.battery.throughput import throughput
from hub.errors import UsageError
from hub.quantities import CATALOGUE, NAMES
from hub.store import figures, inventory, measured, readings
from hub.store.inventory import Inventory
from hub.telemetry.screening import Screened

Row = dict[str, Any]
Key = tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Selection:
    """Which rows.

    Attributes
    ----------
    node, pack
        Only these; all where ``None``.
    start, end
        From and to: a date (inclusive; local for tables of days, UTC for tables of instants) or an RFC 3339 instant.
    """

    node: str | None = None
    pack: str | None = None
    start: str | None = None
    end: str | None = None


@dataclass(frozen=True, slots=True)
class Table:
    """One export table: its columns are a promise; new ones are added at the end.

    A row's key is the name of its node or pack, and its instant or its date.
    """

    name: str
    columns: tuple[str, ...]
    description: str
    fetch: Callable[["_Context", Key | None], Iterator[tuple[Key, Row]]]
    keyed_by_date: bool = False


@dataclass(frozen=True, slots=True)
class _Context:
    connection: Connection
    selection: Selection
    inventory: Inventory
    node_ids: Mapping[str, int]
    pack_ids: Mapping[str, int]

    @property
    def nodes(self) -> list[str]:
        """Selected node names in order."""
        chosen = self.selection.node
        if chosen is not None and chosen not in self.node_ids:
            raise UsageError(f"There is no node “{chosen}”. Known nodes: {', '.join(self.node_ids) or 'none yet'}.")
        return sorted(self.node_ids) if chosen is None else [chosen]

    @property
    def packs(self) -> list[str]:
        """Selected pack labels in order."""
        chosen = self.selection.pack
        if chosen is not None and chosen not in self.pack_ids:
            raise UsageError(f"There is no pack “{chosen}”. Known packs: {', '.join(self.pack_ids) or 'none yet'}.")
        return sorted(self.pack_ids) if chosen is None else [chosen]

    def instants(self) -> tuple[int | None, int | None]:
        """First instant and the instant behind the last."""
        return instant(self.selection.start), instant(self.selection.end, after=True)

    def dates(self) -> tuple[str | None, str | None]:
        """First and last local date; of an instant the date that it names itself."""
        return _date(self.selection.start), _date(self.selection.end)


# Calendars begin and end somewhere; no reading is as old or as new as that.
LONG_AGO, FAR_AHEAD = dt.date(1970, 1, 2), dt.date(9000, 1, 1)

_INSTANT = re.compile(r"[0-9]{15}")
_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")


def instant(text: str | None, *, after: bool = False) -> int | None:
    """Milliseconds of a date or RFC 3339 instant; for a date, ``after`` gives the end of that day.

    Raises
    ------
    UsageError
        The text is neither, or an instant without a zone.
    """
    if text is None:
        return None
    day, moment = _parsed(text)
    if moment is None:
        moment = dt.datetime.combine(day, dt.time(), dt.UTC)
        if after:
            moment += dt.timedelta(days=1)
    return round(moment.timestamp() * 1000)


def _date(text: str | None) -> str | None:
    return None if text is None else _parsed(text)[0].isoformat()


def _parsed(text: str) -> tuple[dt.date, dt.datetime | None]:
    """A date and, where there is one, an instant."""
    moment = None
    try:
        if len(text) == len("2026-03-01"):
            day = dt.date.fromisoformat(text)
            if LONG_AGO <= day <= FAR_AHEAD:
                return day, None
        else:
            moment = dt.datetime.fromisoformat(text)
    except ValueError:
        pass
    if moment is None or moment.tzinfo is None or not LONG_AGO <= moment.date() <= FAR_AHEAD:
        raise UsageError(
            f"“{text}” is not a date like 2026-03-01 nor an instant with its zone like 2026-03-01T09:00:00Z."
        )
    return moment.date(), moment


def rows(
    connection: Connection, table: str, selection: Selection, after: str | None = None
) -> Iterator[tuple[str, Row]]:
    """Rows of a table in order, each with the cursor that continues behind it.

    Raises
    ------
    UsageError
        There is no such table, node or pack, or the cursor or a date cannot be read.
    """
    spec = table_named(table)
    context = _Context(
        connection,
        selection,
        inventory.load(connection),
        inventory.node_ids(connection),
        inventory.pack_ids(connection),
    )
    _ = context.nodes, context.packs, context.instants()
    return _behind(spec, context, _key_of(after, spec) if after else None)


def _behind(spec: Table, context: _Context, behind: Key | None) -> Iterator[tuple[str, Row]]:
    for key, row in spec.fetch(context, behind):
        if behind is None or key > behind:
            yield json.dumps(key, ensure_ascii=False, separators=(",", ":")), row


def table_named(name: str) -> Table:
    """A table by its name.

    Raises
    ------
    UsageError
        There is none of that name; the text names those there are.
    """
    if name not in TABLES:
        raise UsageError(f"There is no table “{name}”. The tables are {', '.join(TABLES)}.")
    return TABLES[name]


def _key_of(cursor: str, spec: Table) -> Key:
    try:
        parts = json.loads(cursor)
    except (ValueError, RecursionError):
        parts = None
    whole = isinstance(parts, list) and len(parts) == 2 and all(isinstance(p, str) for p in parts)  # noqa: PLR2004 - a pair
    if not whole or not (_DATE if spec.keyed_by_date else _INSTANT).fullmatch(parts[1]):
        raise UsageError("The cursor cannot be read. Begin again without one.")
    return tuple(parts)


def _time(value: int | None) -> str | None:
    if value is None:
        return None
    moment = dt.datetime.fromtimestamp(value / 1000, dt.UTC)
    return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")


def _sortable(time_ms: int) -> str:
    return f"{time_ms:015d}"


# More digits than any sensor gives, few enough that a sum taken in another order reads the same.
def _rounded(value: float | None, decimals: int = 6) -> float | None:
    return None if value is None else round(value, decimals) + 0.0


def _readings(context: _Context, after: Key | None) -> Iterator[tuple[Key, Row]]:
    start, end = context.instants()
    for name in context.nodes:
        if after is not None and name < after[0]:
            continue
        spans = _fitted_spans(context, name)
        known = readings.bounds(context.connection, context.node_ids[name])
        if known is None:
            continue
        first = max(known[0], start if start is not None else known[0])
        if after is not None and name == after[0]:
            first = max(first, int(after[1]) + 1)
        last = min(known[1] + 1, end if end is not None else known[1] + 1)
        node = context.inventory.node(name)
        calibrations = [c for c in context.inventory.calibrations if c.node == name]
        # Whole days, whatever was asked for: what screening finds must not depend on where a reader began.
        for day in range(first // readings.DAY_MS * readings.DAY_MS, last, readings.DAY_MS):
            found = measured.read(
                context.connection,
                context.node_ids[name],
                day,
                day + readings.DAY_MS,
                calibrations,
                node.current_full_scale_a,
            )
            for time_ms, row in _reading_rows(name, found):
                if first <= time_ms < last and (spans is None or any(a <= time_ms < b for a, b in spans)):
                    yield (name, _sortable(time_ms)), row


def _fitted_spans(context: _Context, node: str) -> list[tuple[float, float]] | None:
    if context.selection.pack is None:
        return None
    return [
        (f.start_ms, f.end_ms if f.end_ms is not None else float("inf"))
        for f in context.inventory.fitted(node)
        if f.pack == context.selection.pack
    ]


def _reading_rows(name: str, found: Screened) -> Iterator[tuple[int, Row]]:
    series = found.series
    notes: dict[int, list[str]] = {}
    for finding in found.findings:
        for time_ms in finding.time_ms.tolist():
            notes.setdefault(time_ms, []).append(f"{finding.quantity}: {finding.reason}")
    columns = [(q.name, q.decimals, series.get(q.name).tolist()) for q in CATALOGUE]
    for i, time_ms in enumerate(series.time_ms.tolist()):
        row: Row = {"time": _time(time_ms), "node": name}
        for quantity, decimals, values in columns:
            value = values[i]
            row[quantity] = None if value != value else round(value, decimals) + 0.0  # noqa: PLR0124 - NaN
        row["set_aside"] = "; ".join(sorted(notes.get(time_ms, ())))
        yield time_ms, row


def _days(context: _Context, _after: Key | None) -> Iterator[tuple[Key, Row]]:
    since, until = context.dates()
    for name in context.nodes:
        for day in figures.days(context.connection, context.node_ids[name], since, until):
            if context.selection.pack is not None and day["pack"] != context.selection.pack:
                continue
            row: Row = {"node": name, "pack": day["pack"], "date": day["date"]}
            row |= {
                column: _rounded(day[column])
                for column in _DAY_COLUMNS
                if column not in {"node", "pack", "date", "full_at", "start", "end"}
            }
            row["full_at"] = _time(day["full_at_ms"])
            row["start"], row["end"] = _time(day["start_ms"]), _time(day["end_ms"])
            yield (name, _sortable(day["start_ms"])), {column: row[column] for column in _DAY_COLUMNS}


def _charges(context: _Context, _after: Key | None) -> Iterator[tuple[Key, Row]]:
    start, end = context.instants()
    for name in context.nodes:
        for charge in figures.charges(context.connection, context.node_ids[name], start, end):
            if context.selection.pack is not None and charge["pack"] != context.selection.pack:
                continue
            row: Row = {"node": name, "pack": charge["pack"]}
            row |= {"start": _time(charge["start_ms"]), "end": _time(charge["end_ms"])}
            row |= {
                column: _rounded(charge[column])
                for column in ("charge_ah", "charge_wh", "mean_rate_it", "peak_temperature_c")
            }
            row |= {"ended_by": charge["ended_by"], "full_at": _time(charge["full_at_ms"])}
            row |= {column: _rounded(charge[column]) for column in ("confidence", "overcharge_ah")}
            yield (name, _sortable(charge["start_ms"])), row


def _throughput(context: _Context, _after: Key | None) -> Iterator[tuple[Key, Row]]:
    since, until = context.dates()
    wanted = None
    if context.selection.node is not None:
        wanted = {f.pack for f in context.inventory.fitted(context.selection.node)}
    for label in context.packs:
        if wanted is not None and label not in wanted:
            continue
        rated = context.inventory.pack(label).rated_capacity_ah
        days = figures.pack_days(context.connection, context.pack_ids[label])
        for row in throughput(((day["date"], day["discharge_ah"]) for day in days), rated):
            if (since is None or row.date >= since) and (until is None or row.date <= until):
                yield (
                    (label, row.date),
                    {
                        "pack": label,
                        "date": row.date,
                        "discharge_ah": _rounded(row.discharge_ah),
                        "equivalent_full_cycles": _rounded(row.equivalent_full_cycles),
                    },
                )


_DAY_COLUMNS = (
    *("node", "pack", "date", "coverage", "panel_wh", "charge_ah", "discharge_ah", "charge_wh", "discharge_wh"),
    *("load_wh", "clear_sky_wh", "harvest_ratio", "pack_temperature_max_c", "cell_voltage_min_v"),
    *("cell_voltage_max_v", "full_at"),
    *("observed_s", "charge_uncertainty_ah", "discharge_uncertainty_ah", "start", "end"),
    *("bridged_s", "offset_removed_a"),
)
_CHARGE_COLUMNS = (
    *("node", "pack", "start", "end", "charge_ah", "charge_wh", "mean_rate_it", "peak_temperature_c", "ended_by"),
    *("full_at", "confidence", "overcharge_ah"),
)

TABLES: dict[str, Table] = {
    table.name: table
    for table in (
        Table(
            "readings",
            ("time", "node", *NAMES, "set_aside"),
            "Readings after calibration; a value that screening kept out is empty and named in set_aside.",
            _readings,
        ),
        Table(
            "days", _DAY_COLUMNS, "One row a node and local date; two where another pack was fitted that day.", _days
        ),
        Table("charges", _CHARGE_COLUMNS, "Charge sessions with how each ended.", _charges),
        Table(
            "throughput",
            ("pack", "date", "discharge_ah", "equivalent_full_cycles"),
            "Discharged charge of a pack by local date, and its equivalent full cycles so far.",
            _throughput,
            keyed_by_date=True,
        ),
    )
}
