"""Clocks: drift by the crystal's figure, and the ways to be quite wrong."""

import numpy as np
import pytest

from hub.demo.clock import YEAR_2000_S, Clock, Wrong

DAY_MS = 86_400_000
START_MS = 1_780_012_800_000  # a midnight
TIMES = START_MS + np.arange(0, 3 * DAY_MS, 60_000, dtype=np.int64)


def test_twenty_parts_per_million_are_1_73_seconds_a_day() -> None:
    stamp, known = Clock(drift_ppm=20.0, corrected_s=1e12).stamp(TIMES)
    late = stamp - TIMES / 1000.0
    assert late[1440] - late[0] == pytest.approx(1.73, abs=1.0)
    assert late[-1] - late[0] == pytest.approx(3 * 1.73, abs=1.0)
    assert known.all()


def test_a_corrected_clock_stays_near_and_never_shows_an_instant_twice() -> None:
    stamp, _ = Clock(drift_ppm=50.0).stamp(TIMES)
    assert abs(stamp - TIMES / 1000.0).max() < 5.4
    assert (np.diff(stamp) > 0).all()


def test_a_clock_without_drift_is_right() -> None:
    assert np.array_equal(Clock(0.0).stamp(TIMES)[0] * 1000, TIMES)


def test_a_clock_falls_back_to_the_year_2000() -> None:
    wrong = Wrong("year-2000", START_MS + DAY_MS, START_MS + 2 * DAY_MS)
    stamp, _ = Clock(0.0, wrong=(wrong,)).stamp(TIMES)
    assert stamp[1440] == YEAR_2000_S
    assert stamp[2879] == YEAR_2000_S + 86400 - 60
    assert stamp[2880] * 1000 == TIMES[2880]
    # 2000-01-01T00:00:00Z as Unix seconds.
    assert YEAR_2000_S == 946684800


def test_a_wrong_zone_is_whole_hours_off() -> None:
    stamp, _ = Clock(0.0, wrong=(Wrong("zone", START_MS, START_MS + DAY_MS, 5.0),)).stamp(TIMES)
    assert stamp[10] - TIMES[10] / 1000 == 5 * 3600
    assert stamp[1440] - TIMES[1440] / 1000 == 0


def test_no_clock_is_said() -> None:
    _, known = Clock(wrong=(Wrong("none", START_MS, START_MS + DAY_MS),)).stamp(TIMES)
    assert not known[:1440].any()
    assert known[1440:].all()
