from zoneinfo import ZoneInfo

import numpy as np

from hub.web.plottable import tabulate
from hub.web.ranges import chosen
from hub.web.reduction import Binned
from hub.web.words import DAY_MS

LONDON = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000
QUARTER = 900_000


def within(kind, to=None):
    return chosen(kind, to, NOW, LONDON, (NOW - 400 * DAY_MS, NOW))


def trace(start, many, step=QUARTER, base=1.2):
    low = base + np.arange(many) * 1e-4
    return Binned(start, step, low, low + 0.01)


def test_a_day_is_told_by_hours():
    stretch = within("1d", "2026-05-31")
    found = tabulate({"cell_voltage": trace(stretch.start_ms, 96)}, stretch, LONDON)
    assert found.stretch == "Hour"
    assert len(found.rows) == 24
    assert found.rows[0] == ("31\u00a0May 00:00\u00a0BST", ("1.200 to 1.210",))


def test_both_hours_of_an_autumn_night_have_their_row():
    stretch = chosen("1d", "2025-10-26", NOW, LONDON, (0, NOW))
    found = tabulate({"cell_voltage": trace(stretch.start_ms, 100)}, stretch, LONDON)
    labels = [label for label, _ in found.rows]
    assert len(labels) == 25
    assert [label[-3:] for label in labels if "01:00" in label] == ["BST", "GMT"]


def test_weeks_by_days_and_a_life_by_months():
    week = within("7d", "2026-05-31")
    assert len(tabulate({"cell_voltage": trace(week.start_ms, 7 * 96)}, week, LONDON).rows) == 7
    life = within("all")
    found = tabulate({"cell_voltage": trace(life.start_ms, 400, DAY_MS)}, life, LONDON)
    assert found.stretch == "Month"
    assert found.rows[0][0] == "Apr\u00a02025"


def test_extremes_of_the_table_are_those_of_the_trace():
    week = within("7d", "2026-05-31")
    drawn = trace(week.start_ms, 7 * 96)
    found = tabulate({"cell_voltage": drawn}, week, LONDON)
    numbers = [float(number) for _, (cell,) in found.rows for number in cell.split(" to ")]
    low, high = drawn.extremes()
    assert (min(numbers), max(numbers)) == (round(low, 3), round(high, 3))


def test_only_what_is_known_has_a_column_and_gaps_say_so():
    day = within("1d", "2026-05-31")
    voltage = trace(day.start_ms, 96)
    warmth = Binned(day.start_ms, QUARTER, np.full(96, np.nan), np.full(96, np.nan))
    warmth.low[:4] = warmth.high[:4] = 20.0
    empty = Binned(day.start_ms, QUARTER, np.full(96, np.nan), np.full(96, np.nan))
    found = tabulate(
        {"cell_voltage": voltage, "pack_voltage": voltage, "pack_temperature": warmth, "air_temperature": empty},
        day,
        LONDON,
    )
    assert found.headings == ("Cell voltage, V", "Pack, °C")
    assert found.rows[0][1][1] == "20.0"
    assert found.rows[1][1][1] == "no reading"


def test_nothing_is_no_rows():
    assert tabulate({}, within("1d"), LONDON).rows == ()
