"""Export tables as files: CSV, JSON or Parquet."""

import csv
import datetime as dt
import io
import json
from collections.abc import Callable, Iterator
from typing import IO, Literal

from sqlalchemy import Connection

from hub.store.export_rows import TABLES, Row, Selection, Table, rows, table_named

__all__ = ["FORMATS", "TABLES", "Format", "Row", "Selection", "Table", "rows", "table_named", "write"]

Format = Literal["csv", "json", "parquet"]
FORMATS: tuple[Format, ...] = ("csv", "json", "parquet")

PARQUET_ROWS = 50_000


def write(
    connection: Connection,
    table: str,
    selection: Selection,
    form: Format,
    stream: IO[bytes],
    progress: Callable[[int], None] | None = None,
) -> int:
    """Write a table to a binary stream; the number of rows.

    Parameters
    ----------
    progress
        Called with the number of rows so far, now and then.
    """
    found = _told((row for _, row in rows(connection, table, selection)), progress)
    columns = table_named(table).columns
    match form:
        case "csv":
            return _write_csv(columns, found, stream)
        case "json":
            return _write_json(found, stream)
        case "parquet":
            return _write_parquet(columns, found, stream)


def _told(found: Iterator[Row], progress: Callable[[int], None] | None) -> Iterator[Row]:
    number = 0
    for number, row in enumerate(found, start=1):
        if progress is not None and number % 1000 == 0:
            progress(number)
        yield row
    if progress is not None:
        progress(number)


def _write_csv(columns: tuple[str, ...], found: Iterator[Row], stream: IO[bytes]) -> int:
    """RFC 4180: comma, CRLF, quotes where needed. Text that a spreadsheet would run as a formula is quoted as text."""
    text = io.TextIOWrapper(stream, encoding="utf-8", newline="", write_through=True)
    writer = csv.writer(text)
    writer.writerow(columns)
    number = 0
    for row in found:
        writer.writerow([_cell(row[column]) for column in columns])
        number += 1
    text.detach()
    return number


def _cell(value: object) -> object:
    if isinstance(value, str) and value[:1] in {"=", "+", "-", "@", "\t", "\r"}:
        return f"'{value}"
    return "" if value is None else value


def _write_json(found: Iterator[Row], stream: IO[bytes]) -> int:
    number = 0
    stream.write(b"[")
    for row in found:
        stream.write(b",\n" if number else b"\n")
        stream.write(json.dumps(row, ensure_ascii=False, allow_nan=False).encode())
        number += 1
    stream.write(b"\n]\n" if number else b"]\n")
    return number


def _write_parquet(columns: tuple[str, ...], found: Iterator[Row], stream: IO[bytes]) -> int:
    import pyarrow as pa
    import pyarrow.parquet as pq

    texts = {"time", "node", "pack", "date", "start", "end", "ended_by", "full_at", "set_aside"}
    instants = {"time", "start", "end", "full_at"}
    schema = pa.schema(
        [
            (
                name,
                pa.timestamp("ms", tz="UTC") if name in instants else pa.string() if name in texts else pa.float64(),
            )
            for name in columns
        ]
    )
    number = 0
    with pq.ParquetWriter(stream, schema, compression="zstd") as writer:
        batch: list[Row] = []

        def flush() -> None:
            for row in batch:
                for name in instants & row.keys():
                    row[name] = dt.datetime.fromisoformat(row[name]) if row[name] else None
            writer.write_table(pa.Table.from_pylist(batch, schema=schema))
            batch.clear()

        for row in found:
            batch.append(row)
            number += 1
            if len(batch) >= PARQUET_ROWS:
                flush()
        if batch or not number:
            flush()
    return number
