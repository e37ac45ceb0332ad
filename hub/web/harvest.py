"""Harvest drawn day by day: what the panel gave, inside the outline of what a clear sky would have given."""

import datetime as dt
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from markupsafe import Markup, escape

from hub.web.chart import SCALE_WIDTH
from hub.web.dayplot import nice_step
from hub.web.days import Row
from hub.web.words import day_words, figure, percent

HEIGHT = 110
FOOT = 18
TOP = 10
LABELS_AT_MOST = 8


@dataclass(frozen=True, slots=True)
class Harvested:
    """A day's panel energy and what the clear sky offered, Wh; ``None`` where not known."""

    date: str
    panel_wh: float | None
    clear_sky_wh: float | None
    ratio: float | None

    @property
    def words(self) -> str:
        """The day in words."""
        text = f"{day_words(self.date)}: panel {figure(self.panel_wh, 'Wh', 1)}"
        if self.clear_sky_wh is not None:
            text += f" of {figure(self.clear_sky_wh, 'Wh', 1)} under a clear sky"
        if self.ratio is not None:
            text += f", harvest ratio {percent(self.ratio)}"
        return text


def harvested(days: Iterable[Row]) -> list[Harvested]:
    """Day figures by date; the parts of a day on which another pack was fitted are added up."""
    found: dict[str, Harvested] = {}
    for day in days:
        before = found.get(day["date"])
        found[day["date"]] = Harvested(
            day["date"],
            _sum(before.panel_wh if before else None, day["panel_wh"]),
            _sum(before.clear_sky_wh if before else None, day["clear_sky_wh"]),
            day["harvest_ratio"] if before is None else None,
        )
    return list(found.values())


def _sum(one: float | None, other: float | None) -> float | None:
    return other if one is None else one if other is None else one + other


def bars(days: Sequence[Harvested]) -> Markup:
    """The drawing; empty where nothing is known."""
    greatest = max(
        (value for day in days for value in (day.panel_wh, day.clear_sky_wh) if value is not None), default=0
    )
    if greatest <= 0:
        return Markup()
    step = nice_step(greatest / 3)
    lines = [step * i for i in range(1, int(greatest / step + 1e-9) + 1)]
    # The top of the paper lies above the greatest bar.
    pixels = (HEIGHT - TOP) / max(greatest, step)
    height = HEIGHT + FOOT
    width = 100 / len(days)
    scale, paper = [], []
    for value in lines:
        y = HEIGHT - value * pixels
        unit = " Wh" if value == lines[-1] else ""
        scale.append(f'<text x="{SCALE_WIDTH - 5}" y="{y + 3.5:.1f}" text-anchor="end">{value:g}{unit}</text>')
        paper.append(f'<line class="rule" x2="100%" y1="{y:.1f}" y2="{y:.1f}"/>')
    thin_out = -(-len(days) // LABELS_AT_MOST)
    for i, day in enumerate(days):
        paper.append(f"<g><title>{escape(day.words)}</title>")
        if day.clear_sky_wh is not None:
            paper.append(_bar("offered", i * width + width * 0.14, width * 0.72, day.clear_sky_wh * pixels))
        if day.panel_wh is not None:
            paper.append(_bar("taken", i * width + width * 0.26, width * 0.48, day.panel_wh * pixels))
        paper.append("</g>")
        if (len(days) - 1 - i) % thin_out == 0:
            date = dt.date.fromisoformat(day.date)
            text = escape(day_words(date, year=False) if date.day <= thin_out or i < thin_out else str(date.day))
            paper.append(f'<text x="{(i + 0.5) * width:.2f}%" y="{HEIGHT + 13}" text-anchor="middle">{text}</text>')
    words = f"Harvest of {len(days)} days. " + " ".join(f"{day.words}." for day in days[-1:])
    return Markup(  # noqa: S704 - dates and numbers, escaped where they are put in
        f'<svg class="scale" width="{SCALE_WIDTH}" height="{height}" aria-hidden="true">{"".join(scale)}</svg>'
        f'<svg class="paper" width="100%" height="{height}" role="img" aria-label="{escape(words)}">'
        f'{"".join(paper)}<line class="rule heavy" x2="100%" y1="{HEIGHT}" y2="{HEIGHT}"/></svg>'
    )


def _bar(kind: str, left: float, width: float, height: float) -> str:
    return (
        f'<rect class="{kind}" x="{left:.2f}%" width="{width:.2f}%" y="{HEIGHT - height:.1f}" '
        f'height="{max(height, 0.5):.1f}"/>'
    )
