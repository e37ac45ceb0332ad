import pytest

from hub.battery.throughput import Throughput, equivalent_full_cycles, throughput


def test_the_48_cycles_of_the_endurance_test_are_28_full_ones():
    # IEC 61951-2, endurance in cycles, as a cell maker's sheet reproduces it: cycles 1 to 48 each discharge 0.25 It for
    # 140 min. Twenty-eight times the rated capacity comes out, so a counter must read 28, not 48.
    days = [(f"2026-{1 + k // 28:02d}-{1 + k % 28:02d}", 0.25 * 2.0 * 140.0 / 60.0) for k in range(48)]
    assert throughput(days, 2.0)[-1].equivalent_full_cycles == pytest.approx(28.0, abs=1e-12)


def test_five_days_down_to_60_percent_are_two_full_cycles():
    # Worked by hand: 5 * 40 % = 2.00.
    rows = throughput([(f"2026-06-0{d}", 0.4 * 2.4) for d in range(1, 6)], 2.4)
    assert [row.equivalent_full_cycles for row in rows] == pytest.approx([0.4, 0.8, 1.2, 1.6, 2.0])


def test_windows_of_one_date_make_one_row_and_unknown_ones_none():
    rows = throughput([("2026-06-01", 0.5), ("2026-06-01", 0.7), ("2026-06-02", None), ("2026-06-03", 0.0)], 2.0)
    assert rows == [Throughput("2026-06-01", 1.2, 0.6), Throughput("2026-06-03", 0.0, 0.6)]


def test_charging_does_not_count():
    assert equivalent_full_cycles(0.0, 2.0) == 0.0
    assert throughput([], 2.0) == []
