"""The invented scenario: that its stories happen, in any season, and that its inventory is one."""

import datetime as dt
import time
import tomllib
from dataclasses import dataclass

import numpy as np
import pytest

from hub.demo import scenario
from hub.demo.cell import FULL_ACCEPTANCE
from hub.demo.clock import YEAR_2000_S
from hub.demo.node import Node
from hub.demo.play import history
from hub.errors import UsageError
from hub.quantities import BY_NAME
from hub.store import inventory_file

NOW = dt.datetime(2026, 12, 1, 9, 37, 21, tzinfo=dt.UTC)
BEGIN_MS = scenario.start_ms(NOW)
MINUTES = 28 * 1440


@dataclass
class History:
    """All readings of a node and what was true."""

    node: Node
    begin_ms: int
    seconds: float
    time_ms: np.ndarray
    stamp_s: np.ndarray
    boot: np.ndarray
    shown: dict[str, np.ndarray]
    true: dict[str, np.ndarray]
    level: np.ndarray
    capacity_ah: np.ndarray
    full: np.ndarray
    overcharge_ah: np.ndarray

    @property
    def day(self) -> np.ndarray:
        return (self.time_ms - self.begin_ms - 1) // scenario.DAY_MS


def remember(name: str, now: dt.datetime = NOW) -> History:
    began = time.process_time()
    node = scenario.build(name, now)
    parts = list(history(node, 28))
    seconds = time.process_time() - began
    full = [
        (p.course.acceptance < FULL_ACCEPTANCE)
        & (p.course.columns["pack_current"] > 0.01 * node.plant.pack.design.rated_ah)
        for p in parts
    ]
    return History(
        node,
        scenario.start_ms(now),
        seconds,
        *(np.concatenate([getattr(p, field) for p in parts]) for field in ("time_ms", "stamp_s", "boot")),
        {q: np.concatenate([p.columns[q] for p in parts]) for q in parts[0].columns},
        {q: np.concatenate([p.course.columns[q] for p in parts]) for q in parts[0].course.columns},
        np.concatenate([p.course.level for p in parts]),
        np.concatenate([p.course.capacity_ah for p in parts]),
        np.concatenate(full),
        np.concatenate([p.course.overcharge_ah for p in parts]),
    )


@pytest.fixture(scope="module")
def histories() -> dict[str, History]:
    return {name: remember(name) for name in scenario.NAMES}


def test_twenty_eight_days_of_six_nodes_take_less_than_twenty_seconds(histories: dict[str, History]) -> None:
    assert sum(h.seconds for h in histories.values()) < 20.0
    assert sum(h.time_ms.size for h in histories.values()) > 0.95 * 6 * MINUTES


def test_readings_are_catalogued_in_range_and_finite(histories: dict[str, History]) -> None:
    for h in histories.values():
        for name, values in h.shown.items():
            assert np.isfinite(values).all()
            if name != "pack_temperature":
                assert BY_NAME[name].low <= values.min()
                assert values.max() <= BY_NAME[name].high


def test_the_same_now_and_seed_give_the_same_readings() -> None:
    one, other = (next(history(scenario.build("weir-gauge", NOW), 1)) for _ in range(2))
    assert all(np.array_equal(one.columns[q], other.columns[q]) for q in one.columns)
    strange = next(history(scenario.build("weir-gauge", NOW, seed=3), 1))
    assert not np.array_equal(one.columns["pack_voltage"], strange.columns["pack_voltage"])


def test_history_ends_at_the_minute_of_now(histories: dict[str, History]) -> None:
    assert BEGIN_MS % 60_000 == 0
    for h in histories.values():
        assert 0 <= NOW.timestamp() * 1000 - h.time_ms[-1] < 60_000 or h.node.name == "quarry-wind"


def test_the_gauge_fills_on_most_days(histories: dict[str, History]) -> None:
    h = histories["weir-gauge"]
    filled = sum(h.full[h.day == d].any() for d in range(28))
    assert 15 <= filled <= 27
    assert h.overcharge_ah[-1] < 28 * 0.5 * 2.4


@pytest.mark.parametrize("month", [3, 6, 9])
def test_the_gauge_fills_and_the_wind_recorder_starves_in_other_seasons(month: int) -> None:
    now = NOW.replace(month=month, day=20)
    gauge, wind = remember("weir-gauge", now), remember("quarry-wind", now)
    assert sum(gauge.full[gauge.day == d].any() for d in range(28)) >= 14
    assert not wind.full.any()
    assert wind.level[0] - wind.level[-1] > 0.08


def test_the_wind_recorder_starves(histories: dict[str, History]) -> None:
    h = histories["quarry-wind"]
    assert not h.full.any()
    weekly = [h.level[h.day == d].mean() for d in (1, 8, 15, 22)]
    assert weekly == sorted(weekly, reverse=True)
    assert h.level[-1] < 0.45


def test_the_wind_recorders_sensor_meets_its_range_end(histories: dict[str, History]) -> None:
    h = histories["quarry-wind"]
    assert h.true["pack_current"].min() < -3.4
    assert (h.shown["pack_current"] == -3.2).sum() >= 20


def test_the_relay_is_overcharged_and_warm(histories: dict[str, History]) -> None:
    h = histories["quarry-relay"]
    daily = h.overcharge_ah[-1] / 28
    # A maker's cap for packs that are full anyway: a tenth of the capacity a day (VARTA handbook).
    assert daily > 0.25 * 2.0
    rise = h.true["pack_temperature"] - h.true["air_temperature"]
    assert rise[h.full].max() > 10.0
    summer = remember("quarry-relay", NOW.replace(month=7))
    assert summer.true["pack_temperature"].max() > 45.0
    assert summer.true["pack_temperature"].max() < 62.0


def test_the_logger_is_charged_slowly(histories: dict[str, History]) -> None:
    h = histories["fen-logger"]
    assert h.true["pack_current"].max() < 0.1 * 2.0
    assert h.full.any()


def test_the_lamps_pack_fades_and_is_changed(histories: dict[str, History]) -> None:
    h = histories["fen-lamp"]
    jump = int(np.argmax(np.diff(h.capacity_ah)))
    fitted = tomllib.loads(scenario.inventory_toml(NOW))["fitting"]
    ends = next(f["end"] for f in fitted if f["pack"] == "F-02")
    starts = next(f["start"] for f in fitted if f["pack"] == "F-05")
    assert ends == starts
    assert h.time_ms[jump] < ends.timestamp() * 1000 <= h.time_ms[jump + 1]
    assert h.capacity_ah[jump] < 0.87 * h.capacity_ah[0]
    assert h.capacity_ah[-1] > 2.0


def test_the_camera_hunts_and_has_a_backlog(histories: dict[str, History]) -> None:
    h = histories["weir-camera"]
    busy = (h.shown["charger_duty"] > 0.05) & (h.shown["charger_duty"] < 0.95) & (h.true["panel_current"] > 0.3)
    assert np.std(h.true["pack_current"][busy] - 0.55) > 0.05
    node = scenario.build("weir-camera", NOW)
    order = []
    for stretch in history(node, 28):
        node.post(stretch)
    while (packet := node.outbox.due(0.0, 10**6, 20.0)) is not None:
        node.outbox.sent(packet, 0.0)
        order.append(packet.true_ms[0])
    back = np.flatnonzero(np.diff(order) < -3 * scenario.DAY_MS)
    assert back.size == 1
    assert len(order) == len(set(order))


def test_the_loggers_clock_stood_at_2000(histories: dict[str, History]) -> None:
    h = histories["fen-logger"]
    wrong = h.stamp_s < YEAR_2000_S + 3 * 86400
    assert 29 * 60 <= wrong.sum() <= 30 * 60
    assert set(h.boot[wrong]) == {2}
    assert abs(h.stamp_s - h.time_ms / 1000)[~wrong].max() < 5.0
    assert h.boot[-1] == 3


def test_thermometers_lie_as_thermometers_do(histories: dict[str, History]) -> None:
    camera = histories["weir-camera"].shown
    assert (camera["pack_temperature"] == -127.0).sum() > 120
    assert 3 <= (camera["pack_temperature"] == 85.0).sum() <= 6
    lamp = histories["fen-lamp"].shown["pack_temperature"]
    runs = np.diff(np.flatnonzero(np.diff(lamp)))
    assert runs.max() >= 7 * 60 - 2


def test_neighbours_see_the_same_sun(histories: dict[str, History]) -> None:
    gauge, camera = histories["weir-gauge"], histories["weir-camera"]
    air = np.corrcoef(gauge.true["air_temperature"], camera.true["air_temperature"][: gauge.time_ms.size])[0, 1]
    assert air > 0.99
    lamp, logger = histories["fen-lamp"], histories["fen-logger"]
    common = np.intersect1d(lamp.time_ms, logger.time_ms)
    one = logger.true["panel_current"][np.isin(logger.time_ms, common)]
    other = lamp.true["air_temperature"][np.isin(lamp.time_ms, common)]
    assert np.corrcoef(one, other)[0, 1] > 0.4


def test_the_inventory_is_read_by_the_hub() -> None:
    rows = inventory_file.parse(scenario.inventory_toml(NOW), "the scenario")
    assert [r["name"] for r in rows["site"]] == list(scenario.SITES)
    assert [r["name"] for r in rows["node"]] == list(scenario.NAMES)
    assert len(rows["pack"]) == 7
    assert all(4 <= r["cells_in_series"] <= 10 for r in rows["pack"])
    by_node: dict[str, list[dict]] = {}
    for fitting in rows["fitting"]:
        by_node.setdefault(fitting["node"], []).append(fitting)
    assert all(fittings[0]["start_ms"] <= BEGIN_MS for fittings in by_node.values())
    assert [f["pack"] for f in by_node["fen-lamp"]] == ["F-02", "F-05"]
    assert scenario.inventory_toml(NOW) == scenario.inventory_toml(NOW)


@pytest.mark.parametrize("days", [1, 9, 40])
def test_another_length_of_history(days: int) -> None:
    rows = inventory_file.parse(scenario.inventory_toml(NOW, days), "the scenario")
    assert min(f["start_ms"] for f in rows["fitting"]) <= scenario.start_ms(NOW, days)
    node = scenario.build("fen-lamp", NOW, days)
    assert node.plant.pack.design.rated_ah == 2.1
    assert (node.plant.pack.design.wear > 0.1) == (days > 9.15)


def test_what_does_not_exist_is_refused() -> None:
    with pytest.raises(UsageError, match="weir-gauge"):
        scenario.build("nobody", NOW)
    with pytest.raises(UsageError, match="zone"):
        scenario.start_ms(NOW.replace(tzinfo=None))
