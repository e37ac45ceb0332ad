"""Storing readings, each once.

The first value stored for a quantity of an instant stays. The same value again is a repeat; a value for a quantity
that was missing fills in; another value is a contradiction: it is handed back to be set aside and counted.
"""

from collections import defaultdict
from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

from sqlalchemy import Connection, select, tuple_, update

from hub.quantities import BY_NAME
from hub.store import tables as t
from hub.store.facts import next_revision
from hub.store.layout import COLUMNS, DAY_MS, HOUR_MS, SCALES, Stored, block_rows, fixed_point, write_block
from hub.telemetry.message import Remark, Values


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
        mark(connection, touched)
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
        scales = [SCALES[name] for name in names]
        rows = [
            (
                node_id,
                time_ms,
                *arrivals[index].evidence(time_ms),
                *[round(value * scale) for value, scale in zip(values.values(), scales, strict=True)],
            )
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
            block_rows(connection, node_id, day)
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
            write_block(connection, node_id, day, stored)
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
        fresh: Stored = dict.fromkeys(COLUMNS)
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
                    f"{name} is already stored as {present / SCALES[name]:g} {unit} for this instant; "
                    f"the later value {number / SCALES[name]:g} {unit} is kept aside.",
                    time_ms,
                    name,
                    values[name],
                )
            )
    outcome.filled += filled
    outcome.repeated += not filled
    return filled


def _stored_rows(connection: Connection, node_id: int, times: Collection[int]) -> dict[int, Stored]:
    columns = [t.reading.c[name] for name in COLUMNS]
    return {row[0]: dict(zip(COLUMNS, row, strict=True)) for row in _rows_at(connection, node_id, times, columns)}


def mark(connection: Connection, touched: set[tuple[int, int]]) -> None:
    """Note which hours of which node changed, under one revision a transaction."""
    revision = next_revision(connection)
    connection.exec_driver_sql(
        "INSERT INTO reading_mark (node_id, utc_hour, revision) VALUES (?, ?, ?) "
        "ON CONFLICT (node_id, utc_hour) DO UPDATE SET revision = excluded.revision",
        [(node_id, hour, revision) for node_id, hour in sorted(touched)],
    )
