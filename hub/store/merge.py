"""Readings that meet something stored: an instant that is known already, or a day that is sealed."""

from collections import defaultdict
from collections.abc import Mapping, Sequence

from sqlalchemy import Connection

from hub.quantities import BY_NAME
from hub.store import tables as t
from hub.store.arrivals import Meeting
from hub.store.layout import COLUMNS, DAY_MS, HOUR_MS, SCALES, Stored, fixed_point
from hub.store.opened import OpenedDay
from hub.telemetry.message import Remark


def merge(connection: Connection, meetings: Sequence[Meeting], sealed: Mapping[int, set[int]]) -> set[tuple[int, int]]:
    """Compare with what is stored, fill in, or add to the block; node and UTC hour of all that changed."""
    by_day: dict[tuple[int, int], list[Meeting]] = defaultdict(list)
    for meeting in meetings:
        by_day[(meeting.arrival.node_id, meeting.time_ms // DAY_MS)].append(meeting)
    touched: set[tuple[int, int]] = set()
    for (node_id, day), group in by_day.items():
        opened = OpenedDay(connection, node_id, day, sealed=day in sealed[node_id])
        opened.open({meeting.time_ms for meeting in group})
        touched |= {(node_id, m.time_ms // HOUR_MS) for m in group if _merge_one(opened, m)}
        opened.save()
    return touched


def _merge_one(opened: OpenedDay, meeting: Meeting) -> bool:
    """Merge one reading into the opened day; true where a value was added."""
    arrival, outcome, time_ms = meeting.arrival, meeting.outcome, meeting.time_ms
    offered = {name: fixed_point(name, value) for name, value in meeting.values.items()}
    row = opened.rows.get(time_ms)
    if row is None:
        opened.rows[time_ms] = _row(meeting, offered)
        opened.changed.add(time_ms)
        outcome.new += 1
        return True
    filled = [name for name in offered if row[name] is None]
    agreed = [name for name in offered if row[name] == offered[name]]
    outcome.contradictions += [
        _contradiction(meeting, name, row[name]) for name in offered if row[name] not in {None, offered[name]}
    ]
    row |= {name: offered[name] for name in filled}
    if arrival.import_id is None:
        _node_vouches(opened, meeting, row, [*filled, *agreed])
    elif row["import_id"] != arrival.import_id:
        opened.fills |= {(time_ms, name): arrival.import_id for name in filled}
    if filled:
        opened.changed.add(time_ms)
        outcome.filled += 1
        return True
    outcome.repeated += 1
    return False


def _row(meeting: Meeting, offered: Mapping[str, int]) -> Stored:
    row: Stored = dict.fromkeys(COLUMNS)
    row["time_ms"] = meeting.time_ms
    row |= zip(t.EVIDENCE, meeting.arrival.evidence(meeting.time_ms), strict=True)
    row |= offered
    return row


def _node_vouches(opened: OpenedDay, meeting: Meeting, row: Stored, said: Sequence[str]) -> None:
    """The node itself says what an import brought: taking the import back must leave that, and only that."""
    time_ms, owner = meeting.time_ms, row["import_id"]
    if owner is not None:
        for name in opened.values(time_ms):
            opened.fills.setdefault((time_ms, name), owner)
        row |= zip(t.EVIDENCE, meeting.arrival.evidence(time_ms), strict=True)
        opened.changed.add(time_ms)
    for name in said:
        opened.fills.pop((time_ms, name), None)


def _contradiction(meeting: Meeting, name: str, present: int | None) -> Remark:
    assert present is not None
    value = meeting.values[name]
    return Remark(
        "contradiction",
        f"{name} is already stored as {_shown(name, present)} for this instant; "
        f"the later value {_shown(name, fixed_point(name, value))} is kept aside.",
        meeting.time_ms,
        name,
        value,
    )


def _shown(name: str, number: int) -> str:
    """A stored value with all the digits that tell it from another one."""
    quantity = BY_NAME[name]
    digits = f"{number / SCALES[name]:.{quantity.decimals}f}".rstrip("0").rstrip(".")
    return digits if quantity.unit == "ratio" else f"{digits} {quantity.unit}"
