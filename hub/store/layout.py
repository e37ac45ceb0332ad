"""How readings lie in the database: rows of a day that is written to, a sealed block of one that is not."""

from collections.abc import Sequence

import numpy as np
from sqlalchemy import Connection, delete, select

from hub.quantities import CATALOGUE, NAMES
from hub.store import tables as t
from hub.store.blocks import Columns, Ints, Present, pack, unpack

DAY_MS = 86_400_000
HOUR_MS = 3_600_000

SCALES = {q.name: q.scale for q in CATALOGUE}
COLUMNS = ("time_ms", *t.EVIDENCE, *NAMES)

# One reading as it is stored: integers, nothing where it has no such value; in the order of ``COLUMNS``, or by name.
Line = tuple[int | None, ...]
Stored = dict[str, int | None]


def fixed_point(quantity: str, value: float) -> int:
    """The stored integer of a value in catalogue units."""
    return round(value * SCALES[quantity])


def block_lines(connection: Connection, node_id: int, day: int) -> list[Line]:
    """The readings of a sealed day in order of time."""
    data = connection.execute(
        select(t.reading_block.c.data).where(t.reading_block.c.node_id == node_id, t.reading_block.c.utc_day == day)
    ).scalar_one()
    columns = unpack(data)
    lists: list[list[int | None]] = []
    for name in COLUMNS:
        shown, values = columns.present.get(name), columns.values.get(name)
        if shown is None or values is None:
            lists.append([None] * columns.count)
        else:
            column: list[int | None] = values.tolist()
            for i in np.flatnonzero(~shown).tolist():
                column[i] = None
            lists.append(column)
    return list(zip(*lists, strict=True))


def write_block(connection: Connection, node_id: int, day: int, lines: Sequence[Line]) -> None:
    """Put readings, in order of time, in place of a day's block; no readings, no block."""
    values: dict[str, Ints] = {}
    present: dict[str, Present] = {}
    for name, column in zip(COLUMNS, zip(*lines, strict=True), strict=False):
        missing = column.count(None)
        if missing < len(lines):
            values[name] = np.array([number or 0 for number in column] if missing else column, np.int64)
            present[name] = (
                np.array([number is not None for number in column]) if missing else np.ones(len(lines), np.bool_)
            )
    block = pack(Columns(len(lines), values, present))
    where = (t.reading_block.c.node_id == node_id, t.reading_block.c.utc_day == day)
    connection.execute(delete(t.reading_block).where(*where))
    if lines:
        connection.execute(t.reading_block.insert().values(node_id=node_id, utc_day=day, count=len(lines), data=block))
