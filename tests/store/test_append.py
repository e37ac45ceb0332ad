import sqlite3
import statistics
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st
from store.strategies import DAY, INSTANTS, Model, arrivals, as_rows, batches, seals

from hub.errors import PayloadError
from hub.quantities import NAMES
from hub.store import readings
from hub.store import tables as t
from hub.store.append import append, mark
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS, HOUR_MS, fixed_point

EVIDENCE = "SELECT received_ms, device_ms, boot, sequence, import_id FROM reading WHERE node_id = ? AND time_ms = ?"


def counts(outcome):
    return [outcome.new, outcome.filled, outcome.repeated, len(outcome.contradictions)]


def both_ways(connection):
    """Days of a node that lie as rows and as a block at once: there must be none."""
    return connection.exec_driver_sql(
        "SELECT node_id, utc_day FROM reading_block INTERSECT SELECT node_id, time_ms / 86400000 FROM reading"
    ).fetchall()


@given(st.lists(st.one_of(batches, seals), max_size=8))
def test_any_arrivals_and_sealing_leave_what_the_plainest_model_has(scratch, events):
    model = Model()
    with scratch() as connection:
        for event in events:
            if isinstance(event, int):
                readings.seal(connection, 1, event)
                readings.seal(connection, 2, event)
            else:
                outcomes = append(connection, event)
                expected = [model.take(arrival) for arrival in event]
                assert [counts(outcome) for outcome in outcomes] == expected
            assert both_ways(connection) == []
            for node_id in (1, 2):
                assert as_rows(readings.read(connection, node_id, 0, 2**62)) == model.rows(node_id)
                assert readings.count(connection, node_id) == len(model.rows(node_id))


@given(st.data())
def test_the_same_readings_in_any_order_number_and_split_read_the_same(scratch, data):
    truth = data.draw(
        st.dictionaries(
            st.sampled_from(INSTANTS), st.dictionaries(st.sampled_from(NAMES), st.floats(-50, 50), min_size=1)
        )
    )
    pieces = [(time_ms, {name: value}) for time_ms, row in truth.items() for name, value in row.items()]
    order = data.draw(st.permutations(pieces + (data.draw(st.lists(st.sampled_from(pieces))) if pieces else [])))
    with scratch() as connection:
        for piece in order:
            outcome = append(connection, [Arrival(1, 5, {piece[0]: piece[1]})])[0]
            assert not outcome.contradictions
            if data.draw(st.integers(0, 5)) == 0:
                readings.seal(connection, 1, data.draw(seals))
        assert as_rows(readings.read(connection, 1, 0, 2**62)) == {
            time_ms: {name: fixed_point(name, row[name]) for name in row} for time_ms, row in sorted(truth.items())
        }


@given(st.lists(arrivals(), max_size=6))
def test_a_second_time_everything_is_known_and_nothing_changes(scratch, batch):
    with scratch() as connection:
        append(connection, batch)
        before = [as_rows(readings.read(connection, node, 0, 2**62)) for node in (1, 2)]
        hours = [readings.changed_hours(connection, node) for node in (1, 2)]
        again = append(connection, batch)
        assert sum(outcome.new + outcome.filled for outcome in again) == 0
        assert [as_rows(readings.read(connection, node, 0, 2**62)) for node in (1, 2)] == before
        assert [readings.changed_hours(connection, node) for node in (1, 2)] == hours


def test_the_first_of_one_transaction_stays_also_where_the_shapes_differ(scratch):
    at = INSTANTS[0]
    with scratch() as connection:
        outcomes = append(
            connection,
            [
                Arrival(1, 1, {at + 10: {"pack_voltage": 9.0}}),
                Arrival(1, 2, {at: {"pack_voltage": 10.0, "pack_current": 0.1}}),
                Arrival(1, 3, {at: {"pack_voltage": 11.0}}),
            ],
        )
        assert [counts(o) for o in outcomes] == [[1, 0, 0, 0], [1, 0, 0, 0], [0, 0, 1, 1]]
        assert as_rows(readings.read(connection, 1, at, at + 1))[at]["pack_voltage"] == 100_000


@pytest.mark.parametrize("sealed", [False, True])
def test_evidence_is_that_of_the_first_arrival(scratch, sealed):
    at = INSTANTS[0]
    with scratch() as connection:
        append(connection, [Arrival(1, 7, {at: {"uptime": 1.0}, at + 1: {"uptime": 2.0}}, 3, 4, None, {at: 99})])
        if sealed:
            readings.seal(connection, 1, at + DAY_MS)
        append(connection, [Arrival(1, 8, {at: {"uptime": 1.0, "signal": -70.0}}, 3, 5)])
        if sealed:
            from hub.store.layout import COLUMNS, block_lines

            line = dict(zip(COLUMNS, block_lines(connection, 1, at // DAY_MS)[0], strict=True))
            found = tuple(line[name] for name in t.EVIDENCE)
        else:
            found = tuple(connection.exec_driver_sql(EVIDENCE, (1, at)).one())
            assert tuple(connection.exec_driver_sql(EVIDENCE, (1, at + 1)).one()) == (7, None, 3, 4, None)
        assert found == (7, 99, 3, 4, None)


def test_hours_that_change_are_marked_under_one_revision_a_transaction(scratch):
    at = DAY * DAY_MS
    with scratch() as connection:
        append(connection, [Arrival(1, 1, {at: {"uptime": 1.0}, at + 3 * HOUR_MS: {"uptime": 2.0}})])
        append(connection, [Arrival(2, 1, {at: {"uptime": 1.0}}), Arrival(1, 1, {at + HOUR_MS - 1: {"uptime": 1.0}})])
        hours, revisions = readings.changed_hours(connection, 1)
        assert hours == [at // HOUR_MS, at // HOUR_MS + 3]
        assert revisions[0] == revisions[1] + 1
        assert readings.changed_hours(connection, 2)[1] == [revisions[0]]
        mark(connection, {(1, at // HOUR_MS + 3)})
        assert readings.newest_revision(connection, 1, at + 3 * HOUR_MS, at + 4 * HOUR_MS) == revisions[0] + 1
        assert readings.newest_revision(connection, 1, at + HOUR_MS, at + 3 * HOUR_MS) == 0


def test_nothing_arriving_marks_nothing(scratch):
    with scratch() as connection:
        assert append(connection, []) == []
        assert counts(append(connection, [Arrival(1, 1, {})])[0]) == [0, 0, 0, 0]
        assert counts(append(connection, [Arrival(1, 1, {INSTANTS[0]: {}})])[0]) == [0, 0, 0, 0]
        assert readings.changed_hours(connection, 1) == ([], [])


@pytest.mark.parametrize("bad", [float("nan"), float("inf"), -1e300])
def test_what_is_no_number_never_reaches_the_database(database, inventory, bad):
    at = INSTANTS[0]
    with pytest.raises(PayloadError, match="finite"), database.write() as connection:
        append(connection, [Arrival(1, 1, {at: {"uptime": 1.0}, at + 1: {"uptime": bad}})])
    with database.read() as connection:
        assert readings.count(connection, 1) == 0


@pytest.mark.parametrize(("messages", "each"), [(500, 1), (100, 60)])
def test_storing_costs_little_beside_the_bare_driver(database, inventory, messages, each):
    """Against ``executemany`` of the driver with the same columns, in the same run, each batch right after the other."""
    eight = NAMES[:8]
    columns = ("node_id", "time_ms", *t.EVIDENCE, *eight)
    statement = f"INSERT INTO reading ({', '.join(columns)}) VALUES ({', '.join('?' * len(columns))})"
    bare = sqlite3.connect(database.file, isolation_level=None)
    for pragma in ("synchronous=FULL", "foreign_keys=ON", "temp_store=MEMORY", "cache_size=-16384"):
        bare.execute(f"PRAGMA {pragma}")
    ratios = []
    for batch in range(12):
        start = DAY * DAY_MS + batch * messages * each * 1000
        arriving = [
            Arrival(1, start, {start + (m * each + i) * 1000: dict.fromkeys(eight, 0.5 + i) for i in range(each)}, 3, m)
            for m in range(messages)
        ]
        rows = [
            (2, time_ms, start, None, 3, arrival.sequence, None, *(round(v * 1000) for v in values.values()))
            for arrival in arriving
            for time_ms, values in arrival.readings.items()
        ]

        def ours(arriving=arriving):
            with database.write() as connection:
                append(connection, arriving)

        def theirs(rows=rows):
            bare.execute("BEGIN IMMEDIATE")
            bare.executemany(statement, rows)
            bare.execute("COMMIT")

        spent = {}
        for work in (ours, theirs) if batch % 2 else (theirs, ours):
            before = time.perf_counter()
            work()
            spent[work] = time.perf_counter() - before
        ratios.append(spent[theirs] / spent[ours])
    bare.close()
    # Wanted is 0.6 on a machine with nothing else to do; the limit here leaves room for one that is busy.
    assert statistics.median(ratios) > 0.3, ratios
