import re
import xml.etree.ElementTree as ET
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from hub.web.axis import axis
from hub.web.chart import FINE, Bar, Chart, Lane, Pen, Tick, draw, stroke
from hub.web.reduction import Binned

HOUR, DAY = 3_600_000, 86_400_000
UTC = ZoneInfo("UTC")
LANE = Lane("Cell voltage", "V", 1.1, 1.5, (1.1, 1.2, 1.3, 1.4, 1.5), 30, 80, 1)


def walked(path: str) -> list[list[tuple[int, int]]]:
    """The corners that a path visits, run by run."""
    runs: list[list[tuple[int, int]]] = []
    x = y = 0
    for command, text in re.findall(r"([Mlvh])([^Mlvh]*)", path):
        numbers = [int(number) for number in re.findall(r"-?\d+", text)]
        if command == "M":
            x, y = numbers
            runs.append([])
        elif command == "l":
            x, y = x + numbers[0], y + numbers[1]
        elif command == "v":
            y += numbers[0]
        else:
            x += numbers[0]
        runs[-1].append((x, y))
    return runs


def trace(low: list[float], high: list[float] | None = None, step: int = HOUR) -> Binned:
    return Binned(0, step, np.array(low), np.array(low if high is None else high))


values = st.floats(1.1, 1.5) | st.just(float("nan"))


@given(hnp.arrays(np.float64, st.integers(1, 40), elements=values), st.integers(1, 4), st.data())
def test_a_stroke_visits_both_extremes_of_every_column_and_nothing_else(low, most_apart, data):
    spread = data.draw(hnp.arrays(np.float64, low.size, elements=st.floats(0, 0.2)))
    high = np.minimum(low + spread, 1.5)
    path = stroke(Pen(LANE, Binned(0, HOUR, low, high), "ink", most_apart), 0, HOUR / 2)
    corners = {corner for run in walked(path) for corner in run}
    wanted = set()
    for i in np.flatnonzero(np.isfinite(low)).tolist():
        for value in (low[i], high[i]):
            wanted.add((2 * i + 1, round(float(LANE.tenths(np.array([value]))[0]))))
    dots = {(x + 1, y) for x, y in wanted}
    assert wanted <= corners <= wanted | dots


def test_a_gap_is_left_blank():
    runs = walked(stroke(Pen(LANE, trace([1.2, 1.3, np.nan, np.nan, 1.3, 1.2]), "ink"), 0, HOUR / 2))
    assert [[x for x, _ in run] for run in runs] == [[1, 3], [9, 11]]


def test_a_single_value_is_a_dot():
    assert stroke(Pen(LANE, trace([np.nan, 1.3, np.nan]), "ink"), 0, HOUR / 2) == "M3 700h1"


def test_the_nearer_extreme_comes_first():
    # From 1.2 up: the low end of the next column is nearer than its high end.
    (run,) = walked(stroke(Pen(LANE, trace([1.2, 1.25], [1.2, 1.45]), "ink"), 0, HOUR / 2))
    heights = [y for _, y in run]
    assert heights == [900, 800, 400]


def test_values_beyond_the_scale_stay_at_its_edge():
    assert LANE.y(9.0) == LANE.top
    assert LANE.y(-9.0) == LANE.bottom
    assert LANE.tenths(np.array([9.0, -9.0, np.nan])) == [LANE.top * FINE, LANE.bottom * FINE, 0]


def a_chart(**more) -> Chart:
    pens = [Pen(LANE, trace([1.2, 1.3, 1.35] * 8), "ink")]
    settings = {"lanes": [LANE], "pens": pens, "words": "A day."} | more
    return Chart(0, DAY, axis(0, DAY, UTC), **settings)


def elements(chart: Chart, name: str) -> list[ET.Element]:
    root = ET.fromstring(f"<div>{draw(chart)}</div>")
    return list(root.iter(name))


def test_a_drawing_is_well_formed_and_says_what_it_shows():
    papers = [svg for svg in elements(a_chart(), "svg") if svg.get("class") == "paper"]
    assert len(papers) == 1
    assert papers[0].get("role") == "img"
    assert papers[0].get("aria-label") == "A day."


def test_words_in_a_drawing_cannot_become_markup():
    hostile = '<script>alert("x")</script>&'
    chart = a_chart(words=hostile, note=hostile, ticks=[Tick(HOUR, hostile, True, hostile)], bars=[Bar(0, 9, hostile)])
    assert "<script" not in draw(chart)
    assert hostile in {title.text for title in elements(chart, "title")}


def test_ticks_differ_in_shape_and_those_off_the_paper_are_left_out():
    ticks = [Tick(HOUR, "full", True, "1"), Tick(2 * HOUR, "not full", False), Tick(-1, "before", True)]
    marks = [g.get("class") for g in elements(a_chart(ticks=ticks), "g")]
    assert marks == ["tick strong", "tick"]


def test_a_bar_is_cut_at_the_edges_of_the_paper():
    bars = [
        rect for rect in elements(a_chart(bars=[Bar(-DAY, 6 * HOUR, "a charge")]), "rect") if rect.get("class") == "bar"
    ]
    assert [(bar.get("x"), bar.get("width")) for bar in bars] == [("0%", "25%")]


def test_an_empty_chart_is_paper_with_words():
    texts = [text.text for text in elements(a_chart(pens=[], note="no readings here"), "text")]
    assert "no readings here" in texts
    assert not elements(a_chart(pens=[]), "path")


def test_the_scale_is_printed_with_its_unit_once():
    texts = [text.text for text in elements(a_chart(), "text")]
    assert [text for text in texts if "V" in text] == ["1.5 V"]


@pytest.mark.parametrize("named", [True, False])
def test_lanes_are_named_where_asked(named):
    texts = [text.text for text in elements(a_chart(named=named), "text")]
    assert ("Cell voltage" in texts) is named
