"""How readings lie in the database: rows of a day that is written to, a sealed block of one that is not."""

from typing import Any

import numpy as np
from sqlalchemy import Connection, delete, select

from hub.quantities import CATALOGUE, NAMES
from hub.store import tables as t
from hub.store.blocks import Columns, pack, unpack

DAY_MS = 86_400_000
HOUR_MS = 3_600_000

SCALES = {q.name: q.scale for q in CATALOGUE}
COLUMNS = ("time_ms", *t.EVIDENCE, *NAMES)

# One reading as it is stored: integers by column, nothing where it has no such value.
Stored = dict[str, int | None]


def fixed_point(quantity: str, value: float) -> int:
    """The stored integer of a value in catalogue units."""
    return round(value * SCALES[quantity])


def block_rows(connection: Connection, node_id: int, day: int) -> dict[int, Stored]:
    """The readings of a sealed day by instant."""
    data = connection.execute(
        select(t.reading_block.c.data).where(t.reading_block.c.node_id == node_id, t.reading_block.c.utc_day == day)
    ).scalar_one()
    columns = unpack(data)
    lists: dict[str, list[int | None]] = {name: [None] * columns.count for name in COLUMNS}
    for name, values in columns.values.items():
        shown = columns.present[name].tolist()
        lists[name] = [v if s else None for v, s in zip(values.tolist(), shown, strict=True)]
    return {row[0]: dict(zip(COLUMNS, row, strict=True)) for row in zip(*lists.values(), strict=True)}


def write_block(connection: Connection, node_id: int, day: int, rows: dict[int, Stored]) -> None:
    """Put readings in place of a day's block; no readings, no block."""
    ordered = [rows[time_ms] for time_ms in sorted(rows)]
    values: dict[str, Any] = {}
    present: dict[str, Any] = {}
    for name in COLUMNS:
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
