"""How charging stopped: cut by the charger while the sun remained, broken off unexplained, or faded with the sun."""

from dataclasses import dataclass
from typing import Literal

import numpy as np

from hub.battery.flow import Flow
from hub.battery.spec import NodeSpec
from hub.series import Floats, Mask, Times

STEP_S = 60.0
BEFORE_S = 300.0
AFTER_S = 600.0
# A cut leaves less than this share of the current, and it is a cut of at least this share of the usual current.
LEFT_SHARE = 0.3
OF_NOTE = 0.3
# A panel that is let go rises: under load it sits at the pack's voltage or at its own best point, both lower.
PANEL_RISE = 1.03
DUTY_OFF, DUTY_ON = 0.1, 0.2

Manner = Literal["cut", "broke-off", "dimmed", "faded"]


@dataclass(frozen=True, slots=True)
class Stop:
    """The last reading before the current fell, and how it fell.

    ``cut``: suddenly, and the panel shows that the sun remained. ``dimmed``: suddenly, and the panel shows that the
    charger did not do it. ``broke-off``: suddenly, and nothing shows why. ``faded``: slowly, as the sun goes.
    """

    at_ms: int
    manner: Manner
    before_a: float
    after_a: float


def charger_cut(flow: Flow, first: int, last: int, usual_a: float, node: NodeSpec) -> Stop | None:
    """The first instant of a session at which the charger let go of the panel, for good or down to a trickle.

    Parameters
    ----------
    flow
        The readings.
    first, last
        Indices of the session's first and last reading in charge.
    usual_a
        The session's usual current.
    node
        For its interval.
    """
    t = flow.time_ms
    step_s = max(STEP_S, node.interval_s)
    until = int(np.searchsorted(t, t[last] + round(1000.0 * (AFTER_S + 2.0 * step_s)), side="right"))
    which = ((t[first:until] - t[first]) / (1000.0 * step_s)).astype(np.int64)
    n_before, n_after = max(1, round(BEFORE_S / step_s)), max(2, round(AFTER_S / step_s))

    def around(name: str) -> tuple[Floats, Floats]:
        values = flow.series.get(name)[first:until]
        known = np.isfinite(values)
        size = int(which[-1]) + 1
        total = np.bincount(which[known], values[known], minlength=size)
        number = np.bincount(which[known], minlength=size)
        return _rolling(total.astype(np.float64), number, -n_before, 0), _rolling(
            total.astype(np.float64), number, 1, n_after + 1
        )

    current, panel, pack, duty = (
        around(name) for name in ("pack_current", "panel_voltage", "pack_voltage", "charger_duty")
    )
    falls: Mask = (current[0] >= OF_NOTE * usual_a) & (current[1] < LEFT_SHARE * current[0])
    lit = panel[1] > pack[1]
    let_go = (panel[1] > PANEL_RISE * panel[0]) | ((duty[0] > DUTY_ON) & (duty[1] < DUTY_OFF))
    found = np.flatnonzero(falls & lit & let_go)
    if found.size == 0:
        return None
    run = found[: int(np.argmax(np.append(np.diff(found) > 1, True))) + 1]
    k = int(run[np.argmax(current[0][run] - current[1][run])])
    before, after = float(current[0][k]), float(current[1][k])
    near = first + np.flatnonzero((which >= k - n_before) & (which <= k + 1))
    strong = near[flow.series.get("pack_current")[near] > 0.5 * (before + after)]
    at = int(strong[-1]) if strong.size else int(near[0])
    return Stop(int(t[at]), "cut", before, after)


def last_stop(flow: Flow, last: int, usual_a: float) -> Stop:
    """How the last charging of a session ended, where the charger was not seen to cut it."""
    t = flow.time_ms
    current = flow.series.get("pack_current")
    begin, after, end = np.searchsorted(t, t[last] + np.array([-1000 * BEFORE_S, 1, 1000 * AFTER_S]))
    before_a = float(np.mean(current[begin : last + 1]))
    after_a = float(np.mean(current[after:end])) if end > after else 0.0
    manner: Manner = "faded"
    if before_a >= OF_NOTE * usual_a:
        watched = bool(np.isfinite(flow.series.get("panel_voltage")[begin:end]).any())
        manner = "dimmed" if watched else "broke-off"
    return Stop(int(t[last]), manner, before_a, after_a)


def _rolling(total: Floats, number: Times, low: int, high: int) -> Floats:
    """Means over the steps ``k + low`` to ``k + high - 1`` for each ``k``; NaN where they have no reading."""
    n = total.size
    sums = np.concatenate((np.zeros(1), np.cumsum(total)))
    counts = np.concatenate((np.zeros(1, np.int64), np.cumsum(number)))
    k = np.arange(n)
    a, b = np.clip(k + low, 0, n), np.clip(k + high, 0, n)
    have = counts[b] - counts[a]
    mean: Floats = np.where(have > 0, (sums[b] - sums[a]) / np.maximum(have, 1), np.nan)
    return mean
