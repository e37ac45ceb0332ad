"""Charge sessions: all charging between two discharges of note, the gaps that clouds make included.

A session begins with the first reading in charge. It goes on over pauses until one of these: a pause so long that the
sun has gone, a panel that is dark, a discharge of note in the pause, a stretch without readings that hides what
happened, or 72 hours.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from hub.battery.flow import Flow
from hub.battery.phases import States
from hub.battery.spec import PackSpec
from hub.series import Mask, Times

Cause = Literal["sun", "dark", "discharge", "unseen", "long", "stopped", "pack-left"]

PAUSE_MS = 3 * 3_600_000
DARK_MS = 20 * 60_000
LONGEST_MS = 72 * 3_600_000
# A twentieth of the pack taken out in one pause is a discharge of note.
OF_NOTE_IT_H = 0.05
# A panel below this share of the pack's voltage sees no sun.
DARK_SHARE = 0.5


@dataclass(frozen=True, slots=True)
class Span:
    """Where a session lies in the readings of a `Flow`.

    Attributes
    ----------
    first, last
        Indices of its first and last reading in charge.
    cause
        Why no more charging followed; ``None`` while it may.
    """

    first: int
    last: int
    cause: Cause | None


def next_span(flow: Flow, state: States, pack: PackSpec, begin: int) -> Span | None:
    """The first session among the readings from index ``begin`` on.

    Parameters
    ----------
    flow
        Readings with running sums.
    state
        Shape (n,), from `hub.battery.phases.states`.
    pack
        For the size of a discharge of note.
    """
    charging = begin + np.flatnonzero(state[begin:] == 1)
    if charging.size == 0:
        return None
    t = flow.time_ms
    first = int(charging[0])
    ends = np.append(charging[1:], t.size - 1)
    pause = t[ends] - t[charging]
    net_out = (flow.out_ah[ends] - flow.out_ah[charging]) - (flow.in_ah[ends] - flow.in_ah[charging])
    # The greatest discharge inside a pause is what counts, but charge below the threshold hardly makes up for any.
    dark_ms = _running_dark(flow)
    dark = dark_ms[ends] - dark_ms[charging]
    unseen = flow.unseen_s[ends] - flow.unseen_s[charging]
    reasons: tuple[tuple[Cause, Mask], ...] = (
        ("unseen", 1000.0 * unseen > PAUSE_MS),
        ("discharge", net_out > OF_NOTE_IT_H * pack.rated_capacity_ah),
        ("dark", dark > DARK_MS),
        ("sun", pause > PAUSE_MS),
        ("long", t[ends] - t[first] > LONGEST_MS),
    )
    over = np.flatnonzero(np.any([mask for _, mask in reasons], axis=0))
    if over.size == 0:
        return Span(first, int(charging[-1]), None)
    k = int(over[0])
    return Span(first, int(charging[k]), next(cause for cause, mask in reasons if mask[k]))


def _running_dark(flow: Flow) -> Times:
    """Time in the dark up to each reading, ms."""
    series = flow.series
    panel = series.get("panel_voltage")
    dark = panel < DARK_SHARE * series.get("pack_voltage")
    length = np.diff(series.time_ms)
    both = dark[:-1] & dark[1:] & ~flow.gap[1:]
    return np.concatenate((np.zeros(1, np.int64), np.cumsum(np.where(both, length, 0))))
