"""Dice that can be thrown again."""

import subprocess
import sys

import numpy as np
import pytest
from scipy import stats

from hub.demo import noise

KEYS = np.arange(200_000, dtype=np.int64)


def test_uniform_numbers_are_uniform() -> None:
    assert stats.kstest(noise.uniform(KEYS, 5), "uniform").pvalue > 0.001
    assert abs(np.corrcoef(noise.uniform(KEYS, 5), noise.uniform(KEYS + 1, 5))[0, 1]) < 0.01
    assert abs(np.corrcoef(noise.uniform(KEYS, 5), noise.uniform(KEYS, 6))[0, 1]) < 0.01


def test_normal_numbers_have_mean_zero_and_deviation_one() -> None:
    values = noise.normal(KEYS, 5)
    assert values.mean() == pytest.approx(0.0, abs=0.01)
    assert values.std() == pytest.approx(1.0, abs=0.01)
    assert abs(values).max() < 3.47


def test_bits_are_those_of_the_published_generator() -> None:
    # SplitMix64 with seed 1234567 begins with these (Vigna's reference implementation, values as widely published).
    state = np.arange(1, 4, dtype=np.int64)
    assert noise.bits(state, 1234567).tolist() == [6457827717110365317, 3203168211198807973, 9817491932198370423]


def test_a_salt_is_the_same_in_another_process() -> None:
    code = "from hub.demo import noise; print(noise.salt('cloud', 130))"
    other = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert int(other.stdout) == noise.salt("cloud", 130)
    # FNV-1a of "a" in 64 bits is af63dc4c8601ec8c (published test vector).
    assert noise.salt("a") == 0xAF63DC4C8601EC8C % 2**63


def test_a_smooth_curve_is_the_same_piecewise() -> None:
    t = np.linspace(0.0, 50_000.0, 3001)
    whole = noise.smooth(t, 700.0, 3)
    assert np.array_equal(np.concatenate([noise.smooth(p, 700.0, 3) for p in np.array_split(t, 7)]), whole)
    assert whole.min() >= 0.0
    assert whole.max() <= 1.0
    assert abs(np.diff(whole)).max() < 0.06


def test_near_places_share_the_curve_and_far_ones_do_not() -> None:
    t = np.linspace(0.0, 5e6, 20_000)
    here = noise.smooth_across(t, 700.0, 0.3, 3)
    assert np.corrcoef(here, noise.smooth_across(t, 700.0, 0.4, 3))[0, 1] > 0.9
    assert abs(np.corrcoef(here, noise.smooth_across(t, 700.0, 7.3, 3))[0, 1]) < 0.1
