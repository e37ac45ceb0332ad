"""What becomes of the charging power: how much of it turns into heat, from the pack's rise above the air.

Once full, a pack turns all the power it is given into heat; before, a small part of it. So the rise above the air, seen
through the pack's own slowness, gives the share that is no longer stored. One model is fitted to a session:

    rise = pack temperature - lag(air temperature) = c + d * fade + lag(k * power)
    k = before + change * (1 - exp(-(q - q0) / width))    from the charge q0 on, ``before`` until then

``lag`` is a first-order lag with the pack's time constant; ``fade`` forgets the pack's temperature at the start; k is
in kelvin a watt. Where the share that is stored falls in proportion to the room that is left, k goes exactly this way;
a sudden end is the case of no width. All beginnings, some widths and some time constants are tried, the rest is linear:
least squares decide. The power is measured, so that clouds explain themselves.
"""

from dataclasses import dataclass

import numpy as np

from hub.battery.curve import Curve
from hub.battery.spec import PackSpec
from hub.series import Floats, Times

LAGS_S = (600.0, 1200.0, 2400.0, 4800.0)
FINER = 2.0**0.5
WIDTHS_IT_H = (0.01, 0.02, 0.04, 0.08, 0.16, 0.32)
STEPS = 128
BEGINNINGS = 40
LEAST_STEPS = 8
TINY = 1e-12


@dataclass(frozen=True, slots=True)
class Heat:
    """The fit.

    Attributes
    ----------
    time_ms, k_per_w
        Shape (n,): steady rise a watt of charging power, over the session.
    before_k_per_w, limit_k_per_w
        Where it began, and where it goes.
    possible_k
        Rise that 1 K/W would have made at most: how well the session could show heat at all.
    rise_k
        Greatest part of the rise that is due to the change.
    lag_s
        The pack's time constant.
    explained
        Share of what a constant k leaves unexplained that the change explains.
    """

    time_ms: Times
    k_per_w: Floats
    before_k_per_w: float
    limit_k_per_w: float
    possible_k: float
    rise_k: float
    lag_s: float
    explained: float


@dataclass(frozen=True, slots=True)
class _Grid:
    time_ms: Times
    step_s: float
    pack_c: Floats
    air_c: Floats
    power_w: Floats
    charge_it_h: Floats


def fit(curve: Curve, pack: PackSpec, lag_s: float | None = None) -> Heat | None:
    """Fit the model to a session; ``None`` without both temperatures or with too few steps.

    Parameters
    ----------
    curve
        The session.
    pack
        For the widths, which are shares of its rated capacity.
    lag_s
        Time constant where it is known.
    """
    grid = _grid(curve, pack)
    if grid is None or not grid.power_w.max() > 0.0:
        return None
    shapes = _shapes(grid)
    if lag_s is not None:
        return _fit_lag(grid, shapes, lag_s)[1]
    best = min((_fit_lag(grid, shapes, lag) for lag in LAGS_S), key=lambda pair: pair[0])
    finer = [_fit_lag(grid, shapes, best[1].lag_s * factor) for factor in (1.0 / FINER, FINER)]
    return min([best, *finer], key=lambda pair: pair[0])[1]


def _shapes(grid: _Grid) -> Floats:
    """How k may go from 0 to 1: one column for each beginning and width."""
    n = grid.time_ms.size
    beginnings = np.unique(np.linspace(0, n - 2, min(n - 1, BEGINNINGS)).astype(np.int64))
    gone = grid.charge_it_h[:, None] - grid.charge_it_h[beginnings][None, :]
    begun = np.arange(n)[:, None] > beginnings[None, :]
    shapes = [begun.astype(np.float64)]
    shapes += [np.where(begun, 1.0 - np.exp(-np.maximum(gone, 0.0) / width), 0.0) for width in WIDTHS_IT_H]
    return np.concatenate(shapes, axis=1)


def _fit_lag(grid: _Grid, shapes: Floats, lag_s: float) -> tuple[float, Heat]:
    """Sum of squares and fit for one time constant."""
    n = grid.time_ms.size
    keep = float(np.exp(-grid.step_s / lag_s))
    index = np.arange(n)
    since = index[:, None] - index[None, :]
    lagging = np.where(since >= 0, (1.0 - keep) * keep ** np.maximum(since, 0), 0.0)
    fade = keep ** (index + 1.0)
    rise = grid.pack_c - (lagging @ grid.air_c + fade * grid.air_c[0])
    heated = lagging @ grid.power_w
    design = np.column_stack((np.ones(n), heated, fade))
    base, _ = np.linalg.qr(design)
    left = rise - base @ (base.T @ rise)
    flat = float(left @ left)
    # What each shape would do to the temperature, less what the constant terms could do: that decides.
    answers = lagging @ (grid.power_w[:, None] * shapes)
    free = answers - base @ (base.T @ answers)
    along, size = left @ free, np.einsum("ij,ij->j", free, free)
    usable = (along > 0.0) & (size > TINY * n)
    gain = np.where(usable, along**2 / np.where(usable, size, 1.0), 0.0)
    k = int(np.argmax(gain))
    change = float(along[k] / size[k]) if usable[k] else 0.0
    before = float(np.linalg.lstsq(design, rise - change * answers[:, k], rcond=None)[0][1])
    heat = Heat(
        time_ms=grid.time_ms,
        k_per_w=before + change * shapes[:, k],
        before_k_per_w=before,
        limit_k_per_w=before + change,
        possible_k=float(heated.max()),
        rise_k=change * float(answers[:, k].max()),
        lag_s=lag_s,
        explained=float(gain[k]) / flat if flat > 0.0 else 0.0,
    )
    return max(flat - float(gain[k]), 0.0), heat


def _grid(curve: Curve, pack: PackSpec) -> _Grid | None:
    """Even steps over the session, no more than `STEPS`; short gaps are drawn through."""
    if np.count_nonzero(np.isfinite(curve.temperature_c) & np.isfinite(curve.air_c)) < LEAST_STEPS:
        return None
    t = curve.time_ms
    span_s = float(t[-1] - t[0]) / 1000.0
    step_s = max(curve.step_s, span_s / STEPS)
    time_ms = t[0] + (np.arange(int(span_s / step_s) + 1) * step_s * 1000.0).astype(np.int64)
    which = np.clip(np.rint((t - t[0]) / (1000.0 * step_s)).astype(np.int64), 0, time_ms.size - 1)

    def means(values: Floats) -> Floats:
        usable = np.isfinite(values)
        number = np.bincount(which[usable], minlength=time_ms.size)
        total = np.bincount(which[usable], values[usable], minlength=time_ms.size)
        have = number > 0
        mean: Floats = np.interp(time_ms, time_ms[have], total[have] / number[have])
        return mean

    power = np.where(np.isfinite(curve.power_w), curve.power_w, 0.0)
    return _Grid(
        time_ms=time_ms,
        step_s=step_s,
        pack_c=means(curve.temperature_c),
        air_c=means(curve.air_c),
        power_w=means(power),
        charge_it_h=means(curve.charge_ah) / pack.rated_capacity_ah,
    )
