import numpy as np
import pytest
from builders import START_MS, a_node, every

from hub.battery.flow import flow
from hub.battery.stop import charger_cut, last_stop

CUT_S = 7200.0


def stopped(**columns):
    """Two hours of charge at 0.4 A, then one of a small load."""
    made = {"pack_current": lambda t: np.where(t <= CUT_S, 0.4, -0.01), "pack_voltage": 5.5} | columns
    running = flow(every(60, 3, **made), a_node())
    last = int(np.flatnonzero(running.series.get("pack_current") > 0.0)[-1])
    return running, last


def test_a_panel_that_rises_when_the_current_goes_was_let_go():
    running, last = stopped(panel_voltage=lambda t: np.where(t <= CUT_S, 5.9, 8.4))
    stop = charger_cut(running, 0, last, 0.4, a_node())
    assert stop is not None
    assert stop.manner == "cut"
    assert stop.at_ms == START_MS + 7_200_000
    assert stop.before_a == pytest.approx(0.4)
    assert stop.after_a == pytest.approx(-0.01)


def test_a_duty_that_closes_under_a_lit_panel_is_a_cut():
    running, last = stopped(panel_voltage=8.0, charger_duty=lambda t: np.where(t <= CUT_S, 0.7, 0.0))
    assert charger_cut(running, 0, last, 0.4, a_node()) is not None


def test_a_fall_to_a_trickle_is_a_cut_too():
    running, last = stopped(
        pack_current=lambda t: np.where(t <= CUT_S, 0.4, 0.04), panel_voltage=lambda t: np.where(t <= CUT_S, 5.9, 8.2)
    )
    stop = charger_cut(running, 0, last, 0.4, a_node())
    assert stop is not None
    assert stop.at_ms == START_MS + 7_200_000
    assert stop.after_a == pytest.approx(0.04)


@pytest.mark.parametrize(
    "panel",
    [
        {},  # not watched
        {"panel_voltage": lambda t: np.where(t <= CUT_S, 5.9, 0.3)},  # dark
        {"panel_voltage": 5.9},  # a cloud: the panel stays at the pack
    ],
)
def test_without_sun_on_the_panel_nobody_says_that_the_charger_did_it(panel):
    running, last = stopped(**panel)
    assert charger_cut(running, 0, last, 0.4, a_node()) is None


def test_the_end_of_a_day_is_no_cut():
    fade = {"pack_current": lambda t: np.maximum(0.4 * np.cos(t / CUT_S * np.pi / 2), 0.0) - 0.01}
    running, last = stopped(**fade, panel_voltage=lambda t: np.where(t < CUT_S, 5.9, 0.3))
    assert charger_cut(running, 0, last, 0.4, a_node()) is None
    assert last_stop(running, last, 0.4).manner == "faded"


def test_a_sudden_end_is_told_apart_by_whether_the_panel_is_watched():
    running, last = stopped()
    assert last_stop(running, last, 0.4).manner == "broke-off"
    running, last = stopped(panel_voltage=lambda t: np.where(t <= CUT_S, 5.9, 0.3))
    assert last_stop(running, last, 0.4).manner == "dimmed"


def test_readings_may_end_with_the_session():
    running = flow(every(60, 1, pack_current=0.4), a_node())
    stop = last_stop(running, 60, 0.4)
    assert (stop.after_a, stop.manner) == (0.0, "broke-off")
    assert charger_cut(running, 0, 60, 0.4, a_node()) is None
    assert charger_cut(flow(every(60, 0.05, pack_current=0.4), a_node()), 0, 2, 0.4, a_node()) is None
