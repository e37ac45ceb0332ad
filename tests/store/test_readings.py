import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from store.strategies import DAY, INSTANTS, Model, as_rows, batches, names

from hub.quantities import BY_NAME
from hub.series import EMPTY
from hub.store import readings
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS, HOUR_MS

START = DAY * DAY_MS
edges = st.one_of(st.sampled_from(INSTANTS), st.sampled_from([0, START - 1, START + 3 * DAY_MS, 2**53])).flatmap(
    lambda at: st.sampled_from([at - 1, at, at + 1])
)


@given(batches, st.sets(st.integers(0, 2)), edges, edges, st.none() | st.sets(names))
def test_a_stretch_has_just_what_lies_in_it_whatever_is_sealed(scratch, batch, sealed, start, end, wanted):
    model = Model()
    with scratch() as connection:
        # The days to be sealed first, then the others: so a sealed day comes to lie between two that are not.
        for chosen in (True, False):
            for arrival in batch:
                part = {at: row for at, row in arrival.readings.items() if ((at // DAY_MS - DAY) in sealed) is chosen}
                some = Arrival(arrival.node_id, arrival.received_ms, part)
                append(connection, [some])
                model.take(some)
            if chosen:
                readings.seal(connection, 1, START + 3 * DAY_MS)
        found = as_rows(readings.read(connection, 1, start, end, wanted))
        assert found == {
            at: {name: number for name, number in row.items() if wanted is None or name in wanted}
            for at, row in model.rows(1, start, end).items()
        }


def stored(connection, *days, hours=(0, 6, 23), **values):
    for day in days:
        rows = {START + day * DAY_MS + hour * HOUR_MS: values or {"uptime": float(hour)} for hour in hours}
        append(connection, [Arrival(1, START, rows)])


def test_a_sealed_day_between_two_that_are_not_comes_in_its_place(scratch):
    with scratch() as connection:
        stored(connection, 1)
        readings.seal(connection, 1, START + 2 * DAY_MS)
        stored(connection, 0, 2)
        found = readings.read(connection, 1, 0, 2**53)
        assert found.time_ms.tolist() == [
            START + day * DAY_MS + hour * HOUR_MS for day in range(3) for hour in (0, 6, 23)
        ]
        assert found.columns["uptime"].tolist() == [0.0, 6.0, 23.0] * 3


@pytest.mark.parametrize("sealed", [False, True])
def test_a_quantity_that_no_reading_of_the_stretch_has_is_absent(scratch, sealed):
    with scratch() as connection:
        stored(connection, 0, hours=[1])
        stored(connection, 0, hours=[9], signal=-70.0)
        if sealed:
            readings.seal(connection, 1, START + DAY_MS)
        assert readings.read(connection, 1, START, START + 5 * HOUR_MS).columns.keys() == {"uptime"}
        assert readings.read(connection, 1, START + 5 * HOUR_MS, START + DAY_MS).columns.keys() == {"signal"}


def test_a_node_without_readings(scratch):
    with scratch() as connection:
        assert readings.read(connection, 1, 0, 2**53) is EMPTY
        assert readings.bounds(connection, 1) is None
        assert readings.count(connection, 1) == 0
        assert readings.newest_revision(connection, 1, 0, 2**53) == 0
        assert readings.seal(connection, 1, 2**53) == 0


def test_readings_that_have_none_of_the_wanted_quantities_are_still_there(scratch):
    with scratch() as connection:
        stored(connection, 0, 1)
        readings.seal(connection, 1, START + DAY_MS)
        found = readings.read(connection, 1, 0, 2**53, ["pack_voltage"])
        assert len(found) == 6
        assert found.columns == {}
        assert np.isnan(found.get("pack_voltage")).all()


def test_a_name_that_is_no_quantity_is_not_looked_for(scratch):
    with scratch() as connection:
        stored(connection, 0)
        assert readings.read(connection, 1, 0, 2**53, ["uptime; DROP TABLE reading", "uptime"]).columns.keys() == {
            "uptime"
        }


def test_only_whole_days_before_the_instant_are_sealed_a_few_at_a_time(scratch):
    with scratch() as connection:
        stored(connection, 0, 2, 3, 4)
        assert readings.seal(connection, 1, START + 4 * DAY_MS - 1, most=2) == 2
        assert readings.seal(connection, 1, START + 4 * DAY_MS - 1) == 0
        assert readings.seal(connection, 1, START + 4 * DAY_MS) == 1
        sealed = connection.exec_driver_sql("SELECT utc_day - ? FROM reading_block ORDER BY 1", (DAY,)).scalars().all()
        assert sealed == [0, 2, 3]
        assert readings.count(connection, 1) == 12


def test_sealing_one_node_leaves_the_others(scratch):
    with scratch() as connection:
        append(connection, [Arrival(node, 1, {START: {"uptime": float(node)}}) for node in (1, 2)])
        assert readings.seal(connection, 1, START + DAY_MS) == 1
        assert connection.exec_driver_sql("SELECT node_id FROM reading").scalars().all() == [2]
        assert as_rows(readings.read(connection, 2, 0, 2**53)) == {START: {"uptime": 2000}}


def test_bounds_span_rows_and_blocks(scratch):
    with scratch() as connection:
        stored(connection, 1)
        readings.seal(connection, 1, START + 2 * DAY_MS)
        day = (START + DAY_MS, START + DAY_MS + 23 * HOUR_MS)
        assert readings.bounds(connection, 1) == day
        stored(connection, 0, hours=[5])
        assert readings.bounds(connection, 1) == (START + 5 * HOUR_MS, day[1])
        stored(connection, 2, hours=[5])
        assert readings.bounds(connection, 1) == (START + 5 * HOUR_MS, START + 2 * DAY_MS + 5 * HOUR_MS)


def test_numbers_come_back_as_they_were_sent_to_the_resolution_of_the_quantity(scratch):
    sent = {"pack_voltage": 10.412, "pack_temperature": -0.0625, "charge_in": 1234.567891, "pack_current": -0.00001}
    with scratch() as connection:
        stored(connection, 0, hours=[1], **sent)
        for _ in range(2):
            found = readings.read(connection, 1, 0, 2**53)
            assert {name: float(column[0]) for name, column in found.columns.items()} == sent
            readings.seal(connection, 1, START + DAY_MS)


@pytest.mark.parametrize("quantity", BY_NAME.values(), ids=lambda q: q.name)
def test_every_quantity_has_its_column(scratch, quantity):
    middle = (quantity.low + quantity.high) / 2
    with scratch() as connection:
        stored(connection, 0, hours=[1], **{quantity.name: middle})
        assert readings.read(connection, 1, 0, 2**53).columns[quantity.name].tolist() == [middle]


def a_day(dice):
    """A day of a 10 s node, with the noise that the parts have: 1 to 2 steps of 4 mV, 0.1 mA and 0.0625 °C."""
    n = 8640
    hour = np.arange(n) / 360
    sun = np.clip(np.sin((hour / 24 - 0.25) * 2 * np.pi), 0, None)
    cloud = np.clip(np.convolve(dice.normal(0.8, 0.6, n + 60), np.ones(61) / 61, "valid"), 0.1, 1)

    def read(values, step):
        return np.round((values + dice.normal(0, 1.5 * step, n)) / step) * step

    current = 1.1 * sun * cloud - 0.08
    warm = 20 + 6 * np.sin((hour / 24 - 0.35) * 2 * np.pi)
    return {
        "pack_voltage": read(10.2 + 0.2 * current + 0.1 * sun, 0.004),
        "pack_current": read(current, 0.0001),
        "pack_temperature": read(warm + 3 * sun, 0.0625),
        "air_temperature": read(warm, 0.0625),
        "panel_voltage": read(17 + sun, 0.004),
        "panel_current": read(1.2 * sun * cloud, 0.0001),
        "load_current": read(np.full(n, 0.08), 0.0001),
        "charger_duty": np.round(sun * cloud, 2),
    }


def test_a_sealed_reading_of_eight_quantities_takes_a_few_bytes_with_all_its_evidence(database, inventory):
    dice = np.random.default_rng(20)
    with database.write() as connection:
        for day in range(3):
            columns = a_day(dice)
            time_ms = START + day * DAY_MS + 10_000 * np.arange(8640)
            rows = [
                dict(zip(columns, row, strict=True))
                for row in zip(*(c.tolist() for c in columns.values()), strict=True)
            ]
            late = dice.integers(20, 900, 8640)
            arriving = [
                Arrival(1, at + delay, {at: row}, boot=3, sequence=day * 8640 + number, device_ms={at: at + 1234})
                for number, (at, row, delay) in enumerate(zip(time_ms.tolist(), rows, late.tolist(), strict=True))
            ]
            append(connection, arriving)
        pages = "SELECT SUM(pgsize) FROM dbstat WHERE name = ?"
        loose = connection.exec_driver_sql(pages, ("reading",)).scalar_one() / (3 * 8640)
        before = readings.read(connection, 1, 0, 2**53)
        assert readings.seal(connection, 1, START + 3 * DAY_MS) == 3
        tight = connection.exec_driver_sql(pages, ("reading_block",)).scalar_one() / (3 * 8640)
        after = readings.read(connection, 1, 0, 2**53)
    assert tight <= 38
    assert tight < loose / 6
    assert np.array_equal(before.time_ms, after.time_ms)
    assert before.columns.keys() == after.columns.keys()
    assert all(np.array_equal(before.columns[name], after.columns[name]) for name in before.columns)
