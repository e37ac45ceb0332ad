"""A small invented store for the tests of the pages: sites, nodes, packs, a few days of readings and their figures.

Everything here is invented and made by simple arithmetic: it is there to be shown, not to be believed.
"""

import datetime as dt
import json
import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np

from hub.settings import Settings, Web
from hub.store import aside, figures, inventory, inventory_change, people, readings
from hub.store.engine import Database
from hub.store.inventory_file import Rows
from hub.store.schema import prepare
from hub.telemetry.message import Remark
from hub.web.factory import create_app
from hub.web.passwords import hash_password

NOW_MS = 1_780_315_320_000  # 2026-06-01T12:02:00Z
DAY_MS = 86_400_000
MINUTE_MS = 60_000
PASSWORD = "a field book and a pencil"
ZONE = "Europe/London"


class Clock:
    """A clock that stands still until it is moved."""

    def __init__(self, now_ms: int = NOW_MS) -> None:
        self.now_ms = now_ms

    def __call__(self) -> int:
        return self.now_ms


def rows(**kinds: list[dict[str, Any]]) -> Rows:
    """Inventory rows with every kind present."""
    return {kind: kinds.get(kind, []) for kind in ("site", "node", "pack", "fitting", "calibration")}


def ridge(node: str = "ridge-east", pack: str | None = "R-07", site: str = "ridge", **extra: Any) -> Rows:
    """One site, one node, one pack fitted sixty days ago."""
    return rows(
        site=[{"name": site, "latitude": 51.2, "longitude": -1.9, "timezone": ZONE}],
        node=[{"name": node, "site": site, "interval_s": 60.0, **extra}],
        pack=[]
        if pack is None
        else [{"label": pack, "designation": "HR6", "cells_in_series": 8, "rated_capacity_ah": 2.4}],
        fitting=[] if pack is None else [{"pack": pack, "node": node, "start_ms": NOW_MS - 60 * DAY_MS}],
    )


@dataclass
class Weather:
    """How a simulated day goes: share of the sun, and the air at night and at noon."""

    sun: float = 1.0
    night_c: float = 6.0
    noon_c: float = 19.0
    clouds: float = 0.25


@dataclass
class Hub:
    """A store with its pages."""

    database: Database
    clock: Clock
    settings: Settings
    ids: dict[str, int] = field(default_factory=dict)

    def load(self, stated: Rows) -> None:
        with self.database.write() as connection:
            inventory_change.apply(connection, stated, who="test", now_ms=self.clock())
            self.ids = inventory.node_ids(connection)

    def account(self, name: str = "keeper", role: people.Role = "keeper") -> people.Account:
        with self.database.write() as connection:
            people.put_account(connection, name, hash_password(PASSWORD), role, self.clock())
            found = people.account(connection, name)
        assert found is not None
        return found

    def grant(self, kind: people.PassKind, name: str = "keeper", lasts_ms: int | None = None) -> str:
        with self.database.write() as connection:
            known = people.account(connection, name)
        known = known or self.account(name)
        with self.database.write() as connection:
            return people.grant(connection, known.id, kind, self.clock(), lasts_ms=lasts_ms)

    def app(self) -> Any:
        app = create_app(self.database, self.settings, clock=self.clock)
        app.config["TESTING"] = True
        return app

    def client(self) -> Any:
        """A client that is logged in."""
        client = self.app().test_client()
        client.set_cookie("packfold-session", self.grant("session"))
        return client

    def append(self, node: str, values: dict[int, dict[str, float]]) -> None:
        with self.database.write() as connection:
            readings.append(connection, [readings.Arrival(self.ids[node], self.clock(), values)])

    def set_aside(self, node: str | None, reason: str, detail: str, times: int = 1) -> None:
        origin = aside.Origin(
            "mqtt", f"field/{node}/telemetry", self.ids.get(node or ""), node, self.clock() - 3_600_000
        )
        with self.database.write() as connection:
            aside.keep(connection, origin, [Remark(reason, detail)] * times)

    def simulate(
        self,
        node: str,
        days: int = 8,
        *,
        cells: int | None = 8,
        pack: str | None = "R-07",
        weathers: list[Weather] | None = None,
        gaps: list[tuple[float, float]] | None = None,
        seed: int = 1,
        step_s: int = 60,
        until_ms: int | None = None,
    ) -> None:
        """Readings of some days up to now, and the figures that go with them. ``gaps``: days ago, from and to."""
        end = until_ms or self.clock()
        start = end - days * DAY_MS
        times = np.arange(start, end, step_s * 1000, dtype=np.int64)
        simulated = simulate(times, cells or 8, weathers or [Weather()], seed)
        keep = np.ones(times.size, bool)
        for a, b in gaps or []:
            keep &= (times < self.clock() - a * DAY_MS) | (times > self.clock() - b * DAY_MS)
        times, simulated = times[keep], {name: values[keep] for name, values in simulated.items()}
        names = list(simulated)
        columns = [np.round(simulated[name], 4).tolist() for name in names]
        values = {t: dict(zip(names, row, strict=True)) for t, *row in zip(times.tolist(), *columns, strict=True)}
        self.append(node, values)
        self._figures(node, times, simulated, cells, pack)

    def _figures(
        self, node: str, times: np.ndarray, values: dict[str, np.ndarray], cells: int | None, pack: str | None
    ) -> None:
        zone = ZoneInfo(ZONE)
        with self.database.write() as connection:
            pack_id = inventory.pack_ids(connection)[pack] if pack else None
            first = dt.datetime.fromtimestamp(times[0] / 1000, zone).date()
            last = dt.datetime.fromtimestamp(times[-1] / 1000, zone).date()
            while first <= last:
                start = round(dt.datetime.combine(first, dt.time(), zone).timestamp() * 1000)
                end = round(dt.datetime.combine(first + dt.timedelta(days=1), dt.time(), zone).timestamp() * 1000)
                inside = (times >= start) & (times < end)
                day = {name: column[inside] for name, column in values.items()}
                written = written_day(first, start, end, times[inside], day, cells, pack_id)
                figures.write(connection, self.ids[node], written)
                first += dt.timedelta(days=1)


def written_day(
    date: dt.date,
    start: int,
    end: int,
    times: np.ndarray,
    day: dict[str, np.ndarray],
    cells: int | None,
    pack_id: int | None,
) -> figures.Written:
    """Rough figures of a simulated day; the pack counts as full once the current has fallen to a trickle in the sun."""
    hours = np.diff(times, append=times[-1:] + 60_000) / 3_600_000 if times.size else np.empty(0)
    hours = np.minimum(hours, 0.25)
    current, voltage = day["pack_current"], day["pack_voltage"]
    into, out = np.maximum(current, 0) * hours, np.maximum(-current, 0) * hours
    panel = day["panel_voltage"] * day["panel_current"] * hours
    full = np.flatnonzero((current > 0) & (current < 0.1) & (day["panel_voltage"] > 17.4))
    full_at = int(times[full[0]]) if full.size and pack_id is not None else None
    charging = np.flatnonzero(current > 0.02)
    seen = float(hours.sum() * 3600)
    row = {
        "pack_id": pack_id,
        "coverage": min(1.0, seen * 1000 / (end - start)),
        "observed_s": min(seen, (end - start) / 1000),
        "bridged_s": 0.0,
        "panel_wh": float(panel.sum()),
        "charge_ah": float(into.sum()),
        "discharge_ah": float(out.sum()),
        "charge_uncertainty_ah": 0.02 * float(into.sum()),
        "discharge_uncertainty_ah": 0.02 * float(out.sum()),
        "charge_wh": float((into * voltage).sum()),
        "discharge_wh": float((out * voltage).sum()),
        "load_wh": None,
        "clear_sky_wh": 46.0,
        "harvest_ratio": float(panel.sum()) / 46.0,
        "pack_temperature_max_c": float(day["pack_temperature"].max()) if times.size else None,
        "cell_voltage_min_v": float(voltage.min()) / cells if times.size and cells else None,
        "cell_voltage_max_v": float(voltage.max()) / cells if times.size and cells else None,
        "full_at_ms": full_at,
    }
    charges = []
    if charging.size:
        until = int(times[charging[-1]])
        charges.append(
            {
                "start_ms": int(times[charging[0]]),
                "pack_id": pack_id,
                "end_ms": None if until > NOW_MS - 10 * MINUTE_MS else until,
                "charge_ah": float(into.sum()),
                "charge_wh": float((into * voltage).sum()),
                "mean_rate_it": 0.18,
                "peak_temperature_c": float(day["pack_temperature"].max()),
                "ended_by": "voltage-plateau" if full_at else "sun-ended",
                "full_at_ms": full_at,
                "confidence": 0.93 if full_at else 0.7,
                "overcharge_ah": 0.12 if full_at else None,
                "evidence": json.dumps(
                    {"voltage_drop_mv_per_cell": 4.2, "temperature_slope_c_per_min": 0.12, "charge_returned_ah": 1.1}
                    if full_at
                    else {"last_rate_it": 0.03}
                ),
            }
        )
    entry = figures.Entry(start, end, date.isoformat(), "test", "{}", int(times[-1]) if times.size else None)
    return figures.Written(entry, row, charges)


def simulate(times: np.ndarray, cells: int, weathers: list[Weather], seed: int) -> dict[str, np.ndarray]:
    """Voltage, current and temperature of a pack under a panel: rough, with the shapes that a keeper knows."""
    rng = np.random.default_rng(seed)
    step_h = float(np.median(np.diff(times))) / 3_600_000
    capacity, level, warm = 2.4, 0.7, 8.0
    columns: dict[str, list[float]] = {
        name: []
        for name in (
            "pack_voltage",
            "pack_current",
            "pack_temperature",
            "air_temperature",
            "panel_voltage",
            "panel_current",
        )
    }
    cloud = 1.0
    for time_ms in times.tolist():
        hour = (time_ms / 3_600_000 + 1) % 24
        weather = weathers[int((time_ms - int(times[0])) // DAY_MS) % len(weathers)]
        height = max(0.0, math.sin(math.pi * (hour - 4.8) / 16.4))
        cloud += 0.06 * (1 - cloud) + weather.clouds * rng.normal() * 0.3
        cloud = min(1.0, max(0.15, cloud))
        sun = weather.sun * height * (cloud if weather.clouds else 1.0)
        air = (
            weather.night_c + (weather.noon_c - weather.night_c) * max(0.0, math.sin(math.pi * (hour - 7) / 15)) ** 1.2
        )
        available = 0.62 * sun
        load = 0.062 + (0.12 if int(time_ms / MINUTE_MS) % 30 < 2 else 0.0)
        charge = min(available, 0.55) if level < 0.995 else min(available, 0.06)
        current = charge - load if level < 0.995 or charge < load else charge - min(load, charge) + 0.03
        level = min(1.0, max(0.05, level + (current * (0.92 if current > 0 else 1.0)) * step_h / capacity))
        rested = 1.2 + 0.09 * level + 0.05 * max(0.0, level - 0.9) / 0.1 - 0.16 * max(0.0, 0.15 - level) / 0.15
        heat = 9.0 * max(0.0, level - 0.93) / 0.07 * min(1.0, max(current, 0) / 0.1) + 5 * max(current, 0)
        warm += (air + heat + 4 * sun - warm) * min(1.0, step_h * 1.2)
        voltage = cells * (rested + 0.17 * current - 0.0025 * (warm - 15) * (current > 0))
        columns["pack_voltage"].append(voltage + rng.normal() * 0.004)
        columns["pack_current"].append(current + rng.normal() * 0.0015)
        columns["pack_temperature"].append(warm + rng.normal() * 0.05)
        columns["air_temperature"].append(air + rng.normal() * 0.1)
        columns["panel_voltage"].append(17.0 + sun if sun > 0.02 else 3 * sun)
        columns["panel_current"].append(0.72 * available if level < 0.995 else 0.05)
    return {name: np.array(values) for name, values in columns.items()}


def a_hub(folder: Path, web: Web | None = None) -> Hub:
    """A migrated, empty store in a folder."""
    database = Database(folder, checkpoints=True)
    prepare(database)
    return Hub(database, Clock(), Settings(web=web or Web()))
