"""Readings in and out. The only module that knows how they lie in the database.

A node's UTC day lies either as rows (while it is being written to) or as one sealed block, never as both. Whoever
reads gets a ``Series`` and cannot tell which it was.

The first value stored for a quantity of an instant stays. The same value again is a repeat; a value for a quantity
that was missing fills in; another value is a contradiction: it is handed back to be set aside and counted.
"""

from collections import defaultdict
from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from sqlalchemy import Connection, delete, func, select, tuple_, update

from hub.quantities import BY_NAME, CATALOGUE, NAMES
from hub.series import EMPTY, Series
from hub.store import tables as t
from hub.store.blocks import Columns, pack, unpack
from hub.store.facts import next_revision
from hub.telemetry.message import Remark, Values

DAY_MS = 86_400_000
HOUR_MS = 3_600_000

_SCALES = {q.name: q.scale for q in CATALOGUE}
_ALL = ("time_ms", *t.EVIDENCE, *NAMES)

Stored = dict[str, int | None]


@dataclass(slots=True)
class Arrival:
    """Readings that arrived together: one message, or a stretch of a log.

    Attributes
    ----------
    node_id
        Whose readings.
    received_ms
        When the hub got them.
    readings
        Instant in UTC milliseconds to values in catalogue units.
    boot, sequence, import_id
        Where they came from.
    device_ms
        Instant to the node's own time, for readings that were placed elsewhere.
    """

    node_id: int
    received_ms: int
    readings: dict[int, Values]
    boot: int | None = None
    sequence: int | None = None
    import_id: int | None = None
    device_ms: dict[int, int] = field(default_factory=dict)

    def evidence(self, time_ms: int) -> tuple[int | None, ...]:
        """Values of the evidence columns for one reading."""
        return (self.received_ms, self.device_ms.get(time_ms), self.boot, self.sequence, self.import_id)


@dataclass(slots=True)
class Outcome:
    """What became of an arrival's readings.

    ``new`` readings were stored, ``filled`` ones completed a stored reading, ``repeated`` ones were known already;
    ``contradictions`` has one remark for each value that was kept out.
    """

    new: int = 0
    filled: int = 0
    repeated: int = 0
    contradictions: list[Remark] = field(default_factory=list)


def fixed_point(quantity: str, value: float) -> int:
    """The stored integer of a value in catalogue units."""
    return round(value * _SCALES[quantity])


def append(connection: Connection, arrivals: Sequence[Arrival]) -> list[Outcome]:
    """Store readings, each once; outcomes in the order of the arrivals."""
    outcomes = [Outcome() for _ in arrivals]
    sealed = _sealed_days(connection, arrivals)
    fresh: dict[tuple[int, int], tuple[int, Values]] = {}
    again: list[tuple[int, int, Values]] = []
    for index, arrival in enumerate(arrivals):
        node_id = arrival.node_id
        for time_ms, values in arrival.readings.items():
            key = (node_id, time_ms)
            if key in fresh or (sealed and (node_id, time_ms // DAY_MS) in sealed):
                again.append((index, time_ms, values))
            else:
                fresh[key] = (index, values)
    touched: set[tuple[int, int]] = set()
    again = _insert(connection, arrivals, outcomes, fresh, touched) + again
    if again:
        _merge(connection, arrivals, outcomes, again, sealed, touched)
    if touched:
        _mark(connection, touched)
    return outcomes


def _sealed_days(connection: Connection, arrivals: Iterable[Arrival]) -> set[tuple[int, int]]:
    days = {(a.node_id, time_ms // DAY_MS) for a in arrivals for time_ms in a.readings}
    found: set[tuple[int, int]] = set()
    wanted = sorted(days)
    for start in range(0, len(wanted), 400):
        key = tuple_(t.reading_block.c.node_id, t.reading_block.c.utc_day)
        rows = connection.execute(
            select(t.reading_block.c.node_id, t.reading_block.c.utc_day).where(key.in_(wanted[start : start + 400]))
        )
        found |= {(row[0], row[1]) for row in rows}
    return found


def _insert(
    connection: Connection,
    arrivals: Sequence[Arrival],
    outcomes: list[Outcome],
    fresh: dict[tuple[int, int], tuple[int, Values]],
    touched: set[tuple[int, int]],
) -> list[tuple[int, int, Values]]:
    """Insert rows that nobody had yet; hand back those that were there already.

    Rows of one shape go to the driver together; columns without a value are left out of the statement, because binding
    nothing costs as much as binding a value.
    """
    shapes: dict[tuple[str, ...], list[tuple[int, int, int, Values]]] = defaultdict(list)
    for (node_id, time_ms), (index, values) in fresh.items():
        shapes[tuple(values)].append((index, node_id, time_ms, values))
    known: list[tuple[int, int, Values]] = []
    for names, group in shapes.items():
        scales = [_SCALES[name] for name in names]
        rows = [
            (node_id, time_ms, *arrivals[index].evidence(time_ms))
            + tuple(round(value * scale) for value, scale in zip(values.values(), scales, strict=True))
            for index, node_id, time_ms, values in group
        ]
        here = _insert_all(connection, _insert_statement(names), rows)
        for (index, node_id, time_ms, values), stored in zip(group, here, strict=True):
            if stored:
                outcomes[index].new += 1
                touched.add((node_id, time_ms // HOUR_MS))
            else:
                known.append((index, time_ms, values))
    return known


def _insert_all(connection: Connection, statement: str, rows: Sequence[tuple[int | None, ...]]) -> list[bool]:
    """Insert what is new; for each row whether it was. Usually all are, and nothing has to be looked up."""
    savepoint = connection.begin_nested()
    if connection.exec_driver_sql(statement, rows).rowcount == len(rows):
        savepoint.commit()
        return [True] * len(rows)
    savepoint.rollback()
    times: dict[int, list[int]] = defaultdict(list)
    for row in rows:
        assert row[0] is not None
        assert row[1] is not None
        times[row[0]].append(row[1])
    known = {
        (node_id, row[0])
        for node_id, wanted in times.items()
        for row in _rows_at(connection, node_id, wanted, [t.reading.c.time_ms])
    }
    new = [(row[0], row[1]) not in known for row in rows]
    if any(new):
        connection.exec_driver_sql(statement, [row for row, fresh in zip(rows, new, strict=True) if fresh])
    return new


def _insert_statement(names: Sequence[str]) -> str:
    columns = ", ".join(("node_id", "time_ms", *t.EVIDENCE, *names))
    marks = ", ".join("?" * (2 + len(t.EVIDENCE) + len(names)))
    return f"INSERT INTO reading ({columns}) VALUES ({marks}) ON CONFLICT DO NOTHING"  # noqa: S608 - catalogue names


def _rows_at(connection: Connection, node_id: int, wanted: Collection[int], columns: Sequence[Any]) -> Iterator[Any]:
    times = sorted(wanted)
    for start in range(0, len(times), 500):
        part = times[start : start + 500]
        yield from connection.execute(
            select(*columns).where(t.reading.c.node_id == node_id, t.reading.c.time_ms.in_(part))
        )


def _merge(
    connection: Connection,
    arrivals: Sequence[Arrival],
    outcomes: list[Outcome],
    again: Sequence[tuple[int, int, Values]],
    sealed: set[tuple[int, int]],
    touched: set[tuple[int, int]],
) -> None:
    """Readings whose instant is known already, or whose day is sealed: compare, fill in, or add to the block."""
    by_day: dict[tuple[int, int], list[tuple[int, int, Values]]] = defaultdict(list)
    for index, time_ms, values in again:
        by_day[(arrivals[index].node_id, time_ms // DAY_MS)].append((index, time_ms, values))
    for (node_id, day), group in by_day.items():
        is_sealed = (node_id, day) in sealed
        stored = (
            _block_rows(connection, node_id, day)
            if is_sealed
            else _stored_rows(connection, node_id, {time_ms for _, time_ms, _ in group})
        )
        changed: set[int] = set()
        for index, time_ms, values in group:
            if _merge_one(connection, arrivals[index], outcomes[index], time_ms, values, stored):
                changed.add(time_ms)
                touched.add((node_id, time_ms // HOUR_MS))
            elif arrivals[index].import_id is None and stored[time_ms]["import_id"] is not None:
                # The node itself now vouches for what an import brought: undoing the import must leave it.
                stored[time_ms]["import_id"] = None
                changed.add(time_ms)
        if not changed:
            continue
        if is_sealed:
            _write_block(connection, node_id, day, stored)
        else:
            for time_ms in sorted(changed):
                connection.execute(
                    update(t.reading)
                    .where(t.reading.c.node_id == node_id, t.reading.c.time_ms == time_ms)
                    .values(**{k: v for k, v in stored[time_ms].items() if k != "time_ms"})
                )


def _merge_one(
    connection: Connection,
    arrival: Arrival,
    outcome: Outcome,
    time_ms: int,
    values: Values,
    stored: dict[int, Stored],
) -> bool:
    """Merge one reading into the stored rows; true where something was added."""
    offered = {name: fixed_point(name, value) for name, value in values.items()}
    row = stored.get(time_ms)
    if row is None:
        fresh: Stored = dict.fromkeys(_ALL)
        fresh.update(zip(t.EVIDENCE, arrival.evidence(time_ms), strict=True))
        fresh.update(offered)
        fresh["time_ms"] = time_ms
        stored[time_ms] = fresh
        outcome.new += 1
        return True
    filled = False
    for name, number in offered.items():
        present = row[name]
        if present is None:
            row[name] = number
            filled = True
            if arrival.import_id is not None and row["import_id"] != arrival.import_id:
                connection.execute(
                    t.import_fill.insert().values(
                        import_id=arrival.import_id, node_id=arrival.node_id, time_ms=time_ms, quantity=name
                    )
                )
        elif present != number:
            unit = BY_NAME[name].unit
            outcome.contradictions.append(
                Remark(
                    "contradiction",
                    f"{name} is already stored as {present / _SCALES[name]:g} {unit} for this instant; "
                    f"the later value {number / _SCALES[name]:g} {unit} is kept aside.",
                    time_ms,
                    name,
                    values[name],
                )
            )
    outcome.filled += filled
    outcome.repeated += not filled
    return filled


def _stored_rows(connection: Connection, node_id: int, times: Collection[int]) -> dict[int, Stored]:
    columns = [t.reading.c[name] for name in _ALL]
    return {row[0]: dict(zip(_ALL, row, strict=True)) for row in _rows_at(connection, node_id, times, columns)}


def _block_rows(connection: Connection, node_id: int, day: int) -> dict[int, Stored]:
    data = connection.execute(
        select(t.reading_block.c.data).where(
            t.reading_block.c.node_id == node_id, t.reading_block.c.utc_day == day
        )
    ).scalar_one()
    columns = unpack(data)
    lists: dict[str, list[int | None]] = {name: [None] * columns.count for name in _ALL}
    for name, values in columns.values.items():
        shown = columns.present[name].tolist()
        lists[name] = [v if s else None for v, s in zip(values.tolist(), shown, strict=True)]
    return {row[0]: dict(zip(_ALL, row, strict=True)) for row in zip(*lists.values(), strict=True)}


def _write_block(connection: Connection, node_id: int, day: int, rows: dict[int, Stored]) -> None:
    ordered = [rows[time_ms] for time_ms in sorted(rows)]
    values: dict[str, Any] = {}
    present: dict[str, Any] = {}
    for name in _ALL:
        column = [row[name] for row in ordered]
        present[name] = np.array([v is not None for v in column])
        values[name] = np.array([0 if v is None else v for v in column], np.int64)
    block = pack(Columns(len(ordered), values, present))
    where = (t.reading_block.c.node_id == node_id, t.reading_block.c.utc_day == day)
    connection.execute(delete(t.reading_block).where(*where))
    if ordered:
        connection.execute(
            t.reading_block.insert().values(node_id=node_id, utc_day=day, count=len(ordered), data=block)
        )


def _mark(connection: Connection, touched: set[tuple[int, int]]) -> None:
    """Note which hours of which node changed, under one revision a transaction."""
    revision = next_revision(connection)
    connection.exec_driver_sql(
        "INSERT INTO reading_mark (node_id, utc_hour, revision) VALUES (?, ?, ?) "
        "ON CONFLICT (node_id, utc_hour) DO UPDATE SET revision = excluded.revision",
        [(node_id, hour, revision) for node_id, hour in sorted(touched)],
    )


def seal(connection: Connection, node_id: int, before_ms: int, most: int = 40) -> int:
    """Turn a node's rows of whole UTC days before an instant into blocks; how many days were sealed.

    At most ``most`` days in one transaction, so that receiving never waits long.
    """
    r = t.reading.c
    last_day = before_ms // DAY_MS
    sealed = 0
    while sealed < most:
        first = connection.execute(select(func.min(r.time_ms)).where(r.node_id == node_id)).scalar()
        if first is None or first // DAY_MS >= last_day:
            break
        day = first // DAY_MS
        inside = (r.node_id == node_id, r.time_ms >= day * DAY_MS, r.time_ms < (day + 1) * DAY_MS)
        result = connection.execute(select(*(r[name] for name in _ALL)).where(*inside))
        _write_block(connection, node_id, day, {row[0]: dict(zip(_ALL, row, strict=True)) for row in result})
        connection.execute(delete(t.reading).where(*inside))
        sealed += 1
    return sealed


def read(
    connection: Connection,
    node_id: int,
    start_ms: int,
    end_ms: int,
    names: Collection[str] | None = None,
) -> Series:
    """A node's readings with ``start_ms <= time < end_ms``, as they were sent, in catalogue units.

    Parameters
    ----------
    names
        Quantities wanted; all where not given. Readings that have none of them are still there, with NaN.
    """
    wanted = NAMES if names is None else tuple(n for n in NAMES if n in names)
    parts = [
        part
        for part in (
            *_read_blocks(connection, node_id, start_ms, end_ms, wanted),
            _read_rows(connection, node_id, start_ms, end_ms, wanted),
        )
        if len(part)
    ]
    if not parts:
        return EMPTY
    parts.sort(key=lambda part: int(part.time_ms[0]))
    if len(parts) == 1:
        return parts[0]
    present = [name for name in wanted if any(name in part.columns for part in parts)]
    series = Series(
        np.concatenate([part.time_ms for part in parts]),
        {name: np.concatenate([part.get(name) for part in parts]) for name in present},
    )
    if (np.diff(series.time_ms) > 0).all():
        return series
    # A sealed day lies between two that are not (a late backlog).
    order = np.argsort(series.time_ms)
    return Series(series.time_ms[order], {name: values[order] for name, values in series.columns.items()})


def _read_blocks(
    connection: Connection, node_id: int, start_ms: int, end_ms: int, wanted: Sequence[str]
) -> Iterator[Series]:
    b = t.reading_block.c
    found = connection.execute(
        select(b.data)
        .where(b.node_id == node_id, b.utc_day >= start_ms // DAY_MS, b.utc_day <= (end_ms - 1) // DAY_MS)
        .order_by(b.utc_day)
    ).scalars()
    for data in found.all():
        columns = unpack(data, {"time_ms", *wanted})
        values = {
            name: np.where(columns.present[name], columns.values[name] / _SCALES[name], np.nan)
            for name in wanted
            if name in columns.values
        }
        yield Series(columns.values["time_ms"], values).between(start_ms, end_ms)


def _read_rows(
    connection: Connection, node_id: int, start_ms: int, end_ms: int, wanted: Sequence[str]
) -> Series:
    columns = ", ".join(("time_ms", *wanted))
    rows = connection.exec_driver_sql(
        f"SELECT {columns} FROM reading WHERE node_id = ? AND time_ms >= ? AND time_ms < ? ORDER BY time_ms",  # noqa: S608 - catalogue names
        (node_id, start_ms, end_ms),
    ).cursor.fetchall()
    if not rows:
        return EMPTY
    # Instants and fixed-point values are far below 2**53, so that floats hold them exactly.
    grid = np.array(rows, np.float64)
    present = ~np.isnan(grid).all(axis=0)
    return Series(
        grid[:, 0].astype(np.int64),
        {name: grid[:, i] / _SCALES[name] for i, name in enumerate(wanted, start=1) if present[i]},
    )


def bounds(connection: Connection, node_id: int) -> tuple[int, int] | None:
    """First and last instant of a node's readings."""
    r, b = t.reading.c, t.reading_block.c
    low, high = connection.execute(
        select(func.min(r.time_ms), func.max(r.time_ms)).where(r.node_id == node_id)
    ).one()
    ends = [value for value in (low, high) if value is not None]
    for order in (b.utc_day.asc(), b.utc_day.desc()):
        data = connection.execute(
            select(b.data).where(b.node_id == node_id).order_by(order).limit(1)
        ).scalar()
        if data is not None:
            times = unpack(data, {"time_ms"}).values["time_ms"]
            ends += [int(times[0]), int(times[-1])]
    return (min(ends), max(ends)) if ends else None


def count(connection: Connection, node_id: int) -> int:
    """Number of a node's readings."""
    rows = connection.execute(select(func.count()).where(t.reading.c.node_id == node_id)).scalar_one()
    sealed = connection.execute(
        select(func.coalesce(func.sum(t.reading_block.c.count), 0)).where(t.reading_block.c.node_id == node_id)
    ).scalar_one()
    return int(rows) + int(sealed)


def newest_revision(connection: Connection, node_id: int, start_ms: int, end_ms: int) -> int:
    """The revision of the latest change to a node's readings in the hours that a stretch touches; 0 for none."""
    m = t.reading_mark.c
    found = connection.execute(
        select(func.max(m.revision)).where(
            m.node_id == node_id, m.utc_hour >= start_ms // HOUR_MS, m.utc_hour <= (end_ms - 1) // HOUR_MS
        )
    ).scalar()
    return int(found or 0)
