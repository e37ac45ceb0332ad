"""The invented scenario of the demonstration: six nodes at three sites of one region, each with its own story.

Places, names and histories are made up; the coordinates stand for a mild inland climate and for nobody's station.
Everything is placed relative to ``now``, and the same ``now`` and seed give the same readings.
"""

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np

from hub.demo import noise
from hub.demo.cell import Pack, PackDesign
from hub.demo.charger import Charger, Direct, EndRule, Panel, Regulated, Tuning
from hub.demo.clock import Clock, Wrong
from hub.demo.load import Burst, Lamp, Load
from hub.demo.node import Event, Fitout, Node
from hub.demo.plant import Plant
from hub.demo.sensors import Fault
from hub.demo.sky import Place, Region
from hub.errors import UsageError

SEED: Final = 20
HISTORY_DAYS: Final = 28
INTERVAL_S: Final = 60
DAY_MS: Final = 86_400_000
HOUR_MS: Final = 3_600_000
ZONE: Final = "Europe/Rome"
SITES: Final = {
    "heron-weir": Place(43.31, 11.87, 240.0),
    "quarry-mast": Place(43.36, 11.95, 460.0),
    "fen-gate": Place(43.27, 11.98, 225.0),
}

_BATTERY: Final = ("pack_voltage", "pack_current", "pack_temperature", "air_temperature")
_PANEL: Final = ("panel_voltage", "panel_current")
_REGULATOR: Final = ("charger_duty", "charge_target")


@dataclass(frozen=True, slots=True)
class PackStory:
    """A pack of the scenario: label, designation, how it is made, its level at the start and its age in days."""

    label: str
    designation: str
    design: PackDesign
    level: float
    age_days: int


@dataclass(frozen=True, slots=True)
class NodeStory:
    """A node of the scenario.

    ``packs`` follow each other; ``swapped_day`` is the day of the history, counted back from now, on which the second
    took over. ``restarts`` and the spans of ``fitout`` are made from ``now`` in ms by a function.
    """

    name: str
    site: str
    panel: Panel
    charger: Callable[[], Charger]
    load: Load
    packs: tuple[PackStory, ...]
    fitout: Callable[[int], Fitout]
    box_rise_k: float = 4.0
    swapped_day: float = 0.0
    restart_days: tuple[float, ...] = ()


def _span(now_ms: int, days_ago: float, hours: float) -> tuple[int, int]:
    start = now_ms - round(days_ago * DAY_MS)
    return start, start + round(hours * HOUR_MS)


def _fault(now_ms: int, kind: Literal["loose-wire", "stuck"], channel: str, days_ago: float, hours: float) -> Fault:
    return Fault(channel, kind, *_span(now_ms, days_ago, hours))


# A river gauge whose pack fills on most days and whose charger sees it.
_WEIR_GAUGE: Final = NodeStory(
    "weir-gauge",
    "heron-weir",
    Panel(20.0, 21.5, 1.25, tilt_deg=50.0, facing_deg=180.0),
    lambda: Regulated(
        1.0,
        Tuning(),
        EndRule(6, 2.4, drop_v=0.008, slope_c_per_min=0.7, hot_c=50.0, timer_s=6.0 * 3600.0, trickle_a=0.05),
    ),
    Load(0.022, (Burst(0.32, 900.0, 20.0), Burst(0.6, 7200.0, 120.0, 300.0))),
    (
        PackStory(
            "W-11",
            "HR6",
            PackDesign(
                6,
                2.4,
                (1.02, 1.0, 1.01, 0.98, 1.0, 0.99),
                (1.0, 1.05, 0.95, 1.1, 1.0, 1.0),
                wear=0.04,
                loss_w_per_k=0.012,
            ),
            0.8,
            210,
        ),
    ),
    lambda _: Fitout(
        (*_BATTERY, *_PANEL, *_REGULATOR, "load_current"),
        gains={"pack_current": 1.004, "panel_current": 0.996},
        offsets={"pack_current": 0.0004, "pack_temperature": 0.25},
        totals=True,
    ),
)

# A camera on a poor link, with a long outage and a backlog; its regulator hunts.
_WEIR_CAMERA: Final = NodeStory(
    "weir-camera",
    "heron-weir",
    Panel(15.0, 21.6, 0.95, tilt_deg=45.0, facing_deg=200.0),
    lambda: Regulated(
        0.55,
        Tuning(period_s=60.0, integral=1.22, proportional=0.0, delay=1, slew=0.12, windup=1.6),
        EndRule(8, 4.5, hot_c=46.0, timer_s=6.0 * 3600.0, trickle_a=0.06),
    ),
    Load(0.026, (Burst(0.75, 7200.0, 180.0, 60.0), Burst(0.4, 300.0, 5.0))),
    (
        PackStory(
            "W-14",
            "HR14",
            PackDesign(8, 4.5, (1.0, 0.99, 1.01, 1.0, 0.97, 1.0, 1.02, 0.99), wear=0.09),
            0.7,
            480,
        ),
    ),
    lambda now: Fitout(
        (*_BATTERY, *_PANEL, *_REGULATOR, "signal"),
        gains={"pack_voltage": 1.002},
        offsets={"pack_current": -0.0008},
        faults=(
            _fault(now, "loose-wire", "pack_temperature", 15.3, 0.4),
            _fault(now, "loose-wire", "pack_temperature", 14.9, 2.2),
            _fault(now, "stuck", "air_temperature", 5.2, 9.0),
        ),
        outages=(_span(now, 20.4, 5.0), _span(now, 12.2, 74.0), _span(now, 4.1, 2.5)),
        repeats=0.03,
        signal_dbm=-97.0,
    ),
    restart_days=(15.31, 14.88, 9.12, 4.0),
)

# A relay in a dark box on a hill: the charger's voltage drop is never reached, so it overcharges and runs warm.
_QUARRY_RELAY: Final = NodeStory(
    "quarry-relay",
    "quarry-mast",
    Panel(12.0, 18.0, 0.85, tilt_deg=50.0, facing_deg=170.0),
    lambda: Regulated(0.27, Tuning(), EndRule(5, 2.0, drop_v=0.040)),
    Load(0.022, (Burst(0.28, 900.0, 60.0),)),
    (
        PackStory(
            "Q-03",
            "HR6",
            PackDesign(5, 2.0, (1.0, 1.01, 0.98, 0.99, 1.0), loss_w_per_k=0.0105, wear=0.08),
            0.9,
            300,
        ),
    ),
    lambda _: Fitout(
        (*_BATTERY, *_PANEL, *_REGULATOR),
        gains={"pack_current": 0.992},
        offsets={"pack_temperature": -0.3},
        clock=Clock(drift_ppm=-12.0),
    ),
    box_rise_k=8.0,
)

# A wind recorder under a north wall: too little light for its load, level falling from week to week.
_QUARRY_WIND: Final = NodeStory(
    "quarry-wind",
    "quarry-mast",
    Panel(5.0, 22.0, 0.31, tilt_deg=75.0, facing_deg=10.0, horizon_deg=28.0),
    Direct,
    Load(0.0085, (Burst(3.6, 86_400.0, 60.0, 28_800.0), Burst(0.15, 600.0, 6.0))),
    (
        PackStory(
            "Q-08",
            "HR20",
            PackDesign(10, 9.0, (1.0, 1.0, 0.98, 1.01, 0.99, 1.0, 1.02, 0.93, 1.0, 1.0), wear=0.05),
            0.92,
            620,
        ),
    ),
    lambda _: Fitout((*_BATTERY, *_PANEL, "load_current"), form="cbor", clock=Clock(drift_ppm=35.0)),
    box_rise_k=1.0,
)

# A night lamp whose worn pack faded fast and was changed for a new one.
_FEN_LAMP: Final = NodeStory(
    "fen-lamp",
    "fen-gate",
    Panel(10.0, 11.0, 1.15, tilt_deg=55.0, facing_deg=180.0),
    lambda: Regulated(
        0.6,
        Tuning(integral=0.3),
        EndRule(4, 2.1, drop_v=0.008, slope_c_per_min=0.6, hot_c=48.0, timer_s=5.5 * 3600.0, trickle_a=0.03),
    ),
    Load(0.006, (), Lamp(0.17, off_hour=23.5)),
    (
        PackStory(
            "F-02",
            "HR6",
            PackDesign(4, 2.1, (1.0, 0.98, 0.96, 1.0), (1.0, 1.0, 1.5, 1.0), wear=0.17, fade_scale=22.0),
            0.7,
            900,
        ),
        PackStory("F-05", "HR6", PackDesign(4, 2.1, (1.01, 1.0, 1.02, 1.0), self_discharge_per_day=0.0009), 0.75, 20),
    ),
    lambda now: Fitout(
        (*_BATTERY, *_PANEL),
        gains={"pack_voltage": 0.998},
        faults=(_fault(now, "stuck", "pack_temperature", 25.6, 7.0),),
        clock=Clock(drift_ppm=50.0),
    ),
    swapped_day=9.15,
)

# A soil logger charged slowly by a small panel; after a restart its clock stood at the year 2000 until somebody came.
_FEN_LOGGER: Final = NodeStory(
    "fen-logger",
    "fen-gate",
    Panel(1.8, 11.5, 0.19, tilt_deg=45.0, facing_deg=190.0),
    Direct,
    Load(0.0105, (Burst(0.09, 1200.0, 30.0),)),
    (
        PackStory(
            "F-09",
            "HR6",
            PackDesign(4, 2.0, (0.99, 1.0, 1.0, 1.01), self_discharge_per_day=0.0012, wear=0.02),
            0.55,
            130,
        ),
    ),
    lambda now: Fitout(
        _BATTERY,
        form="cbor",
        offsets={"pack_current": 0.0006},
        clock=Clock(drift_ppm=20.0, wrong=(Wrong("year-2000", *_span(now, 17.6, 30.0)),)),
        totals=True,
    ),
    restart_days=(17.6, 16.35),
)

STORIES: Final = (_WEIR_GAUGE, _WEIR_CAMERA, _QUARRY_RELAY, _QUARRY_WIND, _FEN_LAMP, _FEN_LOGGER)
NAMES: Final = tuple(story.name for story in STORIES)


def region(seed: int = SEED) -> Region:
    """The weather all sites share."""
    return Region(noise.salt("region", seed), SITES["heron-weir"])


def start_ms(now: dt.datetime, days: int = HISTORY_DAYS) -> int:
    """Where the history begins: ``days`` before ``now``, on a full minute."""
    return round(_aware(now).timestamp()) // 60 * 60_000 - days * DAY_MS


def build(name: str, now: dt.datetime, days: int = HISTORY_DAYS, seed: int = SEED) -> Node:
    """A node of the scenario, standing at the beginning of its history.

    Raises
    ------
    UsageError
        There is no such node, or ``now`` has no time zone.
    """
    story = next((s for s in STORIES if s.name == name), None)
    if story is None:
        raise UsageError(f"The scenario has no node “{name}”. It has {', '.join(NAMES)}.")
    begin = start_ms(now, days)
    now_ms = begin + days * DAY_MS
    weather, place = region(seed), SITES[story.site]
    air = float(weather.air_c(np.array([begin / 1000.0]), place)[0])
    packs = [Pack(p.design, p.level, air) for p in story.packs]
    events = [Event(now_ms - round(d * DAY_MS), "restart") for d in story.restart_days]
    swap = now_ms - round(story.swapped_day * DAY_MS)
    first = packs[0]
    if len(packs) > 1:
        if swap > begin:
            events.append(Event(swap, "swap", packs[1]))
        else:
            first = packs[1]
    plant = Plant(weather, place, story.panel, story.charger(), story.load, first, begin, box_rise_k=story.box_rise_k)
    return Node(name, plant, story.fitout(now_ms), seed, tuple(e for e in events if e.at_ms > begin))


def inventory_toml(now: dt.datetime, days: int = HISTORY_DAYS) -> str:
    """The scenario's sites, nodes, packs and fittings as an inventory file."""
    begin = start_ms(now, days)
    now_ms = begin + days * DAY_MS
    lines = ["# An invented scenario. No such station exists at these coordinates.", ""]
    for name, place in SITES.items():
        lines += [
            "[[site]]",
            f'name = "{name}"',
            f"latitude = {place.latitude}",
            f"longitude = {place.longitude}",
            f"altitude_m = {place.altitude_m:g}",
            f'timezone = "{ZONE}"',
            "",
        ]
    for story in STORIES:
        lines += _node_lines(story)
    for story in STORIES:
        for pack in story.packs:
            lines += _pack_lines(pack, now_ms)
    for story in STORIES:
        lines += _fitting_lines(story, begin, now_ms)
    return "\n".join(lines)


def _node_lines(story: NodeStory) -> list[str]:
    return [
        "[[node]]",
        f'name = "{story.name}"',
        f'site = "{story.site}"',
        f"interval_s = {INTERVAL_S}",
        'current_sensing = "net"',
        f"panel_power_w = {story.panel.power_w:g}",
        f"panel_tilt_deg = {story.panel.tilt_deg:g}",
        f"panel_azimuth_deg = {story.panel.facing_deg:g}",
        "current_full_scale_a = 3.2",
        "",
    ]


def _pack_lines(pack: PackStory, now_ms: int) -> list[str]:
    new = _utc(now_ms - pack.age_days * DAY_MS).date()
    return [
        "[[pack]]",
        f'label = "{pack.label}"',
        f'designation = "{pack.designation}"',
        f"cells_in_series = {pack.design.cells}",
        f"rated_capacity_ah = {pack.design.rated_ah:g}",
        f"commissioned = {new.isoformat()}",
        "",
    ]


def _fitting_lines(story: NodeStory, begin_ms: int, now_ms: int) -> list[str]:
    swap = now_ms - round(story.swapped_day * DAY_MS)
    lines = []
    for k, pack in enumerate(story.packs):
        fitted = min(now_ms - (pack.age_days - 2) * DAY_MS, begin_ms) // HOUR_MS * HOUR_MS
        start = swap if k else fitted
        lines += ["[[fitting]]", f'pack = "{pack.label}"', f'node = "{story.name}"']
        lines += [f"start = {_utc(start).isoformat().replace('+00:00', 'Z')}"]
        if k + 1 < len(story.packs):
            lines += [f"end = {_utc(swap).isoformat().replace('+00:00', 'Z')}"]
        lines += [""]
    return lines


def _utc(time_ms: int) -> dt.datetime:
    return dt.datetime.fromtimestamp(time_ms / 1000.0, dt.UTC)


def _aware(now: dt.datetime) -> dt.datetime:
    if now.tzinfo is None:
        raise UsageError("The scenario needs a time with its zone, such as 2026-03-01T09:00:00Z.")
    return now
