import numpy as np
import pytest
from builders import a_node, every, readings

from hub.battery.current import pack_current, rest_offset_a
from hub.series import EMPTY

NIGHT = {"pack_voltage": 5.0, "panel_voltage": 0.2}


def noisy(mean, seed=1):
    return lambda t: np.round((mean + np.random.default_rng(seed).normal(0.0, 3e-4, t.size)) * 1e4) / 1e4


def test_net_sensing_is_taken_as_it_is():
    series = every(60, 1, pack_current=0.3)
    seen = pack_current(series, a_node(), None)
    assert seen.load_known
    assert seen.offset_a is None
    assert seen.node == a_node()
    assert seen.series.get("pack_current").tolist() == series.get("pack_current").tolist()


def test_a_measured_load_is_taken_off_where_the_sensor_does_not_see_it():
    seen = pack_current(every(60, 1, pack_current=0.3, load_current=0.4), a_node(current_sensing="charge-only"), None)
    assert seen.load_known
    assert seen.series.get("pack_current") == pytest.approx(-0.1)


def test_an_assumed_load_is_taken_off_where_none_is_measured():
    node = a_node(current_sensing="charge-only", standing_load_a=0.05)
    seen = pack_current(every(60, 1, pack_current=0.3), node, None)
    assert seen.load_known
    assert seen.series.get("pack_current") == pytest.approx(0.25)


def test_without_any_load_only_charging_is_known():
    seen = pack_current(readings([0, 60], pack_current=[0.3, -0.01]), a_node(current_sensing="charge-only"), None)
    assert not seen.load_known
    assert seen.series.get("pack_current").tolist() == [0.3, 0.0]


def test_a_found_offset_is_taken_off_and_leaves_less_uncertainty():
    seen = pack_current(every(60, 1, pack_current=0.301), a_node(), 0.001)
    assert seen.series.get("pack_current") == pytest.approx(0.3)
    assert seen.offset_a == 0.001
    assert seen.node.current_offset_a < a_node().current_offset_a


def test_a_long_rest_shows_the_offset():
    node = a_node(current_offset_a=0.001)
    series = every(60, 8, pack_current=noisy(0.0015 - 0.02), load_current=0.02, **NIGHT)
    assert rest_offset_a(series, node) == pytest.approx(0.0015, abs=1e-4)
    closed = every(60, 8, pack_current=noisy(0.0015), charger_duty=0.0)
    assert rest_offset_a(closed, a_node(current_sensing="charge-only")) == pytest.approx(0.0015, abs=1e-4)


def test_an_offset_within_the_noise_is_known_to_be_none():
    series = every(60, 8, pack_current=noisy(-0.02), load_current=0.02, **NIGHT)
    assert rest_offset_a(series, a_node()) == 0.0


@pytest.mark.parametrize(
    "series",
    [
        EMPTY,
        every(60, 8, pack_current=-0.02, **NIGHT),  # the load is not known
        every(60, 8, pack_current=-0.02, load_current=0.02, pack_voltage=5.0, panel_voltage=5.4),  # the sun is up
        every(60, 0.5, pack_current=-0.019, load_current=0.02, **NIGHT),  # too short
        every(60, 8, pack_current=-0.2, load_current=0.02, **NIGHT),  # something else draws current
    ],
)
def test_no_offset_is_claimed_without_a_true_rest(series):
    assert rest_offset_a(series, a_node()) is None
