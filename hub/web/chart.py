"""Drawing on chart paper: printed rules, pen traces in lanes, ticks of events, all as one SVG.

Traces are stretched to the width they get and keep the thickness of their pen; words, rules and ticks are placed by
per cent of the width and are not stretched. So one drawing serves a phone and a desk.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from markupsafe import Markup, escape

from hub.series import Floats
from hub.web.axis import Axis
from hub.web.reduction import Binned, joined

# Tenths of a pixel: finer than a pen, and whole numbers make short paths.
FINE = 10
EDGE = 12
EVENTS = 16
FOOT = 18
NAME = 15
SCALE_WIDTH = 44


@dataclass(frozen=True, slots=True)
class Lane:
    """A stretch of paper across with a scale of its own.

    Attributes
    ----------
    name, unit, decimals
        What is drawn in it, for the printed scale.
    low, high
        Values at its lower and upper edge.
    lines
        Values at which a line is printed; the first and every one in ``labelled`` gets its number.
    top, height
        Place in pixels.
    """

    name: str
    unit: str
    low: float
    high: float
    lines: tuple[float, ...]
    top: int
    height: int
    decimals: int = 0
    labelled: tuple[float, ...] = ()

    def y(self, value: float) -> float:
        """Pixels from the top of the paper; values beyond the scale stay at its edge."""
        share = (min(max(value, self.low), self.high) - self.low) / (self.high - self.low)
        return self.top + self.height * (1 - share)

    def tenths(self, values: Floats) -> list[int]:
        """The same for many values at once, in whole tenths of a pixel; 0 where there is no value."""
        share = (np.clip(values, self.low, self.high) - self.low) / (self.high - self.low)
        down = (self.top + self.height * (1 - share)) * FINE
        found: list[int] = np.rint(np.nan_to_num(down)).astype(np.int64).tolist()
        return found

    @property
    def bottom(self) -> int:
        """Its lower edge in pixels."""
        return self.top + self.height


@dataclass(frozen=True, slots=True)
class Pen:
    """A trace in a lane; ``ink`` names its class in the style sheet, ``most_apart`` when the pen is lifted."""

    lane: Lane
    trace: Binned
    ink: str
    most_apart: int = 1


@dataclass(frozen=True, slots=True)
class Tick:
    """An event on the upper margin; ``strong`` ones have a filled head and a line down the paper."""

    time_ms: int
    title: str
    strong: bool
    label: str = ""


@dataclass(frozen=True, slots=True)
class Bar:
    """A stretch of time marked on the upper margin."""

    start_ms: int
    end_ms: int
    title: str


@dataclass(frozen=True, slots=True)
class Chart:
    """A strip of paper with everything on it.

    Attributes
    ----------
    words
        What it shows, for those who cannot see it.
    note
        Words printed on empty paper.
    named
        Whether the lanes' names are printed on the paper.
    """

    start_ms: int
    end_ms: int
    axis: Axis
    lanes: Sequence[Lane]
    pens: Sequence[Pen]
    words: str
    ticks: Sequence[Tick] = ()
    bars: Sequence[Bar] = ()
    note: str = ""
    named: bool = False

    @property
    def height(self) -> int:
        """Pixels from edge to edge."""
        return max(lane.bottom for lane in self.lanes) + FOOT + EDGE

    def across(self, time_ms: float) -> str:
        """Per cent of the width."""
        share = 100 * (time_ms - self.start_ms) / (self.end_ms - self.start_ms)
        return f"{min(100.0, max(0.0, share)):.2f}".rstrip("0").rstrip(".") + "%"


def draw(chart: Chart) -> Markup:
    """The printed scale at the left and the paper beside it, as two SVG elements."""
    return Markup(_scale(chart) + _paper(chart))  # noqa: S704 - every text in it is escaped where it is put in


def _scale(chart: Chart) -> str:
    parts = [f'<svg class="scale" width="{SCALE_WIDTH}" height="{chart.height}" aria-hidden="true">']
    for lane in chart.lanes:
        for value in lane.labelled or lane.lines:
            unit = f" {lane.unit}" if value == max(lane.labelled or lane.lines) else ""
            text = f"{value:.{lane.decimals}f}".replace("-", "\u2212")
            place = f'x="{SCALE_WIDTH - 5}" y="{lane.y(value) + 3.5:.1f}" text-anchor="end"'
            parts.append(f"<text {place}>{text}{escape(unit)}</text>")
    return "".join([*parts, "</svg>"])


_HOLES = f'<rect class="holes" width="100%" height="{EDGE}"/>'


def _paper(chart: Chart) -> str:
    height = chart.height
    top, bottom = EDGE + EVENTS, max(lane.bottom for lane in chart.lanes)
    parts = [
        f'<svg class="paper" width="100%" height="{height}" role="img" aria-label="{escape(chart.words)}">',
        _HOLES,
        f'<svg y="{height - EDGE}" width="100%" height="{EDGE}">{_HOLES}</svg>',
    ]
    parts += _rules(chart, top, bottom)
    parts += _bars(chart)
    parts.append(_pens(chart, height))
    parts += _ticks(chart, bottom)
    if chart.named:
        # Last, so that nothing is drawn across the words.
        parts += [f'<text class="name" x="6" y="{lane.top - 4}">{escape(lane.name)}</text>' for lane in chart.lanes]
    if chart.note:
        middle = (chart.lanes[0].top + chart.lanes[0].bottom) / 2
        parts.append(f'<text class="note" x="50%" y="{middle:.0f}" text-anchor="middle">{escape(chart.note)}</text>')
    return "".join([*parts, "</svg>"])


def _rules(chart: Chart, top: int, bottom: int) -> Iterable[str]:
    # Ruled lines share one element each for light and heavy ones where they run across; down they need one each.
    for lane in chart.lanes:
        for value in lane.lines:
            y = f"{lane.y(value):.1f}"
            yield f'<line class="rule" x2="100%" y1="{y}" y2="{y}"/>'
    for rule in chart.axis.rules:
        x = chart.across(rule.time_ms)
        kind = "rule heavy" if rule.heavy else "rule light"
        yield f'<line class="{kind}" x1="{x}" x2="{x}" y1="{top}" y2="{bottom}"/>'
    for label in chart.axis.labels:
        x = chart.across(label.time_ms)
        yield f'<text x="{x}" y="{bottom + 13}" text-anchor="middle">{escape(label.text)}</text>'


def _bars(chart: Chart) -> Iterable[str]:
    for bar in chart.bars:
        start = max(bar.start_ms, chart.start_ms)
        width = chart.across(chart.start_ms + min(bar.end_ms, chart.end_ms) - start)
        yield (
            f'<rect class="bar" x="{chart.across(start)}" y="{EDGE + EVENTS - 5}" width="{width}" height="3">'
            f"<title>{escape(bar.title)}</title></rect>"
        )


def _pens(chart: Chart, height: int) -> str:
    # Half a stretch of the finest pen is one unit across: whole numbers again.
    unit_ms = min((pen.trace.step_ms for pen in chart.pens), default=2) / 2
    drawn = [
        f'<path class="{pen.ink}" d="{path}"/>' for pen in chart.pens if (path := stroke(pen, chart.start_ms, unit_ms))
    ]
    if not drawn:
        return ""
    width = round((chart.end_ms - chart.start_ms) / unit_ms)
    return (
        f'<svg width="100%" height="{height}" viewBox="0 0 {width} {height * FINE}" preserveAspectRatio="none">'
        + "".join(drawn)
        + "</svg>"
    )


def _ticks(chart: Chart, bottom: int) -> Iterable[str]:
    head = EDGE + EVENTS / 2 - 1
    for tick in chart.ticks:
        if not chart.start_ms <= tick.time_ms <= chart.end_ms:
            continue
        x = chart.across(tick.time_ms)
        kind = "tick strong" if tick.strong else "tick"
        foot = bottom if tick.strong else EDGE + EVENTS + 6
        words = (
            f'<text class="name" x="{x}" dx="7" y="{head + 4:.0f}">{escape(tick.label)}</text>' if tick.label else ""
        )
        yield (
            f'<g class="{kind}"><title>{escape(tick.title)}</title><line x1="{x}" x2="{x}" y1="{head:.0f}" '
            f'y2="{foot}"/><circle cx="{x}" cy="{head:.0f}" r="3.5"/>{words}</g>'
        )


def stroke(pen: Pen, start_ms: int, unit_ms: float) -> str:
    """The path of a pen, in units across and tenths of a pixel down.

    Within a run the pen goes down and up between the extremes of each stretch, taking first the one that is nearer to
    where it is, so that the line neither leaves out a peak nor scribbles.
    """
    trace = pen.trace
    lows, highs = (pen.lane.tenths(values) for values in (trace.low, trace.high))
    known = np.isfinite(trace.low).tolist()
    offset, step = (trace.start_ms + 0.5 * trace.step_ms - start_ms) / unit_ms, trace.step_ms / unit_ms
    parts: list[str] = []
    for first, last in joined(trace, pen.most_apart):
        x, y = round(offset + first * step), lows[first]
        parts.append(f"M{x} {y}")
        # A single value is a dot, not nothing.
        parts.append("h1" if first == last and y == highs[first] else "")
        for i in range(first, last + 1):
            if not known[i]:
                continue
            near, far = lows[i], highs[i]
            if abs(far - y) < abs(near - y):
                near, far = far, near
            across = round(offset + i * step)
            if across != x:
                parts.append(f"l{across - x}{_signed(near - y)}")
            if far != near:
                parts.append(f"v{far - near}")
            x, y = across, far
    return "".join(parts)


def _signed(value: int) -> str:
    return str(value) if value < 0 else f" {value}"
