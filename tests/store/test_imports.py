import pytest
from hypothesis import given
from hypothesis import strategies as st
from store.strategies import DAY, INSTANTS, as_rows, reading, seals, times

from hub.errors import UsageError
from hub.store import aside, imports, intake, readings
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS
from hub.store.opened import OpenedDay
from hub.telemetry.message import Message

AT = DAY * DAY_MS
SPAN = (INSTANTS[0], INSTANTS[-1])


def begin(connection, file="card.csv", node_id=1):
    import_id = imports.begin(connection, node_id, file, f"sha of {file}", 5)
    imports.finish(connection, import_id, lines=9, taken=7, repeated=1, set_aside=1, span=SPAN)
    return import_id


def take(connection, rows, import_id=None):
    origin = aside.Origin("log" if import_id else "mqtt", "x", 1, None, 5, import_id)
    return intake.take(connection, [intake.Incoming(origin, b"", Message({at: dict(row) for at, row in rows.items()}))])


def stored(connection):
    return as_rows(readings.read(connection, 1, 0, 2**62))


messages = st.dictionaries(times, reading, min_size=1, max_size=4)
events = st.lists(st.one_of(st.tuples(st.booleans(), messages), seals), max_size=10)


@given(events)
def test_an_import_taken_back_leaves_what_there_would_be_without_it(scratch, happened):
    """Whatever the node itself sent before, meanwhile and since, whether it agrees, completes or contradicts."""
    with scratch() as connection:
        for event in happened:
            if isinstance(event, tuple) and not event[0]:
                take(connection, event[1])
        expected = stored(connection)
    with scratch() as connection:
        import_id = begin(connection)
        for event in happened:
            if isinstance(event, int):
                readings.seal(connection, 1, event)
            else:
                take(connection, event[1], import_id if event[0] else None)
        before = stored(connection)
        removed = imports.undo(connection, import_id, 9)
        after = stored(connection)
        assert after == expected
        assert removed >= len(before.keys() - after.keys())
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM import_fill").scalar() == 0
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM reading WHERE import_id IS NOT NULL").scalar() == 0
        changed = {at // readings.HOUR_MS for at in before.keys() | after.keys() if before.get(at) != after.get(at)}
        newest = readings.newest_revision(connection, 1, 0, 2**62)
        hours, revisions = readings.changed_hours(connection, 1)
        marked = {hour for hour, revision in zip(hours, revisions, strict=True) if revision >= newest - 1}
        assert changed <= marked


@pytest.mark.parametrize("sealed", [False, True])
def test_each_import_takes_only_its_own(scratch, sealed):
    with scratch() as connection:
        first, second, third = (begin(connection, name) for name in ("a.csv", "b.csv", "c.csv"))
        take(connection, {AT: {"pack_voltage": 10.0}}, first)
        take(connection, {AT: {"pack_current": 0.1, "pack_voltage": 10.0}}, second)
        take(connection, {AT: {"uptime": 7.0}, AT + 1: {"uptime": 8.0}}, third)
        if sealed:
            readings.seal(connection, 1, AT + DAY_MS)
        assert imports.undo(connection, first, 9) == 0
        assert stored(connection)[AT] == {"pack_current": 10_000, "uptime": 7000}
        day = OpenedDay(connection, 1, DAY, sealed=sealed)
        assert [day.of_import(number) for number in (first, second, third)] == [set(), {AT}, {AT, AT + 1}]
        assert imports.undo(connection, third, 9) == 1
        assert stored(connection) == {AT: {"pack_current": 10_000}}
        assert imports.undo(connection, second, 9) == 1
        assert stored(connection) == {}


@pytest.mark.parametrize("sealed", [False, True])
def test_a_value_that_the_import_kept_out_takes_its_place(scratch, sealed):
    with scratch() as connection:
        wrong = begin(connection)
        take(connection, {AT: {"pack_voltage": 99.0}}, wrong)
        if sealed:
            readings.seal(connection, 1, AT + DAY_MS)
        take(connection, {AT: {"pack_voltage": 10.0}})
        take(connection, {AT: {"pack_voltage": 11.0}})
        assert aside.counts(connection, 1) == {"contradiction": 2}
        imports.undo(connection, wrong, 9)
        assert stored(connection) == {AT: {"pack_voltage": 100_000}}
        assert aside.counts(connection, 1) == {"contradiction": 1}
        assert [a.value for a in aside.newest(connection, 1)] == [11.0]


def test_what_the_node_sent_again_stays(scratch):
    with scratch() as connection:
        import_id = begin(connection)
        take(connection, {AT: {"pack_voltage": 10.0, "pack_current": 0.1}, AT + 1: {"uptime": 1.0}}, import_id)
        take(connection, {AT: {"pack_voltage": 10.0, "pack_temperature": 20.0}})
        assert imports.undo(connection, import_id, 9) == 1
        assert stored(connection) == {AT: {"pack_voltage": 100_000, "pack_temperature": 200_000}}


def test_the_nodes_own_evidence_replaces_that_of_the_log(scratch):
    with scratch() as connection:
        import_id = begin(connection)
        append(connection, [Arrival(1, 900, {AT: {"uptime": 1.0}}, import_id=import_id)])
        append(connection, [Arrival(1, 500, {AT: {"uptime": 1.0}}, 3, 4, device_ms={AT: 77})])
        row = connection.exec_driver_sql("SELECT received_ms, device_ms, boot, sequence, import_id FROM reading").one()
        assert tuple(row) == (500, 77, 3, 4, None)


def test_importing_a_file_twice_adds_nothing_and_the_first_takes_it_all_back(scratch):
    log = {AT: {"uptime": 1.0}, AT + 1: {"uptime": 2.0}}
    with scratch() as connection:
        first = begin(connection)
        take(connection, log, first)
        second = begin(connection)
        assert take(connection, log, second).new == 0
        assert imports.known(connection, 1, "sha of card.csv").id == second
        assert imports.undo(connection, second, 9) == 0
        assert imports.known(connection, 1, "sha of card.csv").id == first
        assert imports.undo(connection, first, 9) == 2
        assert imports.known(connection, 1, "sha of card.csv") is None
        assert imports.known(connection, 2, "sha of card.csv") is None


def test_an_import_is_taken_back_once_and_only_if_there_is_one(scratch):
    with scratch() as connection:
        import_id = begin(connection)
        imports.undo(connection, import_id, 9)
        with pytest.raises(UsageError, match="taken back already"):
            imports.undo(connection, import_id, 10)
        with pytest.raises(UsageError, match="There is no import 77"):
            imports.undo(connection, 77, 10)


def test_an_import_that_brought_nothing_yet_can_be_taken_back(scratch):
    with scratch() as connection:
        import_id = imports.begin(connection, 1, "torn.csv", "sha", 5)
        assert imports.undo(connection, import_id, 9) == 0


def test_what_was_set_aside_of_it_goes_with_it(scratch):
    with scratch() as connection:
        import_id = begin(connection)
        remark = aside.Remark("line", "torn", line=7)
        aside.keep(connection, aside.Origin("log", "card.csv", 1, None, 5, import_id), [remark])
        aside.keep(connection, aside.Origin("mqtt", "t", 1, None, 5), [remark])
        assert aside.counts(connection, 1) == {"line": 2}
        imports.undo(connection, import_id, 9)
        assert aside.counts(connection, 1) == {"line": 1}
        assert len(aside.newest(connection, 1)) == 1


def test_the_list_is_newest_first(scratch):
    with scratch() as connection:
        ids = [begin(connection, "a.csv"), begin(connection, "b.csv", 2), begin(connection, "c.csv")]
        assert [i.id for i in imports.listing(connection)] == ids[::-1]
        found = imports.listing(connection, 1)
        assert [i.file for i in found] == ["c.csv", "a.csv"]
        assert (found[0].lines, found[0].taken, found[0].repeated, found[0].set_aside) == (9, 7, 1, 1)
        assert (found[0].first_ms, found[0].last_ms, found[0].undone_ms) == (*SPAN, None)
