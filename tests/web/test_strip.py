import re
from dataclasses import replace
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from hub.store.inventory import Node, Pack, Site
from hub.web.glance import End, Glance
from hub.web.reduction import Binned
from hub.web.strip import TEMPERATURE, VOLTAGE, pen_lift, strip, temperature_lane, voltage_lane, widened

NOW = 1_780_315_200_000
DAY, STEP = 86_400_000, 900_000
START = NOW - 7 * DAY


def trace(low: float, high: float) -> Binned:
    values = np.linspace(low, high, 672)
    return Binned(START, STEP, values, values)


GLANCE = Glance(
    node=Node("ridge-east", "ridge"),
    site=Site("ridge", 51.2, -1.9),
    zone=ZoneInfo("Europe/London"),
    pack=Pack("R-07", "HR6", 8, 1, 2.4),
    traces={"cell_voltage": trace(1.21, 1.47), "pack_temperature": trace(4.0, 31.0)},
    ends=(End(NOW - DAY, True, 0.97, "voltage-drop"), End(NOW - 2 * DAY, False, 0.7, "sun-ended")),
)


def drawn(glance: Glance, fold: int = 1) -> str:
    return str(strip(glance, START, NOW, NOW, fold)).replace("\u00a0", " ")


def test_a_strip_tells_in_words_what_it_draws():
    label = re.search(r'aria-label="([^"]+)"', drawn(GLANCE)).group(1)
    assert label == (
        "Seven days of ridge-east. Cell voltage between 1.21 V and 1.47 V. Temperature between 4 °C and 31 °C. "
        "1 full charge."
    )


def test_ends_of_charge_say_how_they_ended_and_how_sure():
    text = drawn(GLANCE)
    assert "<title>yesterday 13:00 BST. Full, sure (0.97); ended as the voltage dipped from its peak.</title>" in text
    assert "<title>Sat 13:00 BST. Not full, likely (0.70); ended when the sun went.</title>" in text


def test_folding_makes_the_drawing_lighter():
    corners = [sum(path.count("l") for path in re.findall(r' d="([^"]+)"', drawn(GLANCE, fold))) for fold in (1, 2)]
    assert corners == [2 * 671, 2 * 335]


@pytest.mark.parametrize(
    ("changes", "note"),
    [
        ({"traces": {}}, "no readings in these seven days"),
        ({"traces": {"pack_temperature": trace(4, 9)}, "pack": None}, "cell voltage not known: no pack fitted"),
        ({"traces": {"pack_temperature": trace(4, 9)}}, "no voltage in these readings"),
        ({"traces": {"cell_voltage": trace(np.nan, np.nan)}}, "no readings in these seven days"),
    ],
)
def test_empty_paper_says_why(changes, note):
    assert note in drawn(replace(GLANCE, **changes))


def test_all_strips_share_a_scale_unless_a_trace_needs_more():
    assert widened(VOLTAGE, trace(1.2, 1.4), 0.1) == VOLTAGE
    assert widened(VOLTAGE, None, 0.1) == VOLTAGE
    assert widened(VOLTAGE, trace(0.93, 1.52), 0.1) == pytest.approx((0.9, 1.6))
    assert widened(TEMPERATURE, trace(-24, 61), 10) == (-30, 70)


def test_lanes_have_labelled_lines_inside():
    for lane in (voltage_lane(None, 0, 80), voltage_lane(trace(0.0, 2.0), 0, 80), temperature_lane(None, 0, 30)):
        assert lane.labelled
        assert all(lane.low <= value <= lane.high for value in (*lane.lines, *lane.labelled))


@pytest.mark.parametrize(("interval_s", "columns"), [(10, 1), (60, 1), (300, 1), (900, 3), (3600, 12)])
def test_the_pen_is_lifted_after_three_intervals(interval_s, columns):
    assert pen_lift(interval_s, STEP) == columns
