"""A site as a whole: what flows must add up."""

import datetime as dt

import numpy as np
import pytest

from hub.demo.cell import Pack, PackDesign
from hub.demo.charger import Direct, Panel
from hub.demo.load import Burst, Load
from hub.demo.plant import RETURN_V, SHED_V, Plant
from hub.demo.sky import Place, Region

PLACE = Place(43.3, 11.9, 240.0)
REGION = Region(5, PLACE)
PANEL = Panel(3.0, 11.0, 0.33, tilt_deg=45.0, facing_deg=180.0)
START_MS = round(dt.datetime(2026, 5, 1, tzinfo=dt.UTC).timestamp()) * 1000


def plant(load: Load, level: float = 0.6, panel: Panel = PANEL) -> Plant:
    return Plant(REGION, PLACE, panel, Direct(), load, Pack(PackDesign(4, 2.0), level, 12.0), START_MS)


def instants(days: float, step_s: int = 60) -> np.ndarray:
    return START_MS + np.arange(1, round(days * 86400 / step_s) + 1, dtype=np.int64) * step_s * 1000


def test_currents_add_up_and_make_the_charge() -> None:
    site = plant(Load(0.02, (Burst(0.3, 900.0, 30.0),)))
    course = site.run(instants(2))
    seen = course.columns
    # Behind a diode the panel's current is the pack's and the load's together.
    assert seen["panel_current"] - seen["load_current"] == pytest.approx(seen["pack_current"], abs=1e-9)
    charge = np.cumsum(seen["pack_current"]) * 60.0 / 3600.0
    assert course.in_ah - course.out_ah == pytest.approx(charge, abs=1e-9)
    assert course.level[-1] == site.pack.level


def test_nights_are_dark_and_days_charge() -> None:
    site = plant(Load(0.02))
    course = site.run(instants(1))
    elevation = REGION.light(course.time_ms / 1000.0, PLACE).elevation_deg
    assert not course.columns["panel_current"][elevation < 0.0].any()
    assert course.columns["pack_current"][elevation < 0.0] == pytest.approx(-0.02)
    assert course.columns["panel_current"][elevation > 30.0].min() > 0.02


def test_pieces_give_the_same_course() -> None:
    whole = plant(Load(0.02)).run(instants(1))
    other = plant(Load(0.02))
    parts = [other.run(t) for t in np.array_split(instants(1), 11)]
    assert np.array_equal(np.concatenate([p.columns["pack_voltage"] for p in parts]), whole.columns["pack_voltage"])


def test_the_step_hardly_matters() -> None:
    load = Load(0.02, (Burst(0.3, 900.0, 30.0),))
    coarse, fine = plant(load), plant(load)
    coarse.run(instants(1))
    fine.run(instants(1, 10))
    assert coarse.pack.level == pytest.approx(fine.pack.level, abs=0.01)


def test_an_empty_node_sheds_its_load_and_returns_charged() -> None:
    site = plant(Load(0.12), 0.3)
    course = site.run(instants(2))
    off = np.flatnonzero(~course.powered)
    assert off.size
    per_cell = course.columns["pack_voltage"] / 4
    assert per_cell[off[0]] <= SHED_V
    assert not course.columns["load_current"][off[1:]].all()
    back = off[0] + int(np.argmax(course.powered[off[0] :]))
    assert per_cell[back] >= RETURN_V


def test_a_swap_keeps_the_temperature() -> None:
    site = plant(Load(0.02))
    site.run(instants(0.6))
    warm = site.pack.temperature_c
    fresh = Pack(PackDesign(4, 2.4), 0.9, -5.0)
    old = site.swap(fresh)
    assert site.pack is fresh
    assert old is not fresh
    assert fresh.temperature_c == warm


def test_nothing_in_nothing_out() -> None:
    site = plant(Load(0.02))
    assert site.run(np.empty(0, np.int64)).time_ms.size == 0
    assert site.time_ms == START_MS
