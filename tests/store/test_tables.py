import pytest
from sqlalchemy import Integer, Text

from hub.quantities import NAMES
from hub.store import tables as t

WITHOUT_ROWID = {"reading", "reading_block", "reading_mark", "aside_total", "import_fill"}


def test_a_reading_has_a_column_for_every_quantity_and_every_piece_of_evidence():
    assert tuple(t.reading.c.keys()) == ("node_id", "time_ms", *t.EVIDENCE, *NAMES)


def test_large_tables_are_kept_in_the_order_of_their_key(database):
    with database.read() as connection:
        statements = dict(
            tuple(row) for row in connection.exec_driver_sql("SELECT name, sql FROM sqlite_master WHERE type = 'table'")
        )
        assert {name for name, sql in statements.items() if "WITHOUT ROWID" in sql.upper()} == WITHOUT_ROWID
        for name in WITHOUT_ROWID:
            with pytest.raises(Exception, match="no such column: rowid"):
                connection.exec_driver_sql(f"SELECT rowid FROM {name}")


def test_every_constraint_has_a_name():
    # An unnamed one could not be dropped by a later migration.
    for table in t.metadata.tables.values():
        for constraint in (*table.constraints, *table.indexes):
            assert constraint.name, (table.name, constraint)


def test_every_reference_to_a_node_or_pack_is_checked():
    free = {("aside_total", "node_id")}  # 0 stands for no node
    for table in t.metadata.tables.values():
        for column in table.c:
            if column.name in {"node_id", "pack_id", "site_id", "account_id"} and (table.name, column.name) not in free:
                assert column.foreign_keys, (table.name, column.name)


def test_instants_are_integers_of_64_bits_and_dates_are_text():
    for table in t.metadata.tables.values():
        for column in table.c:
            if column.name.endswith("_ms"):
                assert column.type is t.Millis, (table.name, column.name)
            if column.name in {"date", "commissioned"}:
                assert isinstance(column.type, Text)
    assert isinstance(t.reading.c.node_id.type, Integer)


@pytest.mark.parametrize(
    "query",
    [
        "SELECT time_ms FROM reading WHERE node_id = 1 AND time_ms BETWEEN 1 AND 2 ORDER BY time_ms",
        "SELECT data FROM reading_block WHERE node_id = 1 AND utc_day BETWEEN 1 AND 2 ORDER BY utc_day",
        "SELECT MAX(revision) FROM reading_mark WHERE node_id = 1 AND utc_hour BETWEEN 1 AND 2",
        "SELECT id FROM set_aside WHERE node_id = 1 ORDER BY id DESC LIMIT 100",
        "SELECT reason FROM set_aside WHERE node_id = 1 AND reason = 'unit' AND time_ms IN (1, 2)",
        "SELECT * FROM import_fill WHERE node_id = 1 AND time_ms BETWEEN 1 AND 2",
        "SELECT * FROM import_fill WHERE import_id = 1",
        "SELECT * FROM day_figure WHERE pack_id = 1 AND date >= '2026-06-01' ORDER BY date",
        "SELECT * FROM charge_figure WHERE node_id = 1 AND start_ms BETWEEN 1 AND 2 ORDER BY start_ms, window_ms",
        "SELECT first, last FROM received_run WHERE node_id = 1 AND boot = 2 ORDER BY first",
    ],
)
def test_what_is_asked_often_finds_an_index_and_sorts_nothing(database, query):
    with database.read() as connection:
        plan = [row[3] for row in connection.exec_driver_sql(f"EXPLAIN QUERY PLAN {query}")]
    assert all("SCAN" not in step and "TEMP B-TREE" not in step for step in plan), plan
