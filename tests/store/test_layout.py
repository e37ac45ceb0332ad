from hypothesis import given
from hypothesis import strategies as st

from hub.quantities import NAMES
from hub.store.layout import COLUMNS, block_lines, fixed_point, write_block

numbers = st.none() | st.integers(-(2**63), 2**63 - 1)
lines = st.lists(
    st.tuples(st.integers(0, 2**53), *[numbers] * (len(COLUMNS) - 1)), max_size=6, unique_by=lambda line: line[0]
).map(lambda found: sorted(found, key=lambda line: line[0]))


@given(lines)
def test_a_block_gives_back_the_lines_it_was_made_of(scratch, day):
    with scratch() as connection:
        write_block(connection, 1, 3, day)
        count = connection.exec_driver_sql("SELECT count FROM reading_block WHERE node_id = 1 AND utc_day = 3").scalar()
        if day:
            assert count == len(day)
            assert block_lines(connection, 1, 3) == day
        else:
            assert count is None


def test_a_day_has_one_block_and_none_without_readings(scratch):
    line = (5, *[None] * (len(COLUMNS) - 1))
    with scratch() as connection:
        for day in ([line], [line, (9, *line[1:])], []):
            write_block(connection, 1, 3, day)
            found = connection.exec_driver_sql("SELECT count FROM reading_block").scalars().all()
            assert found == ([len(day)] if day else [])


def test_the_instant_comes_first_and_every_quantity_has_a_column():
    assert COLUMNS[0] == "time_ms"
    assert COLUMNS[-len(NAMES) :] == NAMES
    assert len(set(COLUMNS)) == len(COLUMNS)


def test_values_are_rounded_to_the_nearest_step_halves_to_even():
    # The rounding of IEEE 754, which numpy and Python share: a value stored by one way is repeated by the other.
    assert [fixed_point("uptime", v) for v in (0.0005, 0.0015, 0.0025, -0.0015, 2.0004, -0.0)] == [0, 2, 2, -2, 2000, 0]
    assert fixed_point("pack_temperature", 0.0625) == 625
