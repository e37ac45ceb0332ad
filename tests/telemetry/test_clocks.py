import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.telemetry.clocks import WRAP_S, Heard, Placed, Start, classify, place, restarts, starts

NOW = 1_780_000_000_000
NAN = float("nan")


@pytest.mark.parametrize(
    ("time_ms", "belief"),
    [
        (NOW, "plausible"),
        (NOW + 300_000, "plausible"),
        (NOW + 300_001, "future"),
        (0, "too-old"),
        (946_684_800_000, "too-old"),
        (1_577_836_799_999, "too-old"),
        (1_577_836_800_000, "plausible"),
    ],
)
def test_device_times_are_believed_within_limits(time_ms, belief):
    assert classify(time_ms, NOW) == belief


def at(*values):
    return np.array(values, np.float64)


@pytest.mark.parametrize(
    ("uptime", "boot", "expected"),
    [
        (at(), None, []),
        (at(10, 20, 30), None, []),
        (at(10, 20, 5, 15, 3), None, [2, 4]),
        (at(10, NAN, 5), None, [2]),
        (at(10, 9.5, 19.5), None, []),
        (at(10, 20, 30), at(1, 1, 2), [2]),
        (at(10, 20, 5), at(1, 1, 2), [2]),
        (at(10, 20, 5), at(1, 1, 1), []),  # out of order within a boot
        (at(10, 20, 5, 15), at(1, 1, NAN, 2), [2]),
        (at(NAN, NAN, NAN), at(1, NAN, 3), [2]),
        (at(10, 5), at(NAN, 2), [1]),
    ],
)
def test_a_falling_uptime_or_another_boot_is_a_restart(uptime, boot, expected):
    assert restarts(uptime, boot) == expected


def test_the_wrap_of_a_32_bit_counter_of_milliseconds_is_no_restart():
    assert pytest.approx(49.71 * 86_400, rel=1e-4) == WRAP_S
    uptime, elapsed = at(WRAP_S - 30, 30), at(0, 60)
    assert restarts(uptime, None, elapsed) == []
    assert restarts(uptime) == [1]
    assert restarts(at(1000, 30), None, elapsed) == [1]


def test_a_boot_heard_at_once_is_placed_within_the_time_a_message_takes():
    found = starts([Heard(1, 100, NOW + 100_000), Heard(1, 700, NOW + 700_000)], transit_ms=5000, drift=0)
    assert found == {1: Start(1, NOW - 5000, NOW)}
    assert place(found[1], 10, drift=0) == Placed(NOW + 10_000 - 2500, 2500)


def test_the_quickest_message_counts_and_repeats_change_nothing():
    heard = [Heard(1, 100, NOW + 900_000), Heard(1, 200, NOW + 201_000), Heard(1, 100, NOW + 950_000)]
    assert starts(heard, transit_ms=2000, drift=0)[1] == Start(1, NOW - 1000, NOW + 1000)


def test_a_boot_told_of_only_later_lies_between_its_neighbours():
    hour = 3_600_000
    heard = [
        Heard(1, 3600, NOW + hour),  # boot 1 began at NOW
        Heard(2, 1800, NOW + 3 * hour),  # delivered by boot 3
        Heard(3, 60, NOW + 3 * hour - 60_000),
    ]
    found = starts(heard, transit_ms=1000, drift=0)
    assert found[2] == Start(2, NOW + hour - 1000, NOW + 3 * hour - 120_000 - 1_800_000)
    placed = place(found[2], 1800, drift=0)
    assert placed is not None
    assert placed.time_ms + placed.uncertainty_ms <= NOW + 3 * hour - 120_000


def test_a_boot_told_of_only_later_without_one_before_cannot_be_placed():
    found = starts([Heard(1, 100, NOW + 10_000_000), Heard(2, 10, NOW + 9_000_000)])
    assert found[1].earliest_ms is None
    assert place(found[1], 10) is None
    assert found[2].earliest_ms is not None


def test_a_counter_that_was_reset_leaves_its_boots_unplaced():
    found = starts([Heard(1, 1000, NOW), Heard(2, 1000, NOW - 10_000_000)], drift=0)
    assert found[1].earliest_ms is None or found[2].earliest_ms is None


def test_uptimes_that_overlap_the_next_boot_leave_a_boot_unplaced():
    heard = [Heard(1, 100, NOW + 100_000), Heard(1, 1e6, NOW + 2_000_000_000), Heard(2, 10, NOW + 200_000_000)]
    found = starts(heard, drift=0)
    assert found[1].earliest_ms is None
    assert found[2].earliest_ms is not None


def test_nothing_heard_places_nothing():
    assert starts([]) == {}


def test_the_uncertainty_grows_with_the_uptime():
    start = Start(1, NOW, NOW)
    day = place(start, 86_400, drift=100e-6)
    assert day is not None
    assert day.uncertainty_ms == pytest.approx(8640, abs=1)  # 100 parts in a million are 8.64 s a day
    assert day.time_ms == pytest.approx(NOW + 86_400_000, abs=1)


@st.composite
def histories(draw):
    """Boots of one node with their true starts; some deliver at once, some leave their messages to a later boot."""
    drift = draw(st.floats(-100e-6, 100e-6))
    now, heard, truth, waiting = NOW, [], {}, []
    for boot in range(1, draw(st.integers(1, 6)) + 1):
        now += draw(st.integers(1000, 10_000_000))
        truth[boot] = now
        alive_s = draw(st.floats(1, 50_000))
        live = draw(st.booleans())
        uptimes = [alive_s * draw(st.floats(0, 1)) for _ in range(draw(st.integers(1, 4)))]
        sent = [(boot, u * (1 + drift), now + u * 1000) for u in uptimes]
        if live:
            begin = max(at_ms for _, _, at_ms in sent)
            heard += [Heard(b, u, math.ceil(begin + draw(st.integers(0, 60_000)))) for b, u, _ in waiting]
            waiting = []
            heard += [Heard(b, u, math.ceil(at_ms + draw(st.integers(0, 50_000)))) for b, u, at_ms in sent]
            now += 110_000
        else:
            waiting += sent
        now += math.ceil(alive_s * 1000)
    heard += [Heard(b, u, now + 1000) for b, u, _ in waiting]
    return draw(st.permutations(heard)), truth


@given(histories())
def test_the_truth_lies_within_every_stated_interval(history):
    heard, truth = history
    last = max(m.boot for m in heard)
    for boot, start in starts(heard).items():
        assert truth[boot] <= start.latest_ms + 1
        # Only a newest boot heard of nowhere else can be taken for one that delivered at once.
        if start.earliest_ms is not None and boot != last:
            assert start.earliest_ms - 1 <= truth[boot]
