"""Loads: exact means whatever the step."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.demo.load import Burst, Lamp, Load


def mean(load: Load, start: float, end: float, elevation: float = 30.0) -> float:
    return float(load.mean_a(np.array([start]), np.array([end]), np.array([elevation]), 0.0)[0])


def test_a_standing_load_stands() -> None:
    assert mean(Load(0.02), 0.0, 60.0) == 0.02


def test_a_burst_counts_for_the_part_that_falls_into_the_step() -> None:
    load = Load(0.0, (Burst(0.6, 600.0, 30.0),))
    assert mean(load, 0.0, 60.0) == pytest.approx(0.3)
    assert mean(load, 20.0, 40.0) == pytest.approx(0.3)
    assert mean(load, 60.0, 120.0) == 0.0
    assert mean(load, 0.0, 600.0) == pytest.approx(0.03)


@given(st.floats(1.0, 5000.0), st.floats(0.0, 1e6), st.floats(1.0, 1e5), st.integers(1, 50))
def test_the_charge_does_not_depend_on_the_step(period: float, start: float, span: float, parts: int) -> None:
    load = Load(0.01, (Burst(0.5, period, period / 3.0, 7.0),))
    edges = np.linspace(start, start + span, parts + 1)
    shares = load.mean_a(edges[:-1], edges[1:], np.zeros(parts), 0.0) * np.diff(edges)
    assert shares.sum() == pytest.approx(mean(load, start, start + span) * span, rel=1e-6, abs=1e-6)


def test_a_lamp_burns_in_the_dark_and_rests_late() -> None:
    load = Load(0.0, (), Lamp(0.2, off_hour=23.0, on_hour=5.0))
    dusk, night, day = 20.0 * 3600.0, 2.0 * 3600.0, 12.0 * 3600.0
    assert mean(load, dusk, dusk + 60.0, -10.0) == 0.2
    assert mean(load, dusk, dusk + 60.0, -1.0) == 0.0
    assert mean(load, night, night + 60.0, -40.0) == 0.0
    assert mean(load, day, day + 60.0, 50.0) == 0.0
