"""The strip of a node: seven days of cell voltage as one trace, temperature as a thin line under it."""

import math
from collections.abc import Sequence

from markupsafe import Markup

from hub.web.axis import axis
from hub.web.chart import EDGE, EVENTS, Chart, Lane, Pen, Tick, draw
from hub.web.glance import End, Glance
from hub.web.reduction import Binned
from hub.web.sentences import ending
from hub.web.words import figure, when

# One scale for all strips, so that they can be compared; wider only where a trace needs it.
VOLTAGE = (1.1, 1.5)
TEMPERATURE = (-10.0, 50.0)
VOLTAGE_HEIGHT = 88
TEMPERATURE_HEIGHT = 34
BETWEEN = 8


def strip(glance: Glance, start_ms: int, end_ms: int, now_ms: int, fold: int = 1) -> Markup:
    """The drawing. ``fold`` makes columns so many times wider, for a book of many strips."""
    voltage = glance.traces.get("cell_voltage")
    temperature = glance.traces.get("pack_temperature")
    lanes = (voltage_lane(voltage, EDGE + EVENTS, VOLTAGE_HEIGHT), _temperature_lane(temperature))
    pens = [
        Pen(lane, trace.folded(fold), ink, pen_lift(glance.node.interval_s, trace.step_ms * fold))
        for lane, trace, ink in ((lanes[0], voltage, "ink"), (lanes[1], temperature, "thin"))
        if trace is not None and trace.known
    ]
    note = ""
    if voltage is None or not voltage.known:
        note = (
            "no readings in these seven days"
            if temperature is None or not temperature.known
            else "cell voltage not known: no pack fitted"
            if glance.pack is None
            else "no voltage in these readings"
        )
    return draw(
        Chart(
            start_ms,
            end_ms,
            axis(start_ms, end_ms, glance.zone),
            lanes,
            pens,
            _words(glance, voltage, temperature),
            ticks(glance.ends, glance, now_ms),
            note=note,
        )
    )


def pen_lift(interval_s: float, step_ms: int) -> int:
    """How many columns may be empty between two values before the pen is lifted: three of the node's intervals."""
    return max(1, math.ceil(3 * interval_s * 1000 / step_ms))


def voltage_lane(trace: Binned | None, top: int, height: int) -> Lane:
    """The lane of cell voltage."""
    low, high = widened(VOLTAGE, trace, 0.1)
    lines = tuple(round(low + 0.1 * i, 1) for i in range(round((high - low) / 0.1) + 1))
    labelled = tuple(v for v in lines[1:-1] if round(v * 10) % 2 == 0) or lines
    return Lane("Cell voltage", "V", low, high, lines, top, height, 1, labelled)


def _temperature_lane(trace: Binned | None) -> Lane:
    top = EDGE + EVENTS + VOLTAGE_HEIGHT + BETWEEN
    return temperature_lane(trace, top, TEMPERATURE_HEIGHT)


def temperature_lane(trace: Binned | None, top: int, height: int) -> Lane:
    """The lane of temperature."""
    low, high = widened(TEMPERATURE, trace, 10.0)
    lines = tuple(float(v) for v in range(math.ceil(low / 20) * 20, math.floor(high / 20) * 20 + 1, 20))
    labelled = tuple(v for v in lines if v % 40 == 0) or lines
    return Lane("Temperature", "°C", low, high, lines, top, height, 0, labelled)


def widened(usual: tuple[float, float], trace: Binned | None, step: float) -> tuple[float, float]:
    """The usual scale, in whole steps as wide as the trace needs."""
    extremes = trace.extremes() if trace is not None else None
    if extremes is None:
        return usual
    low = min(usual[0], math.floor(round(extremes[0] / step, 9)) * step)
    high = max(usual[1], math.ceil(round(extremes[1] / step, 9)) * step)
    return low, high


def ticks(ends: Sequence[End], glance: Glance, now_ms: int) -> list[Tick]:
    """Ends of charge: a filled head where the pack was full, an open one where it was not."""
    return [
        Tick(
            end.time_ms,
            f"{when(end.time_ms, glance.zone, now_ms)}. "
            f"{ending(end.ended_by, end.time_ms, end.time_ms if end.full else None, end.confidence)}.",
            end.full,
        )
        for end in ends
    ]


def _words(glance: Glance, voltage: Binned | None, temperature: Binned | None) -> str:
    parts = [f"Seven days of {glance.node.name}."]
    for name, unit, decimals, trace in (("Cell voltage", "V", 2, voltage), ("Temperature", "°C", 0, temperature)):
        extremes = trace.extremes() if trace is not None else None
        if extremes is None:
            parts.append(f"{name} not known.")
        else:
            low, high = (figure(value, unit, decimals) for value in extremes)
            parts.append(f"{name} between {low} and {high}.")
    full = sum(end.full for end in glance.ends)
    parts.append(f"{full} full charges." if full != 1 else "1 full charge.")
    return " ".join(parts)
