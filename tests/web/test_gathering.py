from zoneinfo import ZoneInfo

import numpy as np
import pytest
from web.builders import DAY_MS, MINUTE_MS, NOW_MS, Hub, ridge, rows

from hub.series import Series
from hub.store import inventory, readings
from hub.store.inventory import Fitting, Node, Pack
from hub.web.gathering import Subject, ends_of, glance_of, latest_of, subject, traces_of
from hub.web.traces import STEP_MS, Traces

HOUR_MS = 60 * MINUTE_MS


def look(hub: Hub, name="ridge-east", now_ms=None, **more):
    now_ms = now_ms or hub.clock()
    with hub.database.read() as connection:
        known, ids = inventory.load(connection), inventory.node_ids(connection)
    who = subject(known, known.node(name), ids[name])
    end_ms = -(-now_ms // STEP_MS) * STEP_MS
    settings = {"presence": None, "set_aside": {}} | more
    return glance_of(hub.database, Traces(), known, who, now_ms=now_ms, end_ms=end_ms, **settings)


def test_a_glance_at_a_node_that_is_well(shown):
    glance = look(shown)
    assert glance.pack.label == "R-07"
    assert glance.last_ms == NOW_MS - MINUTE_MS
    assert len(glance.days) == 7
    assert all(day.coverage == 1.0 for day in glance.days)
    assert glance.today.coverage == pytest.approx(13 / 24, abs=0.01)
    assert glance.last_full_ms is not None
    assert len(glance.ends) >= 7
    assert glance.latest["cell_voltage"].value == pytest.approx(glance.latest["pack_voltage"].value / 8)


def test_the_trace_keeps_the_extremes_of_the_readings(shown):
    glance = look(shown)
    with shown.database.read() as connection:
        series = readings.read(connection, shown.ids["ridge-east"], NOW_MS - 7 * DAY_MS, NOW_MS)
    trace = glance.traces["cell_voltage"]
    inside = series.where(series.time_ms >= trace.start_ms).get("pack_voltage") / 8
    low, high = trace.extremes()
    assert low == pytest.approx(inside.min(), rel=1e-6)
    assert high == pytest.approx(inside.max(), rel=1e-6)


def test_a_node_never_heard_of(hub):
    hub.load(ridge())
    glance = look(hub)
    assert glance.last_ms is None
    assert glance.latest == {}
    assert glance.days == ()
    assert glance.peak_temperature is None
    assert not glance.traces["cell_voltage"].known


def test_readings_older_than_the_strip_are_still_the_last(hub):
    hub.load(ridge())
    hub.append("ridge-east", {NOW_MS - 40 * DAY_MS: {"pack_voltage": 10.0}})
    glance = look(hub)
    assert glance.last_ms == NOW_MS - 40 * DAY_MS
    assert glance.latest["cell_voltage"].value == 1.25


def test_days_before_the_first_reading_are_not_counted_as_unseen(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 3)
    assert [day.date for day in look(hub).days] == ["2026-05-30", "2026-05-31"]


def test_without_a_pack_there_is_no_cell_voltage(hub):
    hub.load(ridge(pack=None))
    hub.simulate("ridge-east", 2, cells=None, pack=None)
    glance = look(hub)
    assert "cell_voltage" not in glance.latest
    assert not glance.traces["cell_voltage"].known
    assert glance.traces["pack_temperature"].known
    assert glance.last_full_ms is None


def test_a_calibration_moves_what_is_shown(hub):
    hub.load(ridge())
    hub.append("ridge-east", {NOW_MS - MINUTE_MS: {"pack_voltage": 10.0}})
    hub.load(rows(calibration=[{"node": "ridge-east", "quantity": "pack_voltage", "start_ms": 0, "gain": 1.1}]))
    assert look(hub).latest["pack_voltage"].value == pytest.approx(11.0)


def test_values_that_screening_keeps_out_are_not_the_latest(hub):
    hub.load(ridge())
    values = {NOW_MS - i * MINUTE_MS: {"pack_temperature": 20.0 + 0.1 * i} for i in range(1, 30)}
    values[NOW_MS - 1000] = {"pack_temperature": -127.0}
    hub.append("ridge-east", values)
    glance = look(hub)
    assert glance.last_ms == NOW_MS - 1000
    assert glance.latest["pack_temperature"].value == pytest.approx(20.1)
    assert glance.peak_temperature.value == pytest.approx(22.9)


def test_the_last_full_charge_is_looked_for_further_back(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 4, until_ms=NOW_MS - 20 * DAY_MS)
    glance = look(hub)
    assert NOW_MS - 25 * DAY_MS < glance.last_full_ms < NOW_MS - 20 * DAY_MS
    assert glance.ends == ()


def test_a_full_charge_of_another_pack_is_not_this_one_s(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 3)
    hub.load(
        rows(
            pack=[{"label": "R-08", "cells_in_series": 4, "rated_capacity_ah": 2.0}],
            fitting=[{"pack": "R-08", "node": "ridge-east", "start_ms": NOW_MS - HOUR_MS}],
        )
    )
    glance = look(hub)
    assert glance.pack.label == "R-08"
    assert glance.last_full_ms is None
    assert glance.latest["cell_voltage"].value == pytest.approx(glance.latest["pack_voltage"].value / 4)


def a_subject(*fittings: Fitting) -> Subject:
    packs = {"A": Pack("A", "", 8), "B": Pack("B", "", 4)}
    return Subject(Node("n", "s"), 1, ZoneInfo("UTC"), fittings, (), packs)


def test_cells_follow_the_fittings():
    who = a_subject(Fitting("A", "n", 100, 200), Fitting("B", "n", 300))
    times = np.array([99.0, 100.0, 199.0, 200.0, 300.0, 1e15])
    np.testing.assert_array_equal(who.cells_at(times), [np.nan, 8, 8, np.nan, 4, 4])
    assert who.pack_at(199).label == "A"
    assert who.pack_at(200) is None
    assert who.fitting_at(10**15).pack == "B"


def test_latest_takes_the_newest_finite_value_of_each_quantity():
    series = Series(np.array([1, 2, 3]), {"pack_current": np.array([0.1, 0.2, np.nan]), "signal": np.full(3, np.nan)})
    found = latest_of(series, None)
    assert set(found) == {"pack_current"}
    assert (found["pack_current"].time_ms, found["pack_current"].value) == (2, 0.2)


def test_a_session_that_goes_on_without_being_full_has_no_end():
    row = {"full_at_ms": None, "end_ms": None, "confidence": None, "ended_by": None}
    (full,) = ends_of([row, row | {"full_at_ms": 5}])
    assert full.time_ms == 5
    assert full.full


def test_traces_may_begin_before_anything_was_heard(hub):
    hub.load(ridge())
    with hub.database.read() as connection:
        known = inventory.load(connection)
    found = traces_of(hub.database, Traces(), subject(known, known.nodes[0], 1), 0, DAY_MS)
    assert len(found["cell_voltage"]) == 96
