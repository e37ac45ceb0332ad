import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.series import EMPTY, Series

times = st.lists(st.integers(-100, 100), unique=True, max_size=12).map(sorted)


def series(instants):
    at = np.array(instants, np.int64)
    return Series(at, {"uptime": at * 2.0})


@given(times, st.integers(-101, 101), st.integers(-101, 101))
def test_a_stretch_begins_with_its_start_and_ends_before_its_end(instants, start, end):
    found = series(instants).between(start, end)
    assert found.time_ms.tolist() == [at for at in instants if start <= at < end]
    assert found.columns["uptime"].tolist() == [at * 2.0 for at in instants if start <= at < end]


@given(times, st.data())
def test_a_mask_chooses_readings(instants, data):
    mask = np.array(data.draw(st.lists(st.booleans(), min_size=len(instants), max_size=len(instants))), np.bool_)
    found = series(instants).where(mask)
    assert found.time_ms.tolist() == [at for at, chosen in zip(instants, mask, strict=True) if chosen]
    assert len(found) == mask.sum() == found.columns["uptime"].size


def test_a_quantity_that_is_not_sent_is_all_missing():
    found = series([1, 2, 3])
    assert found.get("uptime").tolist() == [2.0, 4.0, 6.0]
    assert np.isnan(found.get("signal")).tolist() == [True] * 3
    assert "signal" not in found.columns


def test_an_empty_series():
    assert len(EMPTY) == 0
    assert EMPTY.time_ms.dtype == np.int64
    assert EMPTY.get("uptime").shape == (0,)
    assert len(EMPTY.between(0, 10)) == 0


def test_a_series_cannot_be_given_other_columns():
    with pytest.raises(AttributeError):
        EMPTY.columns = {}
