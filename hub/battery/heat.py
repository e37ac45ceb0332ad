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
WIDTHS_IT_H = (0.0, 0.01, 0.02, 0.04, 0.08, 0.16, 0.32)
STEPS = 128
BEGINNINGS = 40
LEAST_STEPS = 8
TINY = 1e-12
LARGEST_EXPONENT = 500.0


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
    if lag_s is not None:
        return _fit_lag(grid, lag_s)[1]
    tried = [_fit_lag(grid, lag) for lag in LAGS_S]
    best = min(tried, key=lambda pair: pair[0])
    tried = [best, *(_fit_lag(grid, best[1].lag_s * factor) for factor in (1.0 / FINER, FINER))]
    return min(tried, key=lambda pair: pair[0])[1]


def _fit_lag(grid: _Grid, lag_s: float) -> tuple[float, Heat]:
    """Sum of squares and fit for one time constant."""
    n = grid.time_ms.size
    keep = float(np.exp(-grid.step_s / lag_s))
    rise = grid.pack_c - _lag(grid.air_c, keep, float(grid.air_c[0]))
    heated = _lag(grid.power_w, keep, 0.0)
    index = np.arange(n)
    base, _ = np.linalg.qr(np.column_stack((np.ones(n), heated, keep**index)))
    left = rise - base @ (base.T @ rise)
    flat = float(left @ left)
    beginnings = np.unique(np.linspace(0, n - 2, min(n - 1, BEGINNINGS)).astype(np.int64))
    since = index[None, :] - beginnings[:, None]
    after = since >= 0
    faded = np.where(after, keep ** np.maximum(since, 0), 0.0)
    step = np.where(after, heated[None, :] - faded * heated[beginnings][:, None], 0.0)
    best_gain, best_change, best_shape, best_at = 0.0, 0.0, (0, 0.0), np.zeros(n)
    for width in WIDTHS_IT_H:
        if grid.charge_it_h[-1] > LARGEST_EXPONENT * width > 0.0:
            continue  # next to so long a charge this width is a step
        answers = step
        if width:
            decay = np.exp(-grid.charge_it_h / width)
            dying = _lag(grid.power_w * decay, keep, 0.0)
            scale = np.exp(grid.charge_it_h[beginnings] / width)[:, None]
            answers = step - np.where(after, scale * (dying[None, :] - faded * dying[beginnings][:, None]), 0.0)
        # Take the constant terms out of the answers: what is left decides.
        free = answers - (answers @ base) @ base.T
        along, size = free @ left, np.einsum("ij,ij->i", free, free)
        usable = (along > 0.0) & (size > TINY * n)
        gain = np.where(usable, along**2 / np.where(usable, size, 1.0), 0.0)
        k = int(np.argmax(gain))
        if gain[k] > best_gain:
            best_gain, best_change = float(gain[k]), float(along[k] / size[k])
            best_shape, best_at = (int(beginnings[k]), width), answers[k]
    design = np.column_stack((np.ones(n), heated, keep**index))
    before = float(np.linalg.lstsq(design, rise - best_change * best_at, rcond=None)[0][1])
    gone = np.maximum(grid.charge_it_h - grid.charge_it_h[best_shape[0]], 0.0)
    reached = 1.0 - np.exp(-gone / best_shape[1]) if best_shape[1] else (index > best_shape[0]).astype(np.float64)
    heat = Heat(
        time_ms=grid.time_ms,
        k_per_w=before + best_change * reached,
        before_k_per_w=before,
        limit_k_per_w=before + best_change,
        possible_k=float(heated.max()),
        rise_k=best_change * float(best_at.max()),
        lag_s=lag_s,
        explained=best_gain / flat if flat > 0.0 else 0.0,
    )
    return max(flat - best_gain, 0.0), heat


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


def _lag(values: Floats, keep: float, start: float) -> Floats:
    """First-order lag: ``y[k] = keep * y[k-1] + (1 - keep) * x[k]``."""
    out = np.empty_like(values)
    state = start
    gain = 1.0 - keep
    for k, value in enumerate(values.tolist()):
        state = keep * state + gain * value
        out[k] = state
    return out
