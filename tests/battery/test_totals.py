import numpy as np
import pytest
from builders import START_MS, readings

from hub.battery.totals import Bridge, Last, bridged_s, bridges, newest, preceded
from hub.series import EMPTY

GAP_MS = 180_000
END_MS = START_MS + 86_400_000


def with_gap(into, out):
    """Two readings, an hour without any, two readings."""
    return readings(
        [0, 60, 3660, 3720], pack_current=0.1, pack_voltage=[5.0, 5.0, 5.2, 5.2], charge_in=into, charge_out=out
    )


def test_increments_carry_the_count_over_a_gap():
    found = bridges(with_gap([1.0, 1.1, 1.7, 1.8], [4.0, 4.0, 4.2, 4.2]), START_MS, END_MS, GAP_MS)
    assert found == [
        Bridge(START_MS + 60_000, START_MS + 3_660_000, pytest.approx(0.6), pytest.approx(0.2), 5.1, False)
    ]


def test_a_total_that_begins_anew_counts_what_it_shows_since():
    (found,) = bridges(with_gap([1.0, 1.1, 0.25, 0.35], [4.0, 4.0, 4.2, 4.2]), START_MS, END_MS, GAP_MS)
    assert (found.in_ah, found.restarted) == (0.25, True)
    assert found.out_ah == pytest.approx(0.2)


def test_rounding_is_no_new_start():
    (found,) = bridges(with_gap([1.0, 1.1, 1.099999, 1.2], [0.0, 0.0, 0.0, 0.0]), START_MS, END_MS, GAP_MS)
    assert (found.in_ah, found.restarted) == (0.0, False)


def test_one_total_alone_bridges_its_own_direction():
    nan = np.nan
    (found,) = bridges(with_gap([1.0, 1.1, 1.7, 1.8], [nan, nan, nan, nan]), START_MS, END_MS, GAP_MS)
    assert found.in_ah == pytest.approx(0.6)
    assert found.out_ah is None


@pytest.mark.parametrize("missing", [[1.0, np.nan, 1.7, 1.8], [1.0, 1.1, np.nan, 1.8]])
def test_without_the_total_on_both_sides_there_is_no_bridge(missing):
    assert bridges(with_gap(missing, [np.nan] * 4), START_MS, END_MS, GAP_MS) == []


def test_a_gap_belongs_to_the_window_in_which_it_ends():
    series = with_gap([1.0, 1.1, 1.7, 1.8], [0.0] * 4)
    middle = START_MS + 1_800_000
    assert bridges(series, START_MS, middle, GAP_MS) == []
    assert len(bridges(series, middle, END_MS, GAP_MS)) == 1


def test_bridged_time_is_that_of_the_window():
    found = bridges(with_gap([1.0, 1.1, 1.7, 1.8], [0.0] * 4), START_MS, END_MS, GAP_MS)
    assert bridged_s(found, START_MS, END_MS) == 3600.0
    assert bridged_s(found, START_MS + 1_860_000, END_MS) == 1800.0
    assert bridged_s([], START_MS, END_MS) == 0.0


def test_the_newest_reading_is_put_before_a_later_series():
    series = with_gap([1.0, 1.1, 1.7, 1.8], [0.0] * 4)
    last = newest(series, START_MS + 3_000_000)
    assert last == Last(
        START_MS + 60_000, {"pack_current": 0.1, "pack_voltage": 5.0, "charge_in": 1.1, "charge_out": 0.0}
    )
    later = series.between(START_MS + 3_000_000, END_MS)
    whole = preceded(later, last)
    assert whole.time_ms.tolist() == [START_MS + 60_000, START_MS + 3_660_000, START_MS + 3_720_000]
    assert bridges(whole, START_MS, END_MS, GAP_MS)[0].in_ah == pytest.approx(0.6)
    assert preceded(series, last) is series
    assert preceded(series, None) is series


def test_an_empty_series_has_no_newest_reading_and_can_be_preceded():
    assert newest(EMPTY, END_MS) is None
    assert newest(readings([0], pack_voltage=5.0), END_MS) is None
    only = preceded(EMPTY, Last(START_MS, {"pack_current": 0.1}))
    assert only.time_ms.tolist() == [START_MS]
    assert only.get("pack_current").tolist() == [0.1]
