"""Which messages of a node's boot are durably stored, as unbroken runs of sequence numbers.

A receipt says "everything of this boot up to this sequence is stored", and a node may delete on the strength of it. So
it is given only for a run that reaches back to the first message of the boot (sequence 0 or 1), or to the oldest
message the node says it still holds.
"""

from collections.abc import Iterable
from dataclasses import dataclass

from sqlalchemy import Connection, delete, select

from hub.store import tables as t

FIRST_SEQUENCE = 1


@dataclass(frozen=True, slots=True)
class Receipt:
    """What a node may delete: everything of ``boot`` up to ``sequence``."""

    node_id: int
    boot: int
    sequence: int


def note(
    connection: Connection, node_id: int, boot: int, sequences: Iterable[int], oldest: int | None = None
) -> Receipt | None:
    """Note messages of a boot as stored; the receipt they earn, or ``None`` while an earlier message is missing.

    Parameters
    ----------
    oldest
        The lowest sequence the node still holds; what lies below is gone and no longer waited for.
    """
    r = t.received_run.c
    mine = (r.node_id == node_id, r.boot == boot)
    runs = [(row.first, row.last) for row in connection.execute(select(r.first, r.last).where(*mine))]
    merged = merge_runs([*runs, *((s, s) for s in sequences)])
    if oldest is not None and oldest > FIRST_SEQUENCE:
        # What the node no longer holds will never come: count it as passed.
        merged = merge_runs([*merged, (FIRST_SEQUENCE, oldest - 1)])
    # A node on a poor link has many runs: only those that changed are written.
    for first, _ in sorted(set(runs) - set(merged)):
        connection.execute(delete(t.received_run).where(*mine, r.first == first))
    added = [{"node_id": node_id, "boot": boot, "first": a, "last": b} for a, b in sorted(set(merged) - set(runs))]
    if added:
        connection.execute(t.received_run.insert(), added)
    if merged and merged[0][0] <= FIRST_SEQUENCE:
        return Receipt(node_id, boot, merged[0][1])
    return None


def merge_runs(runs: Iterable[tuple[int, int]]) -> list[tuple[int, int]]:
    """Overlapping and adjoining runs joined, in order."""
    merged: list[tuple[int, int]] = []
    for first, last in sorted(runs):
        if merged and first <= merged[-1][1] + 1:
            merged[-1] = (merged[-1][0], max(merged[-1][1], last))
        else:
            merged.append((first, last))
    return merged


def missing(connection: Connection, node_id: int) -> dict[int, list[tuple[int, int]]]:
    """Runs of messages that never came, by boot: what lies between the first and the last that did."""
    r = t.received_run.c
    gaps: dict[int, list[tuple[int, int]]] = {}
    previous: tuple[int, int] | None = None
    for row in connection.execute(
        select(r.boot, r.first, r.last).where(r.node_id == node_id).order_by(r.boot, r.first)
    ):
        start = previous[1] + 1 if previous and previous[0] == row.boot else FIRST_SEQUENCE
        if row.first > start:
            gaps.setdefault(row.boot, []).append((start, row.first - 1))
        previous = (row.boot, row.last)
    return gaps
