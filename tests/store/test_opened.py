import pytest
from store.strategies import DAY, as_rows

from hub.store import imports, readings
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS
from hub.store.opened import PARAMETERS, OpenedDay, in_parts

AT = DAY * DAY_MS


@pytest.fixture(params=[False, True], ids=["loose", "sealed"])
def sealed(request):
    return request.param


@pytest.fixture
def opened(scratch, sealed):
    """A day with three readings, the second of an import."""
    with scratch() as connection:
        import_id = imports.begin(connection, 1, "card.csv", "", 0)
        assert import_id == 1
        append(
            connection,
            [
                Arrival(1, 1, {AT: {"uptime": 1.0}, AT + 2: {"uptime": 3.0}}),
                Arrival(1, 1, {AT + 1: {"uptime": 2.0}}, import_id=import_id),
            ],
        )
        if sealed:
            readings.seal(connection, 1, AT + DAY_MS)
        yield connection, OpenedDay(connection, 1, DAY, sealed=sealed)


def test_only_what_was_asked_for_is_open(opened):
    _, day = opened
    day.open([AT + 2, AT + 3])
    assert list(day.rows) == [AT + 2]
    assert day.values(AT + 2) == ["uptime"]
    assert day.of_import(1) == {AT + 1}
    assert day.of_import(2) == set()


def test_changed_gone_and_added_readings_are_written_and_nothing_else(opened, sealed):
    connection, day = opened
    day.open([AT, AT + 1, AT + 2])
    day.rows[AT]["signal"] = -7000
    del day.rows[AT + 1]
    day.rows[AT + 5] = {**day.rows[AT], "time_ms": AT + 5, "uptime": 9}
    day.rows[AT + 2]["uptime"] = 77  # not named as changed
    day.changed |= {AT, AT + 1, AT + 5}
    day.save()
    assert as_rows(readings.read(connection, 1, AT, AT + DAY_MS)) == {
        AT: {"uptime": 1000, "signal": -7000},
        AT + 2: {"uptime": 3000},
        AT + 5: {"uptime": 9, "signal": -7000},
    }
    assert OpenedDay(connection, 1, DAY, sealed=sealed).of_import(1) == set()


def test_a_day_that_loses_its_last_reading_has_no_block(opened, sealed):
    connection, day = opened
    day.open([AT, AT + 1, AT + 2])
    day.changed |= set(day.rows)
    day.rows.clear()
    day.save()
    assert readings.count(connection, 1) == 0
    assert readings.bounds(connection, 1) is None


def test_fills_are_written_as_they_are_left(opened, sealed):
    connection, day = opened
    day.fills |= {(AT, "uptime"): 1, (AT + 2, "signal"): 1}
    day.save()
    day = OpenedDay(connection, 1, DAY, sealed=sealed)
    assert day.fills == {(AT, "uptime"): 1, (AT + 2, "signal"): 1}
    assert day.of_import(1) == {AT, AT + 1, AT + 2}
    del day.fills[(AT, "uptime")]
    day.save()
    assert OpenedDay(connection, 1, DAY, sealed=sealed).fills == {(AT + 2, "signal"): 1}
    assert OpenedDay(connection, 1, DAY + 1, sealed=False).fills == {}
    assert OpenedDay(connection, 2, DAY, sealed=False).fills == {}


def test_parts_are_in_order_and_no_longer_than_a_statement_takes():
    parts = list(in_parts(set(range(2 * PARAMETERS + 1))))
    assert [len(part) for part in parts] == [PARAMETERS, PARAMETERS, 1]
    assert [value for part in parts for value in part] == list(range(2 * PARAMETERS + 1))
    assert list(in_parts([])) == []
