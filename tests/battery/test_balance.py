import numpy as np
import pytest
from builders import START_MS, a_node, every, readings

from hub.battery.balance import Balance, advance, begin, filled
from hub.battery.flow import flow

HOUR_MS = 3_600_000


def of(hours, *currents):
    """An hour of each current."""
    series = every(
        60, hours, pack_current=lambda t: np.select([t < 3600 * (k + 1) for k in range(hours)], currents, currents[-1])
    )
    return flow(series, a_node())


def test_since_a_full_charge_both_directions_are_counted():
    full = Balance(at_ms=START_MS, since_ms=START_MS - HOUR_MS, full_at_ms=START_MS - HOUR_MS, removed_ah=0.1)
    after = advance(full, of(2, -0.5, 0.3), START_MS + 2 * HOUR_MS)
    assert after.removed_ah == pytest.approx(0.6, abs=0.01)
    assert after.returned_ah == pytest.approx(0.3, abs=0.01)
    assert (after.full_at_ms, after.since_ms) == (full.full_at_ms, full.since_ms)


def test_two_steps_are_one():
    running = of(4, -0.5, 0.3, -0.1, 0.7)
    full = Balance(at_ms=START_MS, since_ms=START_MS, full_at_ms=START_MS)
    once = advance(full, running, START_MS + 4 * HOUR_MS)
    twice = advance(advance(full, running, START_MS + 5_000_000), running, START_MS + 4 * HOUR_MS)
    assert twice.removed_ah == pytest.approx(once.removed_ah)
    assert twice.returned_ah == pytest.approx(once.returned_ah)
    assert advance(once, running, START_MS) == once


def test_without_a_full_charge_the_lowest_level_is_the_anchor():
    after = advance(begin(START_MS), of(4, 0.2, -0.5, 0.3, 0.3), START_MS + 4 * HOUR_MS)
    assert after.full_at_ms is None
    assert after.since_ms == pytest.approx(START_MS + 2 * HOUR_MS, abs=60_000)
    assert after.returned_ah - after.removed_ah == pytest.approx(0.6, abs=0.01)


def test_what_was_not_seen_is_kept_in_mind():
    running = flow(readings([0, 60, 7260, 7320], pack_current=-0.1), a_node())
    full = Balance(at_ms=START_MS - 60_000, since_ms=START_MS - 60_000, full_at_ms=START_MS - 60_000)
    assert advance(full, running, START_MS + 3 * HOUR_MS).unseen_s == 7260.0


def test_charge_after_full_is_no_credit_for_what_is_drawn_later():
    running = of(3, 0.3, 0.3, -0.2)
    after = filled(running, START_MS + HOUR_MS, START_MS + 3 * HOUR_MS)
    assert after.removed_ah == pytest.approx(0.2, abs=0.005)
    assert after.returned_ah == pytest.approx(0.0, abs=0.005)
    assert after.full_at_ms == START_MS + HOUR_MS


def test_a_full_pack_kept_full_has_nothing_missing():
    after = filled(of(2, 0.3, 0.1), START_MS + HOUR_MS, START_MS + 2 * HOUR_MS)
    assert (after.removed_ah, after.returned_ah) == (0.0, 0.0)
