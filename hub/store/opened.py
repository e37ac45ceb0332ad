"""One UTC day of one node opened for changing, whichever way its readings are stored.

Beside the readings stands who vouches for them. A reading belongs to the import that brought it (``import_id``) until
the node itself sends it; where that is true of single values only, they are listed one by one as an import's fills.
"""

from collections.abc import Collection, Iterator, Sequence

from sqlalchemy import Connection, select

from hub.quantities import NAMES
from hub.store import tables as t
from hub.store.layout import COLUMNS, DAY_MS, Line, Stored, block_lines, write_block

# SQLite takes at least this many parameters in one statement, whatever its build (limits of SQLite, 999 before 3.32).
PARAMETERS = 900
_SELECT = f"SELECT {', '.join(COLUMNS)} FROM reading WHERE node_id = ? AND time_ms IN "  # noqa: S608 - own names
_PUT = (
    f"REPLACE INTO reading (node_id, {', '.join(COLUMNS)}) "  # noqa: S608 - own names
    f"VALUES (?, {', '.join('?' * len(COLUMNS))})"
)


class OpenedDay:
    """A day's readings. ``open`` some, change ``rows`` and ``fills``, name each instant in ``changed``, ``save``.

    Attributes
    ----------
    rows
        Instant to reading, of those that were opened and are there.
    fills
        Instant and quantity to the import that alone vouches for that value.
    changed
        Instants whose reading differs from what is stored, or is gone.
    """

    def __init__(self, connection: Connection, node_id: int, day: int, *, sealed: bool) -> None:
        self._connection = connection
        self._node_id = node_id
        self._day = day
        self._block = {_instant(line): line for line in block_lines(connection, node_id, day)} if sealed else None
        self.rows: dict[int, Stored] = {}
        self.fills = _fills(connection, node_id, day)
        self._fills_before = dict(self.fills)
        self.changed: set[int] = set()

    def open(self, times: Collection[int]) -> None:
        """Open the readings of some instants."""
        if self._block is None:
            lines = _stored_lines(self._connection, self._node_id, times)
        else:
            lines = [self._block[time_ms] for time_ms in times if time_ms in self._block]
        self.rows |= {_instant(line): dict(zip(COLUMNS, line, strict=True)) for line in lines}

    def of_import(self, import_id: int) -> set[int]:
        """Instants of which an import vouches for the reading or a value."""
        filled = {time_ms for (time_ms, _), filler in self.fills.items() if filler == import_id}
        if self._block is not None:
            place = COLUMNS.index("import_id")
            return filled | {time_ms for time_ms, line in self._block.items() if line[place] == import_id}
        r = t.reading.c
        inside = (r.node_id == self._node_id, r.time_ms >= self._day * DAY_MS, r.time_ms < (self._day + 1) * DAY_MS)
        own = select(r.time_ms).where(*inside, r.import_id == import_id)
        return filled | set(self._connection.execute(own).scalars())

    def values(self, time_ms: int) -> list[str]:
        """The quantities that a reading has."""
        row = self.rows[time_ms]
        return [name for name in NAMES if row[name] is not None]

    def save(self) -> None:
        """Write what changed."""
        if self.changed and self._block is not None:
            for time_ms in self.changed:
                self._block.pop(time_ms, None)
            self._block |= {time_ms: self._line(time_ms) for time_ms in self.changed if time_ms in self.rows}
            lines = [self._block[time_ms] for time_ms in sorted(self._block)]
            write_block(self._connection, self._node_id, self._day, lines)
        elif self.changed:
            self._save_rows()
        self._save_fills()

    def _line(self, time_ms: int) -> Line:
        return tuple(self.rows[time_ms].values())

    def _save_rows(self) -> None:
        kept = [time_ms for time_ms in sorted(self.changed) if time_ms in self.rows]
        gone = [time_ms for time_ms in sorted(self.changed) if time_ms not in self.rows]
        if kept:
            self._connection.exec_driver_sql(_PUT, [(self._node_id, *self._line(time_ms)) for time_ms in kept])
        if gone:
            self._connection.exec_driver_sql(
                "DELETE FROM reading WHERE node_id = ? AND time_ms = ?", [(self._node_id, time_ms) for time_ms in gone]
            )

    def _save_fills(self) -> None:
        before, now = set(self._fills_before.items()), set(self.fills.items())
        gone, added = sorted(before - now), sorted(now - before)
        if gone:
            self._connection.exec_driver_sql(
                "DELETE FROM import_fill WHERE node_id = ? AND time_ms = ? AND quantity = ?",
                [(self._node_id, *key) for key, _ in gone],
            )
        if added:
            self._connection.exec_driver_sql(
                "INSERT INTO import_fill (node_id, time_ms, quantity, import_id) VALUES (?, ?, ?, ?)",
                [(self._node_id, *key, import_id) for key, import_id in added],
            )


def in_parts(values: Collection[int]) -> Iterator[Sequence[int]]:
    """Values in order, no more at once than a statement takes."""
    ordered = sorted(values)
    for start in range(0, len(ordered), PARAMETERS):
        yield ordered[start : start + PARAMETERS]


def _instant(line: Line) -> int:
    time_ms = line[0]
    assert time_ms is not None
    return time_ms


def _stored_lines(connection: Connection, node_id: int, times: Collection[int]) -> list[Line]:
    found: list[Line] = []
    for part in in_parts(times):
        rows = connection.exec_driver_sql(f"{_SELECT}({', '.join('?' * len(part))})", (node_id, *part))
        found += [tuple(row) for row in rows.all()]
    return found


def _fills(connection: Connection, node_id: int, day: int) -> dict[tuple[int, str], int]:
    f = t.import_fill.c
    rows = connection.execute(
        t.import_fill.select().where(f.node_id == node_id, f.time_ms >= day * DAY_MS, f.time_ms < (day + 1) * DAY_MS)
    )
    return {(row.time_ms, row.quantity): row.import_id for row in rows}
