"""Charge returned against charge removed since the pack was last full."""

from dataclasses import dataclass, replace

import numpy as np

from hub.battery.flow import Flow


@dataclass(frozen=True, slots=True)
class Balance:
    """What has flowed since an anchor.

    The anchor is the last full charge. Where none is known it is the lowest level so far: how far below full that was
    is not known, but the pack cannot take in much more than it holds.

    Attributes
    ----------
    at_ms
        Instant of the reading up to which it goes.
    since_ms
        The anchor's instant.
    full_at_ms
        When the last full charge was reached; ``None`` where none is known.
    removed_ah, returned_ah
        Since the anchor.
    unseen_s
        Time since then that nothing covers.
    """

    at_ms: int
    since_ms: int
    full_at_ms: int | None = None
    removed_ah: float = 0.0
    returned_ah: float = 0.0
    unseen_s: float = 0.0


def begin(at_ms: int) -> Balance:
    """The balance of a pack of which nothing is known yet."""
    return Balance(at_ms=at_ms, since_ms=at_ms)


def advance(balance: Balance, flow: Flow, until_ms: int) -> Balance:
    """The balance at the last reading not after ``until_ms``."""
    t = flow.time_ms
    a = int(np.searchsorted(t, balance.at_ms))
    b = int(np.searchsorted(t, until_ms, side="right")) - 1
    if b < a:
        return balance
    lost_s = (int(t[a]) - balance.at_ms) / 1000.0
    moved = replace(
        balance,
        at_ms=int(t[b]),
        removed_ah=balance.removed_ah + float(flow.out_ah[b] - flow.out_ah[a]),
        returned_ah=balance.returned_ah + float(flow.in_ah[b] - flow.in_ah[a]),
        unseen_s=balance.unseen_s + float(flow.unseen_s[b] - flow.unseen_s[a]) + lost_s,
    )
    if balance.full_at_ms is not None:
        return moved
    into, out = flow.in_ah[a : b + 1], flow.out_ah[a : b + 1]
    level = balance.returned_ah - balance.removed_ah + (into - into[0]) - (out - out[0])
    low = int(np.argmin(level))
    if level[low] > 0.0:
        return moved
    return Balance(
        at_ms=int(t[b]),
        since_ms=int(t[a + low]),
        removed_ah=float(out[-1] - out[low]),
        returned_ah=float(into[-1] - into[low]),
        unseen_s=float(flow.unseen_s[b] - flow.unseen_s[a + low]),
    )


def filled(flow: Flow, full_at_ms: int, until_ms: int) -> Balance:
    """The balance at a reading after a full charge: a full pack takes in nothing, so charge only undoes a discharge.

    Charge after full is not credited: the deficit is that of the stretch since the level last touched full.
    """
    t = flow.time_ms
    a = min(int(np.searchsorted(t, full_at_ms)), t.size - 1)
    b = max(int(np.searchsorted(t, until_ms, side="right")) - 1, a)
    level = (flow.in_ah[a : b + 1] - flow.in_ah[a]) - (flow.out_ah[a : b + 1] - flow.out_ah[a])
    touch = a + int(level.size - 1 - np.argmax(level[::-1]))
    return Balance(
        at_ms=int(t[b]),
        since_ms=int(t[touch]),
        full_at_ms=full_at_ms,
        removed_ah=float(flow.out_ah[b] - flow.out_ah[touch]),
        returned_ah=float(flow.in_ah[b] - flow.in_ah[touch]),
        unseen_s=float(flow.unseen_s[b] - flow.unseen_s[touch]),
    )
