"""Readings out of the database, and the small interface that hides how they lie in it.

A node's UTC day lies either as rows (while it is being written to) or as one sealed block, never as both. Whoever
reads gets a ``Series`` and cannot tell which it was.
"""

from collections.abc import Collection, Iterator, Sequence

import numpy as np
from sqlalchemy import Connection, delete, func, select

from hub.quantities import NAMES
from hub.series import EMPTY, Series
from hub.store import tables as t
from hub.store.append import append
from hub.store.arrivals import Arrival, Outcome
from hub.store.blocks import unpack
from hub.store.layout import COLUMNS, DAY_MS, HOUR_MS, SCALES, fixed_point, write_block

__all__ = [
    "DAY_MS",
    "HOUR_MS",
    "Arrival",
    "Outcome",
    "append",
    "bounds",
    "changed_hours",
    "count",
    "fixed_point",
    "newest_revision",
    "read",
    "seal",
]


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
        rows = connection.execute(select(*(r[name] for name in COLUMNS)).where(*inside).order_by(r.time_ms))
        write_block(connection, node_id, day, [tuple(row) for row in rows.all()])
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
    times = np.concatenate([part.time_ms for part in parts])
    present = [name for name in wanted if any(name in part.columns for part in parts)]
    columns = {name: np.concatenate([part.get(name) for part in parts]) for name in present}
    if not (times[1:] > times[:-1]).all():
        # A sealed day lies between two that are not (a late backlog).
        order = np.argsort(times)
        times, columns = times[order], {name: values[order] for name, values in columns.items()}
    return Series(times, columns)


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
        first, last = np.searchsorted(columns.values["time_ms"], [start_ms, end_ms])
        part = slice(int(first), int(last))
        yield Series(
            columns.values["time_ms"][part],
            {
                name: np.where(columns.present[name][part], columns.values[name][part] / SCALES[name], np.nan)
                for name in wanted
                if name in columns.values and columns.present[name][part].any()
            },
        )


def _read_rows(connection: Connection, node_id: int, start_ms: int, end_ms: int, wanted: Sequence[str]) -> Series:
    columns = ", ".join(("time_ms", *wanted))
    rows = connection.exec_driver_sql(
        f"SELECT {columns} FROM reading WHERE node_id = ? AND time_ms >= ? AND time_ms < ? ORDER BY time_ms",  # noqa: S608 - catalogue names
        (node_id, start_ms, end_ms),
    ).cursor.fetchall()
    if not rows:
        return EMPTY
    # Instants and fixed-point values are far below 2**53, so that floats hold them exactly.
    grid = np.array(rows, np.float64)
    present = np.any(~np.isnan(grid), axis=0).tolist()
    return Series(
        grid[:, 0].astype(np.int64),
        {name: grid[:, i] / SCALES[name] for i, name in enumerate(wanted, start=1) if present[i]},
    )


def bounds(connection: Connection, node_id: int) -> tuple[int, int] | None:
    """First and last instant of a node's readings."""
    r, b = t.reading.c, t.reading_block.c
    low, high = connection.execute(select(func.min(r.time_ms), func.max(r.time_ms)).where(r.node_id == node_id)).one()
    ends = [value for value in (low, high) if value is not None]
    for order in (b.utc_day.asc(), b.utc_day.desc()):
        data = connection.execute(select(b.data).where(b.node_id == node_id).order_by(order).limit(1)).scalar()
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


def changed_hours(connection: Connection, node_id: int) -> tuple[list[int], list[int]]:
    """UTC hours in which a node's readings changed, in order, and the revision of each hour's latest change."""
    m = t.reading_mark.c
    found = connection.execute(
        select(m.utc_hour, m.revision).where(m.node_id == node_id).order_by(m.utc_hour)
    ).fetchall()
    return [row[0] for row in found], [row[1] for row in found]
