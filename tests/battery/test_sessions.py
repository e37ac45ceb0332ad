import numpy as np
import pytest
from builders import START_MS, a_node, a_pack, every, readings

from hub.battery.flow import flow
from hub.battery.phases import states, thresholds_a
from hub.battery.sessions import Span, next_span

HOUR_MS = 3_600_000


def spans(series):
    """All sessions as (start h, end h, cause)."""
    running = flow(series, a_node())
    state = states(running.series.get("pack_current"), *thresholds_a(a_pack(), a_node()))
    found = []
    at = 0
    while (span := next_span(running, state, a_pack(), at)) is not None:
        hours = (running.time_ms[[span.first, span.last]] - START_MS) / HOUR_MS
        found.append((round(float(hours[0]), 1), round(float(hours[1]), 1), span.cause))
        at = span.last + 1
        if span.cause is None:
            break
    return found


def course(*pieces):
    """Current by hour: (until h, A)."""
    return lambda t: np.select([t < 3600.0 * until for until, _ in pieces], [a for _, a in pieces], pieces[-1][1])


def test_clouds_do_not_end_a_session():
    series = every(
        60, 24, pack_current=lambda t: np.where((t > 8 * 3600) & (t < 16 * 3600) & (t % 3600 < 1800), 0.2, -0.01)
    )
    assert spans(series) == [(8.0, 15.5, "sun")]


def test_night_ends_a_session_and_it_may_go_on_until_enough_of_it_has_passed():
    current = course((6, -0.01), (18, 0.2), (48, -0.01))
    assert spans(every(60, 24, pack_current=current)) == [(6.0, 18.0, "sun")]
    assert spans(every(60, 20, pack_current=current)) == [(6.0, 18.0, None)]


def test_a_dark_panel_ends_a_session_sooner():
    current = course((6, -0.01), (18, 0.2), (48, -0.01))
    series = every(
        60, 19, pack_current=current, pack_voltage=5.2, panel_voltage=lambda t: np.where(t < 18 * 3600, 5.6, 0.2)
    )
    assert spans(series) == [(6.0, 18.0, "dark")]


def test_a_discharge_of_note_separates_sessions():
    series = every(60, 10, pack_current=course((2, 0.2), (3, -0.15), (5, 0.2), (10, 0.0)))
    assert spans(series) == [(0.0, 2.0, "discharge"), (3.0, 5.0, "sun")]


def test_a_long_stretch_without_readings_separates_sessions():
    t = np.concatenate((np.arange(0, 7200, 60), np.arange(7200 + 4 * 3600, 11 * 3600, 60)))
    assert spans(readings(t, pack_current=0.2)) == [(0.0, 2.0, "unseen"), (6.0, 11.0, None)]


def test_no_session_lasts_longer_than_three_days():
    found = spans(every(600, 80, pack_current=0.2))
    assert found[0] == (0.0, 72.0, "long")
    assert found[1] == (72.2, 80.0, None)


@pytest.mark.parametrize("current", [0.0, -0.2, 0.005])
def test_without_charging_there_is_no_session(current):
    assert spans(every(60, 24, pack_current=current)) == []


def test_a_single_reading_in_charge_is_the_whole_session_so_far():
    running = flow(readings([0], pack_current=0.5), a_node())
    assert next_span(running, np.array([1], np.int8), a_pack(), 0) == Span(0, 0, None)
