import numpy as np
from builders import START_MS, a_node, a_pack, every, readings
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hub.battery.phases import Phase, phases, states, thresholds_a
from hub.series import EMPTY


def test_thresholds_are_rates_but_never_inside_the_sensors_offset():
    assert thresholds_a(a_pack(rated_capacity_ah=2.4), a_node()) == (0.024, 0.012)
    assert thresholds_a(a_pack(rated_capacity_ah=0.1), a_node(current_offset_a=0.002)) == (0.006, 0.003)


def test_hysteresis_keeps_a_phase_through_a_current_near_its_threshold():
    current = np.array([0.0, 15.0, 21.0, 12.0, 19.0, 9.0, 15.0, -15.0, -21.0, -11.0, 15.0, -15.0]) / 1000.0
    assert states(current, 0.02, 0.01).tolist() == [0, 0, 1, 1, 1, 0, 0, 0, -1, -1, 0, 0]


@given(hnp.arrays(float, st.integers(1, 50), elements=st.floats(-1.0, 1.0)))
def test_charge_and_discharge_mirror_each_other(current):
    assert states(-current, 0.2, 0.1).tolist() == (-states(current, 0.2, 0.1)).tolist()


@given(hnp.arrays(float, st.integers(1, 50), elements=st.floats(-1.0, 1.0)))
def test_a_state_agrees_with_its_current(current):
    state = states(current, 0.2, 0.1)
    assert (state[current >= 0.2] == 1).all()
    assert (state[np.abs(current) < 0.1] == 0).all()
    assert (state[current <= -0.2] == -1).all()


def test_a_day_of_rest_charge_and_discharge():
    series = every(
        60, 3, pack_current=lambda t: np.select([t < 3600, t < 7200], [0.0, 0.3], default=-0.3), pack_voltage=5.0
    )
    assert phases(series, a_pack(), a_node()) == [
        Phase("rest", START_MS, START_MS + 3_600_000),
        Phase("charge", START_MS + 3_600_000, START_MS + 7_200_000),
        Phase("discharge", START_MS + 7_200_000, START_MS + 10_800_000),
    ]


def test_a_gap_ends_a_phase_and_missing_values_do_not():
    series = readings([0, 60, 120, 180, 900, 960], pack_current=[0.3, np.nan, 0.3, 0.3, 0.3, 0.3])
    assert phases(series, a_pack(), a_node()) == [
        Phase("charge", START_MS, START_MS + 180_000),
        Phase("charge", START_MS + 900_000, START_MS + 960_000),
    ]


def test_nothing_has_no_phases():
    assert phases(EMPTY, a_pack(), a_node()) == []
    assert phases(readings([0], pack_current=np.nan), a_pack(), a_node()) == []
