import re
import xml.etree.ElementTree as ET
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.series import Series
from hub.web import dayplot
from hub.web.charges import sessions
from hub.web.ranges import chosen
from hub.web.words import DAY_MS

LONDON = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000
WITHIN = chosen("1d", "2026-05-31", NOW, LONDON, (NOW - 40 * DAY_MS, NOW))


def series(**columns: float) -> Series:
    times = np.arange(WITHIN.start_ms, WITHIN.end_ms, 60_000, dtype=np.int64)
    wave = np.sin(np.arange(times.size) / 200)
    return Series(times, {name: value + 0.1 * value * wave for name, value in columns.items()})


def texts(traces, listed=()):
    drawing = dayplot.plot(traces, WITHIN, listed, 60.0, LONDON, "ridge-east")
    root = ET.fromstring(f"<div>{drawing}</div>")
    return [text.text for text in root.iter("text")], str(drawing)


def test_a_day_has_lanes_for_what_is_known():
    traces = dayplot.fine_traces(
        series(pack_voltage=10.4, pack_current=0.3, pack_temperature=20.0, air_temperature=15.0),
        WITHIN.start_ms,
        WITHIN.end_ms,
    )
    words, drawing = texts(traces)
    assert "Pack voltage" in words
    assert "Current into the pack" in words
    assert "Temperature: pack (bold) and air" in words
    assert len(re.findall(r"<path ", drawing)) == 4


def test_the_cell_s_voltage_is_preferred():
    traces = dayplot.fine_traces(series(pack_voltage=10.4), WITHIN.start_ms, WITHIN.end_ms)
    traces["cell_voltage"] = traces["pack_voltage"].scaled(np.full(len(traces["pack_voltage"]), 8.0))
    words, _ = texts(traces)
    assert "Cell voltage" in words
    assert "Pack voltage" not in words


def test_nothing_is_drawn_of_nothing():
    words, drawing = texts({})
    assert "no readings here" in words
    assert "<path" not in drawing
    assert "no readings here" in texts(dayplot.fine_traces(series(), WITHIN.start_ms, WITHIN.end_ms))[0]


def row(start, end, full=None):
    return {
        "pack": "R-07", "start_ms": start, "end_ms": end, "charge_ah": 1.0, "charge_wh": 1.0, "mean_rate_it": 0.1,
        "peak_temperature_c": 20.0, "ended_by": "sun-ended", "full_at_ms": full, "confidence": 0.7,
        "overcharge_ah": None, "evidence": "{}",
    }  # fmt: skip


def test_charge_sessions_are_barred_and_ticked_with_their_number():
    listed = sessions([row(WITHIN.start_ms, WITHIN.start_ms + 1000), row(WITHIN.start_ms + 5000, None)], LONDON)
    words, drawing = texts({}, listed)
    assert drawing.count('class="bar"') == 2
    assert drawing.count('class="tick"') == 1
    assert "1" in words
    assert "2 charge sessions, 0 of them full" in drawing


def test_many_ticks_carry_no_numbers():
    listed = sessions([row(WITHIN.start_ms + i, WITHIN.start_ms + i + 1) for i in range(11)], LONDON)
    assert not dayplot.numbered(listed)
    assert ' dx="7"' not in texts({}, listed)[1]


def day(date, low=1.2, high=1.4, charge=0.7, out=0.6, warm=22.0):
    return {
        "date": date, "cell_voltage_min_v": low, "cell_voltage_max_v": high, "charge_ah": charge,
        "discharge_ah": out, "pack_temperature_max_c": warm,
    }  # fmt: skip


def test_a_life_is_drawn_from_its_days_and_gaps_stay():
    found = dayplot.life_traces(
        [day("2026-03-28"), day("2026-03-31", low=None, high=None), day("2026-04-01", low=1.1)], LONDON
    )
    voltage = found["cell_voltage"]
    assert len(voltage) == 5
    np.testing.assert_array_equal(np.isfinite(voltage.low), [True, False, False, False, True])
    assert found["charge_in"].low[3] == 0.7
    assert dayplot.life_traces([], LONDON) == {}


def test_two_rows_of_a_date_share_its_column():
    found = dayplot.life_traces([day("2026-03-28", 1.2, 1.3), day("2026-03-28", 1.1, 1.25)], LONDON)
    assert found["cell_voltage"].extremes() == (1.1, 1.3)


@given(st.floats(1e-6, 1e6))
def test_steps_are_round_and_not_too_small(rough):
    step = dayplot.nice_step(rough)
    assert rough * (1 - 1e-6) <= step <= rough * 2.5 * (1 + 1e-6)
    leading = float(f"{step:e}"[0])
    assert leading in {1, 2, 5}


@pytest.mark.parametrize("value", [0.0, 12.5, -3.0])
def test_a_steady_value_still_has_a_scale(value):
    traces = dayplot.fine_traces(series(pack_current=value), WITHIN.start_ms, WITHIN.end_ms)
    words, _ = texts(traces)
    assert "Current into the pack" in words
