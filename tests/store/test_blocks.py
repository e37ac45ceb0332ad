import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hub.errors import StoreError
from hub.store.blocks import Columns, pack, unpack

INT64 = st.integers(-(2**63), 2**63 - 1)


@st.composite
def columns(draw):
    count = draw(st.integers(0, 40))
    names = draw(st.lists(st.text("abcdef_", min_size=1, max_size=5), unique=True, max_size=4))
    numbers = st.one_of(INT64, st.integers(-5, 5), st.sampled_from([-(2**63), 2**63 - 1, 0, 127, 128, -32769]))
    return Columns(
        count,
        {name: draw(hnp.arrays(np.int64, count, elements=numbers)) for name in names},
        {name: draw(hnp.arrays(np.bool_, count)) for name in names},
    )


@given(columns())
def test_integers_in_are_the_same_integers_out(given_columns):
    found = unpack(pack(given_columns))
    assert found.count == given_columns.count
    assert set(found.values) == {name for name, shown in given_columns.present.items() if shown.any()}
    for name, shown in found.present.items():
        assert np.array_equal(shown, given_columns.present[name])
        assert np.array_equal(found.values[name][shown], given_columns.values[name][shown])


@given(columns())
def test_equal_columns_give_equal_bytes_whatever_lies_under_missing_values_and_in_whatever_order(given_columns):
    other = Columns(
        given_columns.count,
        {
            name: np.where(given_columns.present[name], values, 7)
            for name, values in reversed(given_columns.values.items())
        },
        dict(reversed(given_columns.present.items())),
    )
    assert pack(other) == pack(given_columns)


@given(columns(), st.data())
def test_one_column_is_read_without_the_others(given_columns, data):
    whole = unpack(pack(given_columns))
    wanted = data.draw(st.sets(st.sampled_from(sorted(whole.values)))) if whole.values else set()
    part = unpack(pack(given_columns), wanted)
    assert set(part.values) == wanted
    assert all(np.array_equal(part.values[name], whole.values[name]) for name in wanted)


@given(columns(), st.data())
def test_any_damage_is_told_in_a_sentence(given_columns, data):
    block = bytearray(pack(given_columns))
    block[data.draw(st.integers(0, len(block) - 1))] ^= data.draw(st.integers(1, 255))
    with pytest.raises(StoreError, match="restore the last backup"):
        unpack(bytes(block))


def test_steady_and_rising_columns_take_next_to_nothing():
    dice = np.random.default_rng(7)
    every = np.ones(8640, np.bool_)

    def size(values):
        return len(pack(Columns(8640, {"x": values.astype(np.int64)}, {"x": every})))

    assert size(np.full(8640, 123_456)) < 120
    assert size(1_780_000_000_000 + 10_000 * np.arange(8640)) < 150
    # Noise of two bits a value costs its two bits and little more, also on a slope.
    noise = dice.integers(0, 4, 8640)
    assert size(noise + 52_000) < 8640 * 2 / 8 * 1.6
    assert size(noise + 1000 * np.arange(8640)) < 8640 * 3 / 8 * 1.6


@pytest.mark.parametrize("data", [b"", b"PB1", b"PB2\x00\x00\x00\x00", b"PB1\x00\x00\x00\x00\xff\xff\xff\xff"])
def test_what_is_no_block_is_refused(data):
    with pytest.raises(StoreError, match="damaged"):
        unpack(data)
