import numpy as np
import pytest
from builders import START_MS, a_node, every, readings
from hypothesis import given
from hypothesis import strategies as st

from hub.battery.charge import count
from hub.battery.flow import flow
from hub.battery.totals import bridges
from hub.series import EMPTY

HOUR_MS = 3_600_000


def test_running_sums_of_a_steady_current():
    running = flow(every(60, 2, pack_current=0.5, pack_voltage=4.0), a_node())
    assert running.in_ah[-1] == pytest.approx(1.0)
    assert running.in_wh[-1] == pytest.approx(4.0)
    assert running.out_ah[-1] == 0.0
    assert not running.gap.any()
    assert running.index(START_MS + HOUR_MS) == 60
    assert running.index(START_MS + 100 * HOUR_MS) == len(running.series) - 1


@given(st.lists(st.floats(-2.0, 2.0), min_size=2, max_size=40), st.integers(1, 200))
def test_running_sums_end_where_the_count_ends(current, interval_s):
    series = readings(np.arange(len(current)) * float(interval_s), pack_current=current, pack_voltage=5.0)
    running = flow(series, a_node())
    counted = count(series, START_MS, int(series.time_ms[-1]), a_node())
    assert running.in_ah[-1] == pytest.approx(counted.charge_ah or 0.0, abs=1e-12)
    assert running.out_ah[-1] == pytest.approx(counted.discharge_ah or 0.0, abs=1e-12)
    assert running.in_wh[-1] == pytest.approx(counted.charge_wh or 0.0, abs=1e-12)
    assert (np.diff(running.in_ah) >= 0.0).all()


def test_a_gap_adds_only_what_running_totals_say():
    series = readings([0, 60, 3660, 3720], pack_current=0.6, pack_voltage=5.0, charge_in=[0.0, 0.01, 0.31, 0.32])
    plain = flow(series, a_node())
    assert plain.gap.tolist() == [False, False, True, False]
    assert plain.unseen_s[-1] == 3600.0
    assert plain.in_ah[-1] == pytest.approx(0.02)
    covered = flow(series, a_node(), bridges(series, START_MS, START_MS + 24 * HOUR_MS, 180_000))
    assert covered.unseen_s[-1] == 0.0
    assert covered.in_ah[-1] == pytest.approx(0.32)
    assert covered.in_wh[-1] == pytest.approx(1.6)


def test_readings_without_a_current_are_passed_over():
    running = flow(readings([0, 60, 120], pack_current=[0.6, np.nan, 0.6]), a_node())
    assert len(running.series) == 2
    assert running.in_ah[-1] == pytest.approx(0.02)
    assert running.in_wh[-1] == 0.0


def test_nothing_flows_in_an_empty_series():
    running = flow(EMPTY, a_node())
    assert len(running.series) == 0
    assert running.gap.size == 0


def test_hold_takes_the_later_value():
    running = flow(readings([0, 60], pack_current=[0.0, 0.6]), a_node(integration="hold"))
    assert running.in_ah[-1] == pytest.approx(0.01)
