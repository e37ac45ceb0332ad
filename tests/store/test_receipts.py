from hypothesis import given
from hypothesis import strategies as st

from hub.store.receipts import Receipt, merge_runs, missing, note

sequences = st.integers(0, 25)
runs = st.tuples(sequences, st.integers(0, 6)).map(lambda pair: (pair[0], pair[0] + pair[1]))


def as_runs(numbers):
    """A set of numbers as unbroken runs, the slow way."""
    return [
        (first, next(n for n in range(first, max(numbers) + 1) if n + 1 not in numbers))
        for first in sorted(numbers)
        if first - 1 not in numbers
    ]


def stored(connection, boot):
    query = "SELECT first, last FROM received_run WHERE node_id = 1 AND boot = ? ORDER BY first"
    return [tuple(row) for row in connection.exec_driver_sql(query, (boot,))]


@given(st.lists(runs, max_size=10))
def test_runs_join_where_they_overlap_or_adjoin(some):
    numbers = {number for first, last in some for number in range(first, last + 1)}
    assert merge_runs(some) == (as_runs(numbers) if numbers else [])


@given(
    st.lists(
        st.tuples(st.sampled_from([3, 4]), st.lists(sequences, min_size=1, max_size=6), st.none() | sequences),
        max_size=8,
    )
)
def test_a_receipt_reaches_as_far_as_nothing_is_missing(scratch, noted):
    have = {3: set(), 4: set()}
    with scratch() as connection:
        for boot, numbers, oldest in noted:
            have[boot] |= set(numbers)
            if oldest is not None:
                have[boot] |= set(range(1, oldest))
            earned = note(connection, 1, boot, numbers, oldest)
            assert stored(connection, boot) == as_runs(have[boot])
            first = 1 if 1 in have[boot] else 0
            if first not in have[boot]:
                assert earned is None
            else:
                end = next(n for n in range(first, 99) if n + 1 not in have[boot])
                assert earned == Receipt(1, boot, end)
        for boot, numbers in have.items():
            gaps = {n for first, last in missing(connection, 1).get(boot, []) for n in range(first, last + 1)}
            assert gaps == set(range(1, max(numbers, default=0))) - numbers


def test_no_receipt_before_the_first_message_came(scratch):
    with scratch() as connection:
        assert note(connection, 1, 7, [2, 3, 5]) is None
        assert missing(connection, 1) == {7: [(1, 1), (4, 4)]}
        assert note(connection, 1, 7, [1]) == Receipt(1, 7, 3)
        assert note(connection, 1, 7, [4]) == Receipt(1, 7, 5)
        assert missing(connection, 1) == {}


def test_what_the_node_no_longer_holds_is_not_waited_for(scratch):
    with scratch() as connection:
        assert note(connection, 1, 7, [40, 41]) is None
        assert note(connection, 1, 7, [42], oldest=40) == Receipt(1, 7, 42)


def test_nodes_and_boots_do_not_mix(scratch):
    with scratch() as connection:
        note(connection, 1, 7, [1, 2])
        assert note(connection, 1, 8, [2]) is None
        assert note(connection, 2, 7, [2]) is None
        assert note(connection, 1, 7, [3]) == Receipt(1, 7, 3)
        assert missing(connection, 2) == {7: [(1, 1)]}


def test_numbers_of_any_size_have_their_place(scratch):
    top = 2**63 - 1
    with scratch() as connection:
        assert note(connection, 1, top, [top, 1]) == Receipt(1, top, 1)
        assert missing(connection, 1) == {top: [(2, top - 1)]}


def test_only_runs_that_change_are_written(scratch):
    with scratch() as connection:
        note(connection, 1, 7, range(1, 400, 2))
        before = connection.exec_driver_sql("SELECT total_changes()").scalar()
        note(connection, 1, 7, [400])
        assert connection.exec_driver_sql("SELECT total_changes()").scalar() - before == 2
        note(connection, 1, 7, [400, 5])
        assert connection.exec_driver_sql("SELECT total_changes()").scalar() - before == 2
