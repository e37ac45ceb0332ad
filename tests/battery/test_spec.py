import math

import pytest
from builders import a_node, a_pack

from hub.battery.spec import NodeSpec, Window
from hub.errors import InventoryError, UsageError


def test_default_uncertainties_are_the_limits_of_common_parts_over_the_square_root_of_three():
    # Limits from memory of the datasheets of a 12-bit shunt current monitor and a one-wire thermometer; the rectangular
    # distribution is JCGM 100:2008, 4.3.7.
    node = NodeSpec("n", 10.0)
    assert node.current_offset_a == pytest.approx(100e-6 / 0.1 / math.sqrt(3.0), rel=0.01)
    assert node.current_gain_error == pytest.approx(math.hypot(0.01, 0.01) / math.sqrt(3.0), rel=0.01)
    assert node.voltage_gain_error == pytest.approx(0.01 / math.sqrt(3.0), rel=0.01)
    assert node.temperature_error_c == pytest.approx(0.5 / math.sqrt(3.0), rel=0.01)


@pytest.mark.parametrize("wrong", [{"cells_in_series": 0}, {"cells_in_parallel": 0}, {"rated_capacity_ah": 0.0}])
def test_a_pack_without_cells_or_capacity_is_refused(wrong):
    with pytest.raises(InventoryError, match="R-07"):
        a_pack(**wrong)


def test_a_node_needs_an_interval():
    with pytest.raises(InventoryError, match="ridge-east"):
        a_node(interval_s=0.0)


def test_a_window_runs_forward():
    with pytest.raises(UsageError, match="must end after it starts"):
        Window(10, 10)
