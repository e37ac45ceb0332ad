import csv
import datetime as dt
import io
import json

import pyarrow.parquet as pq
import pytest
from store.examples import filled

from hub.errors import UsageError
from hub.store import export
from hub.store.export import FORMATS, TABLES, Selection


@pytest.fixture
def hub(database, inventory):
    """A read connection on a database with figures and readings."""
    with database.write() as connection:
        filled(connection)
    with database.read() as connection:
        yield connection


def written(connection, table, form, **chosen):
    stream = io.BytesIO()
    number = export.write(connection, table, Selection(**chosen), form, stream)
    return number, stream.getvalue()


def as_text(value):
    """How a value stands in a CSV file."""
    return "" if value is None else str(value)


def as_instant(value):
    return dt.datetime.fromisoformat(value) if value else None


@pytest.mark.parametrize("table", TABLES)
def test_the_three_forms_tell_the_same(hub, table):
    number, text = written(hub, table, "json")
    told = json.loads(text)
    assert len(told) == number > 0
    lines = list(csv.reader(io.StringIO(written(hub, table, "csv")[1].decode(), newline="")))
    assert tuple(lines[0]) == TABLES[table].columns
    assert lines[1:] == [[as_text(value) for value in row.values()] for row in told]
    found = pq.read_table(io.BytesIO(written(hub, table, "parquet")[1]))
    assert tuple(found.column_names) == TABLES[table].columns
    instants = {name for name in found.column_names if str(found.schema.field(name).type) == "timestamp[ms, tz=UTC]"}
    assert instants == {"time", "start", "end", "full_at"} & set(found.column_names)
    assert found.to_pylist() == [
        {name: as_instant(value) if name in instants else value for name, value in row.items()} for row in told
    ]


@pytest.mark.parametrize("form", FORMATS)
@pytest.mark.parametrize("table", TABLES)
def test_writing_twice_gives_the_same_bytes(hub, table, form):
    assert written(hub, table, form) == written(hub, table, form)


@pytest.mark.parametrize("form", FORMATS)
@pytest.mark.parametrize("table", TABLES)
def test_no_rows_are_a_file_all_the_same(database, table, form):
    with database.read() as connection:
        number, data = written(connection, table, form)
    assert number == 0
    match form:
        case "csv":
            assert data.decode() == ",".join(TABLES[table].columns) + "\r\n"
        case "json":
            assert json.loads(data) == []
        case "parquet":
            assert pq.read_table(io.BytesIO(data)).num_rows == 0


@pytest.mark.parametrize("label", ["=1+1", "+1", "-1", "@x", "\tx", "\rx"])
def test_text_that_a_spreadsheet_would_run_is_quoted_as_text(label):
    stream = io.BytesIO()
    export._write_csv(("pack", "charge_ah"), iter([{"pack": label, "charge_ah": -1.5}]), stream)
    _, found = csv.reader(io.StringIO(stream.getvalue().decode(), newline=""))
    assert found == [f"'{label}", "-1.5"]


def test_lines_end_as_the_standard_says_and_text_is_quoted_where_needed(hub):
    # RFC 4180, section 2, items 1 and 6.
    data = written(hub, "days", "csv")[1]
    assert data.count(b"\r\n") == data.count(b"\n")
    stream = io.BytesIO()
    export._write_csv(("pack",), iter([{"pack": 'a,"b"'}]), stream)
    assert stream.getvalue() == b'pack\r\n"a,""b"""\r\n'


def test_progress_is_told_now_and_then_and_at_the_end(hub):
    told = []
    stream = io.BytesIO()
    number = export.write(hub, "readings", Selection(), "json", stream, told.append)
    assert told == [number]
    assert list(export._told(iter([{}] * 2500), told.append)) == [{}] * 2500
    assert told[1:] == [1000, 2000, 2500]


def test_what_is_not_known_is_refused_before_a_byte_is_written(hub):
    for chosen in ({"node": "mast"}, {"start": "x"}):
        stream = io.BytesIO()
        with pytest.raises(UsageError):
            export.write(hub, "days", Selection(**chosen), "csv", stream)
        assert stream.getvalue() == b""
    with pytest.raises(UsageError, match="no table"):
        written(hub, "nothing", "json")


def test_many_rows_go_to_parquet_a_group_at_a_time(monkeypatch, hub):
    monkeypatch.setattr(export, "PARQUET_ROWS", 50)
    number, data = written(hub, "readings", "parquet")
    file = pq.ParquetFile(io.BytesIO(data))
    assert file.metadata.num_rows == number
    assert file.metadata.num_row_groups == -(-number // 50)
