"""Storing readings, each once.

The first value stored for a quantity of an instant stays. The same value again is a repeat; a value for a quantity
that was missing fills in; another value is a contradiction: it is handed back to be set aside and counted.
"""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from sqlalchemy import Connection, select

from hub.errors import PayloadError
from hub.store import tables as t
from hub.store.arrivals import Arrival, Meeting, Outcome
from hub.store.facts import next_revision
from hub.store.layout import DAY_MS, HOUR_MS, SCALES
from hub.store.merge import merge
from hub.store.opened import in_parts

# Beyond this a stored integer does not fit its 64 bits.
LARGEST = 2.0**63

_HEAD = ("node_id", "time_ms", *t.EVIDENCE)


@dataclass(slots=True)
class _Place:
    """What lies where the arriving readings of one node belong, and the hours that change."""

    sealed: set[int]
    known: set[int]
    hours: set[int] = field(default_factory=set)


@dataclass(slots=True)
class _Shape:
    """Readings that have the same quantities: what comes before their values, and the values one after another."""

    names: tuple[str, ...]
    heads: list[tuple[int | None, ...]] = field(default_factory=list)
    values: list[float] = field(default_factory=list)

    def insert(self, connection: Connection) -> None:
        """Insert all of them. Columns without any value are left out: binding nothing costs as much as a value."""
        scales = np.array([SCALES[name] for name in self.names], np.float64)
        numbers = np.rint(np.array(self.values).reshape(-1, scales.size) * scales)
        if not (np.abs(numbers) < LARGEST).all():
            raise PayloadError("A value is not a finite number, or beyond what can be stored; leave it out.")
        columns: dict[str, Sequence[int | None]] = dict(zip(_HEAD, zip(*self.heads, strict=True), strict=True))
        columns |= zip(self.names, numbers.astype(np.int64).T.tolist(), strict=True)
        stated = {name: column for name, column in columns.items() if column.count(None) < len(column)}
        marks = ", ".join("?" * len(stated))
        statement = f"INSERT INTO reading ({', '.join(stated)}) VALUES ({marks})"  # noqa: S608 - own names
        connection.exec_driver_sql(statement, list(zip(*stated.values(), strict=True)))


def append(connection: Connection, arrivals: Sequence[Arrival]) -> list[Outcome]:
    """Store readings, each once; outcomes in the order of the arrivals."""
    outcomes = [Outcome() for _ in arrivals]
    places = _places(connection, arrivals)
    meetings = _insert(connection, arrivals, outcomes, places)
    touched = {(node_id, hour) for node_id, place in places.items() for hour in place.hours}
    if meetings:
        touched |= merge(connection, meetings, {node_id: place.sealed for node_id, place in places.items()})
    if touched:
        mark(connection, touched)
    return outcomes


def _places(connection: Connection, arrivals: Sequence[Arrival]) -> dict[int, _Place]:
    """Usually nothing lies there yet, and one question tells so for a node."""
    times: dict[int, list[int]] = defaultdict(list)
    for arrival in arrivals:
        times[arrival.node_id] += arrival.readings
    places: dict[int, _Place] = {}
    for node_id, wanted in times.items():
        if wanted:
            first, last = min(wanted), max(wanted)
            rows, blocks = connection.exec_driver_sql(
                "SELECT EXISTS (SELECT 1 FROM reading WHERE node_id = ? AND time_ms BETWEEN ? AND ?), "
                "EXISTS (SELECT 1 FROM reading_block WHERE node_id = ? AND utc_day BETWEEN ? AND ?)",
                (node_id, first, last, node_id, first // DAY_MS, last // DAY_MS),
            ).one()
            places[node_id] = _Place(
                _sealed_days(connection, node_id, first, last) if blocks else set(),
                _known_times(connection, node_id, set(wanted)) if rows else set(),
            )
    return places


def _sealed_days(connection: Connection, node_id: int, first_ms: int, last_ms: int) -> set[int]:
    b = t.reading_block.c
    inside = (b.node_id == node_id, b.utc_day >= first_ms // DAY_MS, b.utc_day <= last_ms // DAY_MS)
    return set(connection.execute(select(b.utc_day).where(*inside)).scalars())


def _known_times(connection: Connection, node_id: int, times: set[int]) -> set[int]:
    known: set[int] = set()
    for part in in_parts(times):
        found = f"SELECT time_ms FROM reading WHERE node_id = ? AND time_ms IN ({', '.join('?' * len(part))})"  # noqa: S608 - marks only
        known.update(connection.exec_driver_sql(found, (node_id, *part)).scalars())
    return known


def _insert(
    connection: Connection, arrivals: Sequence[Arrival], outcomes: Sequence[Outcome], places: dict[int, _Place]
) -> list[Meeting]:
    """Insert the readings that nobody had yet; hand back the others, in the order in which they came.

    The inner loop runs once a reading: it holds nothing that could stand outside it.
    """
    meetings: list[Meeting] = []
    shapes: dict[tuple[str, ...], _Shape] = {}
    for arrival, outcome in zip(arrivals, outcomes, strict=True):
        place = places.get(arrival.node_id)
        if place is None:
            continue
        known, sealed, hours = place.known, place.sealed, place.hours
        node_id, received_ms, device_ms = arrival.node_id, arrival.received_ms, arrival.device_ms.get
        boot, sequence, import_id = arrival.boot, arrival.sequence, arrival.import_id
        for time_ms, values in arrival.readings.items():
            if not values:
                continue
            if time_ms in known or (sealed and time_ms // DAY_MS in sealed):
                meetings.append(Meeting(arrival, outcome, time_ms, values))
                continue
            names = tuple(values)
            shape = shapes.get(names)
            if shape is None:
                shape = shapes[names] = _Shape(names)
            shape.heads.append((node_id, time_ms, received_ms, device_ms(time_ms), boot, sequence, import_id))
            shape.values += values.values()
            known.add(time_ms)
            hours.add(time_ms // HOUR_MS)
            outcome.new += 1
    for shape in shapes.values():
        shape.insert(connection)
    return meetings


def mark(connection: Connection, touched: set[tuple[int, int]]) -> None:
    """Note which hours of which node changed, under one revision a transaction."""
    revision = next_revision(connection)
    connection.exec_driver_sql(
        "INSERT INTO reading_mark (node_id, utc_hour, revision) VALUES (?, ?, ?) "
        "ON CONFLICT (node_id, utc_hour) DO UPDATE SET revision = excluded.revision",
        [(node_id, hour, revision) for node_id, hour in sorted(touched)],
    )
