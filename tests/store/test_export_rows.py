import itertools
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st
from store.examples import JUNE, filled

from hub.errors import UsageError
from hub.quantities import NAMES
from hub.store import inventory_change, inventory_file
from hub.store.export_rows import TABLES, Selection, instant, rows, table_named
from hub.store.layout import DAY_MS


@pytest.fixture
def hub(database, inventory):
    """A read connection on a database with figures and readings."""
    with database.write() as connection:
        filled(connection)
    with database.read() as connection:
        yield connection


def fetched(connection, table, after=None, **chosen):
    return list(rows(connection, table, Selection(**chosen), after))


def only(connection, table, column, **chosen):
    return [row[column] for _, row in fetched(connection, table, **chosen)]


@pytest.mark.parametrize(
    ("table", "promised"),
    [
        ("readings", "time, node"),
        (
            "days",
            """node, pack, date, coverage, panel_wh, charge_ah, discharge_ah, charge_wh, discharge_wh, load_wh,
            clear_sky_wh, harvest_ratio, pack_temperature_max_c, cell_voltage_min_v, cell_voltage_max_v, full_at""",
        ),
        (
            "charges",
            """node, pack, start, end, charge_ah, charge_wh, mean_rate_it, peak_temperature_c, ended_by, full_at,
            confidence, overcharge_ah""",
        ),
        ("throughput", "pack, date, discharge_ah, equivalent_full_cycles"),
    ],
)
def test_columns_and_their_order_are_a_promise_to_users_new_ones_are_added_at_the_end(table, promised):
    wanted = tuple(promised.replace(",", " ").split()) + (NAMES if table == "readings" else ())
    assert TABLES[table].columns[: len(wanted)] == wanted


@pytest.mark.parametrize("table", TABLES)
def test_every_row_has_the_columns_in_their_order(hub, table):
    found = fetched(hub, table)
    assert found
    assert all(tuple(row) == TABLES[table].columns for _, row in found)


@pytest.mark.parametrize("table", TABLES)
def test_a_table_read_in_pages_is_the_whole_table(hub, table):
    whole = fetched(hub, table)
    assert len({cursor for cursor, _ in whole}) == len(whole)
    for size in (1, 7, len(whole)):
        paged, cursor = [], None
        while page := list(itertools.islice(rows(hub, table, Selection(), cursor), size)):
            paged += page
            cursor = page[-1][0]
            assert len(paged) <= len(whole)
        assert paged == whole


@pytest.mark.parametrize("table", TABLES)
def test_reading_twice_gives_the_same(hub, table):
    assert fetched(hub, table) == fetched(hub, table)


def test_what_screening_finds_does_not_depend_on_where_a_reader_began(hub):
    whole = {row["time"]: row for _, row in fetched(hub, "readings", node="ridge-east")}
    assert whole["2026-06-01T23:55:00.000Z"]["set_aside"] == "pack_temperature: spike"
    assert whole["2026-06-01T10:00:00.000Z"]["set_aside"] == "pack_temperature: disconnected"
    for start in ("2026-06-01T23:55:00Z", "2026-06-01T23:52:00Z", "2026-06-01T10:00:00Z"):
        for _, row in fetched(hub, "readings", node="ridge-east", start=start, end="2026-06-02"):
            assert row == whole[row["time"]]


def test_a_value_that_was_set_aside_is_empty_and_the_others_stay(hub):
    (row,) = [
        r
        for _, r in fetched(
            hub, "readings", node="ridge-east", start="2026-06-01T10:00:00Z", end="2026-06-01T10:00:00.001Z"
        )
    ]
    assert (row["pack_temperature"], row["pack_current"], row["pack_voltage"]) == (None, 0.25, None)


def test_readings_are_told_after_calibration(database, inventory):
    text = '[[calibration]]\nnode = "ridge-east"\nquantity = "pack_current"\nstart = 2026-06-02T00:00:00Z\ngain = 2\n'
    with database.write() as connection:
        filled(connection)
        inventory_change.apply(connection, inventory_file.parse(text, "x"), who="test", now_ms=0)
        found = only(connection, "readings", "pack_current", node="ridge-east")
    known = [value for value in found if value is not None]
    assert set(known) == {0.125, 0.25}
    assert known[-1] == 0.25
    assert known[0] == 0.125


def test_dates_are_inclusive_and_instants_end_before(hub):
    assert only(hub, "days", "date", node="ridge-east", start="2026-06-02", end="2026-06-03") == [
        "2026-06-02",
        "2026-06-03",
    ]
    assert only(hub, "throughput", "date", pack="R-07", end="2026-06-01") == ["2026-06-01"]
    times = only(hub, "readings", "time", node="ridge-east", start="2026-06-02", end="2026-06-02")
    assert (times[0], times[-1]) == ("2026-06-02T00:00:00.000Z", "2026-06-02T23:00:00.000Z")
    times = only(
        hub, "readings", "time", node="ridge-east", start="2026-06-02T02:00:00+01:00", end="2026-06-02T03:00:00Z"
    )
    assert times == ["2026-06-02T01:00:00.000Z", "2026-06-02T02:00:00.000Z"]
    assert only(hub, "charges", "start", node="ridge-east", start="2026-06-03") == ["2026-06-03T00:00:00.001Z"]
    assert only(hub, "days", "date", start="2026-06-03", end="2026-06-01") == []


def test_an_instant_stands_for_its_own_date_where_days_are_asked_for(hub):
    chosen = {"node": "ridge-east", "start": "20260602T233000-0500", "end": "2026-06-02T23:30:00-05:00"}
    assert only(hub, "days", "date", **chosen) == ["2026-06-02"]


def test_a_pack_is_told_where_it_was_and_only_while_it_was_there(hub):
    # Fitted to ridge-east until 14:10 UTC on 2 June, to ridge-west from then on.
    found = [(row["node"], row["time"]) for _, row in fetched(hub, "readings", pack="R-07")]
    assert max(time for node, time in found if node == "ridge-east") == "2026-06-02T14:00:00.000Z"
    assert min(time for node, time in found if node == "ridge-west") == "2026-06-02T15:00:00.000Z"
    assert only(hub, "days", "pack", pack="R-08") == []
    assert only(hub, "readings", "time", pack="R-08") == []


def test_throughput_counts_what_a_pack_gave_in_all_nodes(hub):
    found = fetched(hub, "throughput", pack="R-07")
    assert [row["discharge_ah"] for _, row in found] == [1.2, 1.2, 1.2]
    # Rated 2.4 Ah.
    assert [row["equivalent_full_cycles"] for _, row in found] == [0.5, 1.0, 1.5]
    assert fetched(hub, "throughput", pack="R-07", start="2026-06-03")[0][1]["equivalent_full_cycles"] == 1.5
    assert fetched(hub, "throughput", node="weir-gauge") == []
    assert len(fetched(hub, "throughput", node="ridge-east")) == 3


def test_numbers_are_rounded_to_six_decimals(hub):
    assert set(only(hub, "charges", "charge_ah")) == {0.333333}


@pytest.mark.parametrize(
    ("chosen", "sentence"),
    [
        ({"node": "mast"}, "There is no node “mast”. Known nodes: ridge-east, ridge-west, weir-gauge."),
        ({"pack": "R-99"}, "There is no pack “R-99”. Known packs: R-07, R-08."),
        ({"start": "yesterday"}, "“yesterday” is not a date like 2026-03-01 nor an instant"),
        ({"end": "2026-13-01"}, "“2026-13-01” is not a date"),
        ({"end": "2026-06-01T10:00:00"}, "nor an instant with its zone like 2026-03-01T09:00:00Z."),
        ({"start": "0001-01-01"}, "is not a date"),
        ({"end": "9999-12-31"}, "is not a date"),
        ({"end": "9999-12-31T23:59:59-12:00"}, "is not a date"),
        ({"start": ""}, "“” is not a date"),
    ],
)
@pytest.mark.parametrize("table", TABLES)
def test_what_is_not_known_is_refused_before_the_first_row(hub, table, chosen, sentence):
    with pytest.raises(UsageError) as caught:
        rows(hub, table, Selection(**chosen))
    assert sentence in str(caught.value)


cursors = st.one_of(
    st.text(max_size=20),
    st.lists(st.one_of(st.text(max_size=16), st.integers(), st.none(), st.just("000001780272000")), max_size=3).map(
        json.dumps
    ),
    st.just("[" * 100_000),
    st.just(json.dumps(["ridge-east", "9" * 5000])),
    st.just(json.dumps(["ridge-east", "٠٠٠٠٠١٧٨٠٢٧٢٠٠٠"])),
)


@given(cursor=cursors.filter(bool), table=st.sampled_from(sorted(TABLES)))
def test_any_cursor_leads_on_or_is_refused(scratch, table, cursor):
    with scratch() as connection:
        try:
            found = list(rows(connection, table, Selection(), cursor))
        except UsageError as error:
            found = str(error)
    assert found in ([], "The cursor cannot be read. Begin again without one.")


def test_a_cursor_of_another_kind_of_table_is_refused(hub):
    with pytest.raises(UsageError, match="cursor"):
        rows(hub, "throughput", Selection(), fetched(hub, "days")[0][0])
    with pytest.raises(UsageError, match="cursor"):
        rows(hub, "readings", Selection(), fetched(hub, "throughput")[0][0])


def test_a_table_that_does_not_exist_is_told_with_those_that_do():
    with pytest.raises(UsageError, match=r"no table “day”. The tables are readings, days, charges, throughput"):
        table_named("day")
    assert all(table_named(name).name == name and table_named(name).description.endswith(".") for name in TABLES)


def test_an_empty_database_has_empty_tables(database):
    with database.read() as connection:
        assert all(fetched(connection, table) == [] for table in TABLES)
        with pytest.raises(UsageError, match="Known nodes: none yet"):
            rows(connection, "days", Selection(node="x"))


def test_a_date_is_the_first_moment_of_its_utc_day_or_the_first_after_it():
    assert instant(None) is None
    assert instant("2026-06-01") == JUNE
    assert instant("2026-06-01", after=True) == JUNE + DAY_MS
    assert instant("2026-06-01T00:00:00.5Z", after=True) == JUNE + 500
    assert instant("2026-06-01T02:00:00+02:00") == JUNE
