import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hub.web.reduction import Binned, binned, joined

STEP = 1000
MANY = 12


@st.composite
def readings(draw):
    times = np.array(sorted(draw(st.sets(st.integers(-3000, 15_000), max_size=60))), np.int64)
    values = draw(hnp.arrays(np.float64, times.size, elements=st.floats(-50, 50) | st.just(np.nan)))
    return times, values


@given(readings())
def test_extremes_are_those_of_the_readings_in_each_column(series):
    times, values = series
    found = binned(times, values, 0, STEP, MANY)
    for i in range(MANY):
        inside = values[(times >= i * STEP) & (times < (i + 1) * STEP)]
        inside = inside[np.isfinite(inside)]
        if inside.size:
            assert (found.low[i], found.high[i]) == (inside.min(), inside.max())
        else:
            assert np.isnan(found.low[i])
            assert np.isnan(found.high[i])


@given(readings(), st.integers(1, 5))
def test_folding_loses_no_peak(series, many):
    found = binned(*series, 0, STEP, MANY)
    folded = found.folded(many)
    assert folded.extremes() == found.extremes()
    assert folded.end_ms >= found.end_ms
    again = binned(*series, 0, STEP * many, len(folded))
    inside = slice(0, MANY // many)
    np.testing.assert_array_equal(folded.low[inside], again.low[inside])
    np.testing.assert_array_equal(folded.high[inside], again.high[inside])


def test_nothing_is_known_of_nothing():
    empty = binned(np.empty(0, np.int64), np.empty(0), 0, STEP, 3)
    assert not empty.known
    assert empty.extremes() is None
    assert joined(empty, 1) == []


def test_one_reading_is_one_column():
    one = binned(np.array([1500]), np.array([1.25]), 0, STEP, 3)
    assert one.extremes() == (1.25, 1.25)
    assert joined(one, 1) == [(1, 1)]


def trace(pattern: str) -> Binned:
    values = np.array([1.0 if letter == "x" else np.nan for letter in pattern])
    return Binned(0, STEP, values, values)


def test_the_pen_is_lifted_at_gaps():
    assert joined(trace("xx..xx"), 1) == [(0, 1), (4, 5)]
    assert joined(trace("x.x.x"), 1) == [(0, 0), (2, 2), (4, 4)]
    assert joined(trace("x.x.x"), 2) == [(0, 4)]
    assert joined(trace("..x..x"), 2) == [(2, 2), (5, 5)]


def test_scaling_by_nothing_gives_nothing():
    scaled = trace("xxx").scaled(np.array([2.0, np.nan, 4.0]))
    np.testing.assert_array_equal(scaled.low, [0.5, np.nan, 0.25])
