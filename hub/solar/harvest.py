"""Harvest: energy taken from the panel, and its ratio to what a clear sky would have given.

The interval and gap rule is that of the pack's charge (`hub.battery.charge`): the same code, so that a panel's energy
and a pack's energy of the same day can be held against each other.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from hub.battery.charge import HOUR_S, Intervals, gap_limit_ms, intervals, signed
from hub.battery.charges import ChargeSession
from hub.battery.spec import NodeSpec, Window
from hub.series import Series
from hub.solar.clearsky import ClearSky

# Less clear-sky energy than this many hours of rated power (a tenth of a sun-hour) says nothing about a panel.
LEAST_SUN_H = 0.1


@dataclass(frozen=True, slots=True)
class Harvest:
    """Energy from the panel in a window, with the share of it that was observed; ``None`` where nothing was."""

    panel_wh: float | None
    coverage: float
    observed_s: float


def harvest(series: Series, window: Window, node: NodeSpec) -> Harvest:
    """Integral of panel voltage times panel current.

    A panel gives and does not take: negative currents are sensor offset in the dark and count as nothing.
    """
    seen = _panel(series, window.start_ms, window.end_ms, node)
    length_s = (window.end_ms - window.start_ms) / 1000.0
    if not seen.observed_s or length_s <= 0.0:
        return Harvest(None, 0.0, 0.0)
    return Harvest(_energy_wh(seen), min(seen.observed_s / length_s, 1.0), seen.observed_s)


def harvest_ratio(
    series: Series, window: Window, node: NodeSpec, sky: ClearSky, idle: Sequence[tuple[int, int]] = ()
) -> float | None:
    """Harvest over clear-sky energy, both over the same observed stretches in which the panel set the limit.

    Parameters
    ----------
    series, window, node
        As for `harvest`.
    sky
        Clear-sky power of the panel over the window.
    idle
        Stretches in which the panel could not give what it had, see `idle_stretches`: a full pack makes a good panel
        look bad.

    Returns
    -------
    float or None
        ``None`` where the sun was not up long enough in what remains.
    """
    panel_wh = sky_wh = 0.0
    for start_ms, end_ms in _without(window, idle):
        seen = _panel(series, start_ms, end_ms, node, sky)
        if seen.observed_s:
            panel_wh += _energy_wh(seen)
            sky_wh += signed(seen.seconds, seen.first[2], seen.last[2]).positive / HOUR_S
    return panel_wh / sky_wh if sky_wh > LEAST_SUN_H * sky.rated_power_w else None


def idle_stretches(sessions: Sequence[ChargeSession], window: Window) -> list[tuple[int, int]]:
    """Stretches of a window in which the pack or the charger, not the panel, set the limit.

    From the instant the pack became full or the charger cut the session until the next session begins.
    """
    found = []
    ordered = sorted(sessions, key=lambda s: s.start_ms)
    for session, after in zip(ordered, [*ordered[1:], None][: len(ordered)], strict=True):
        cut = session.evidence.get("charger-cut", {}).get("at_ms")
        begins = [at for at in (session.full_at_ms, cut) if at is not None]
        if begins:
            end_ms = after.start_ms if after is not None else window.end_ms
            start_ms = max(min(begins), window.start_ms)
            if start_ms < min(end_ms, window.end_ms):
                found.append((start_ms, min(end_ms, window.end_ms)))
    return found


def _panel(series: Series, start_ms: int, end_ms: int, node: NodeSpec, sky: ClearSky | None = None) -> Intervals:
    columns = [series.get("panel_current"), series.get("panel_voltage")]
    if sky is not None:
        columns.append(np.interp(series.time_ms, sky.time_ms, sky.power_w))
    return intervals(series.time_ms, columns, start_ms, end_ms, gap_limit_ms(node.interval_s), node.integration)


def _energy_wh(seen: Intervals) -> float:
    return signed(seen.seconds, seen.first[0], seen.last[0], (seen.first[1], seen.last[1])).positive / HOUR_S


def _without(window: Window, idle: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    """What is left of a window."""
    left = []
    at = window.start_ms
    for start_ms, end_ms in sorted(idle):
        if start_ms > at:
            left.append((at, min(start_ms, window.end_ms)))
        at = max(at, end_ms)
    if at < window.end_ms:
        left.append((at, window.end_ms))
    return left
