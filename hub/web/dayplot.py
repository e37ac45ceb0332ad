"""The plot of a node's page: voltage, current and temperature over one stretch, on one strip of paper."""

import datetime as dt
import math
from collections.abc import Mapping, Sequence
from zoneinfo import ZoneInfo

import numpy as np
from markupsafe import Markup

from hub.series import Series
from hub.web.axis import axis
from hub.web.charges import Session
from hub.web.chart import EDGE, EVENTS, NAME, Bar, Chart, Lane, Pen, Tick, draw
from hub.web.days import Row, start_of
from hub.web.ranges import Range
from hub.web.reduction import Binned, binned
from hub.web.strip import pen_lift, temperature_lane, voltage_lane
from hub.web.words import DAY_MS, figure

FINE_STEP_MS = 120_000
MOST_COLUMNS = 720
VOLTAGE_HEIGHT = 120
CURRENT_HEIGHT = 84
TEMPERATURE_HEIGHT = 64
BETWEEN = NAME + 5
TICKS_NUMBERED = 10

Traces = Mapping[str, Binned]


def fine_traces(series: Series, start_ms: int, end_ms: int) -> dict[str, Binned]:
    """Traces of a day in columns of 2 min."""
    many = -(-(end_ms - start_ms) // FINE_STEP_MS)
    return {
        name: binned(series.time_ms, series.get(name), start_ms, FINE_STEP_MS, many)
        for name in ("pack_voltage", "pack_current", "pack_temperature", "air_temperature")
    }


def life_traces(days: Sequence[Row], zone: ZoneInfo) -> dict[str, Binned]:
    """Traces of a whole life in columns of a day, from the figures of days."""
    if not days:
        return {}
    first, last = (dt.date.fromisoformat(day["date"]) for day in (days[0], days[-1]))
    many = (last - first).days + 1
    pairs = {
        "cell_voltage": ("cell_voltage_min_v", "cell_voltage_max_v"),
        "charge_in": ("charge_ah", "charge_ah"),
        "charge_out": ("discharge_ah", "discharge_ah"),
        "pack_temperature": ("pack_temperature_max_c", "pack_temperature_max_c"),
    }
    found = {}
    for name, (low_column, high_column) in pairs.items():
        low, high = np.full(many, np.nan), np.full(many, np.nan)
        for day in days:
            at = (dt.date.fromisoformat(day["date"]) - first).days
            if day[low_column] is not None:
                # Two rows of one date, where another pack was fitted, share its column.
                low[at] = np.fmin(low[at], day[low_column])
                high[at] = np.fmax(high[at], day[high_column])
        found[name] = Binned(start_of(first, zone), DAY_MS, low, high)
    return found


def plot(
    traces: Traces,
    within: Range,
    sessions: Sequence[Session],
    interval_s: float,
    zone: ZoneInfo,
    name: str,
) -> Markup:
    """The drawing."""
    fold = max(1, -(-max((len(trace) for trace in traces.values()), default=1) // MOST_COLUMNS))
    lanes: list[Lane] = []
    pens: list[Pen] = []
    top = EDGE + EVENTS + NAME
    for lane, inked in _lanes(traces, top):
        lanes.append(lane)
        for trace, ink in inked:
            step = trace.step_ms * fold
            pens.append(Pen(lane, trace.folded(fold), ink, pen_lift(interval_s, step)))
    return draw(
        Chart(
            within.start_ms,
            within.end_ms,
            axis(within.start_ms, within.end_ms, zone),
            lanes,
            pens,
            _words(name, within, lanes, pens, sessions),
            [
                Tick(s.tick_ms, s.words, s.full, str(s.number) if numbered(sessions) else "")
                for s in sessions
                if s.tick_ms is not None
            ],
            [Bar(s.start_ms, s.end_ms or within.end_ms, s.words) for s in sessions],
            note="" if pens else "no readings here",
            named=True,
        )
    )


def numbered(sessions: Sequence[Session]) -> bool:
    """Whether the ticks carry their numbers: only where these do not run into each other."""
    return len(sessions) <= TICKS_NUMBERED


def _lanes(traces: Traces, top: int) -> list[tuple[Lane, list[tuple[Binned, str]]]]:
    found: list[tuple[Lane, list[tuple[Binned, str]]]] = []

    def known(name: str) -> Binned | None:
        trace = traces.get(name)
        return trace if trace is not None and trace.known else None

    cell, pack = known("cell_voltage"), known("pack_voltage")
    if cell is not None or pack is None:
        lane = voltage_lane(cell, top, VOLTAGE_HEIGHT)
        found.append((lane, [(cell, "ink")] if cell is not None else []))
    else:
        found.append((_free_lane("Pack voltage", "V", [pack], top, VOLTAGE_HEIGHT), [(pack, "ink")]))
    top = found[-1][0].bottom + BETWEEN
    current, into, out = known("pack_current"), known("charge_in"), known("charge_out")
    if current is not None:
        lane = _free_lane("Current into the pack", "A", [current], top, CURRENT_HEIGHT, around=0.0)
        found.append((lane, [(current, "ink")]))
        top = lane.bottom + BETWEEN
    elif into is not None or out is not None:
        both = [trace for trace in (into, out) if trace is not None]
        lane = _free_lane("Charge a day: in (bold) and out", "Ah", both, top, CURRENT_HEIGHT, around=0.0)
        inked = [(into, "ink")] if into is not None else []
        found.append((lane, [*inked, *([(out, "thin")] if out is not None else [])]))
        top = lane.bottom + BETWEEN
    warmth, air = known("pack_temperature"), known("air_temperature")
    both = [trace for trace in (warmth, air) if trace is not None]
    if both:
        name = "Temperature: pack (bold) and air" if len(both) == 2 else "Temperature"  # noqa: PLR2004
        widest = _together(both)
        base = temperature_lane(widest, top, TEMPERATURE_HEIGHT)
        lane = Lane(name, base.unit, base.low, base.high, base.lines, base.top, base.height, 0, base.labelled)
        inked = [(warmth, "ink")] if warmth is not None else []
        found.append((lane, [*inked, *([(air, "thin")] if air is not None else [])]))
    return found


def _together(traces: Sequence[Binned]) -> Binned:
    low = np.array([np.nanmin(trace.low) for trace in traces])
    high = np.array([np.nanmax(trace.high) for trace in traces])
    return Binned(traces[0].start_ms, traces[0].step_ms, low, high)


def _free_lane(
    name: str, unit: str, traces: Sequence[Binned], top: int, height: int, around: float | None = None
) -> Lane:
    """A lane whose scale follows its traces, in steps of 1, 2 or 5."""
    extremes = _together(traces).extremes()
    assert extremes is not None
    low, high = extremes
    if around is not None:
        low, high = min(low, around), max(high, around)
    step = nice_step((high - low) / 4 or max(abs(high), 1.0) / 4)
    low, high = math.floor(low / step + 1e-9) * step, math.ceil(high / step - 1e-9) * step
    if high <= low:
        high = low + step
    lines = tuple(low + step * i for i in range(round((high - low) / step) + 1))
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    return Lane(name, unit, low, high, lines, top, height, decimals)


def nice_step(rough: float) -> float:
    """The next 1, 2 or 5 times a power of ten that is not smaller."""
    power = 10.0 ** math.floor(math.log10(rough))
    return next(factor * power for factor in (1.0, 2.0, 5.0, 10.0) if factor * power >= rough * (1 - 1e-9))


def _words(name: str, within: Range, lanes: Sequence[Lane], pens: Sequence[Pen], sessions: Sequence[Session]) -> str:
    parts = [f"{name}, {within.words}."]
    for lane in lanes:
        found = [pen.trace.extremes() for pen in pens if pen.lane is lane]
        if found and found[0] is not None:
            low, high = (figure(value, lane.unit, max(lane.decimals, 1)) for value in found[0])
            parts.append(f"{lane.name.partition(':')[0]} between {low} and {high}.")
    full = sum(session.full for session in sessions)
    parts.append(f"{len(sessions)} charge sessions, {full} of them full. The table below has the same figures.")
    return " ".join(parts)
