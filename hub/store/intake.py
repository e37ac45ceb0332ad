"""One transaction's worth of received messages: readings, what was set aside, names nobody knows, receipts."""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass

from sqlalchemy import Connection

from hub.store import aside, readings, receipts
from hub.store import tables as t
from hub.telemetry.message import Message, Remark

# A node that makes up names must not fill the card: so many are counted each, the rest together.
NAMES_KEPT = 200
OTHER_NAMES = "(others)"


@dataclass(slots=True)
class Incoming:
    """One message with where it came from.

    Attributes
    ----------
    origin
        Topic, node and time of receipt.
    payload
        The bytes, kept where something of them could not be used.
    message
        What they say; ``None`` where they could not be read or belong to no known node.
    refusal
        Why the whole message was set aside.
    """

    origin: aside.Origin
    payload: bytes
    message: Message | None = None
    refusal: Remark | None = None


@dataclass(slots=True)
class Taken:
    """What a transaction stored.

    ``outcomes`` belong to the incoming messages in order, ``None`` for those that were set aside whole; ``receipts``
    are the newest ones earned, at most one a node and boot.
    """

    outcomes: list[readings.Outcome | None]
    receipts: list[receipts.Receipt]

    @property
    def new(self) -> int:
        """Readings stored for the first time."""
        return sum(o.new for o in self.outcomes if o is not None)


def take(connection: Connection, incoming: Sequence[Incoming]) -> Taken:
    """Store messages. Nothing raises on account of a message: what cannot be used is set aside with its reason."""
    good = [m for m in incoming if m.message is not None and m.origin.node_id is not None]
    arrivals = [_arrival(m) for m in good]
    stored = iter(readings.append(connection, arrivals))
    outcomes: list[readings.Outcome | None] = []
    for item in incoming:
        if item.message is not None and item.origin.node_id is not None:
            outcome = next(stored)
            outcomes.append(outcome)
            aside.keep(connection, item.origin, outcome.contradictions)
            # A contradiction is told whole by its remark; other remarks may need the bytes.
            aside.keep(connection, item.origin, item.message.remarks, item.payload)
        else:
            outcomes.append(None)
            reason = item.refusal or Remark("malformed", "The message could not be read.")
            aside.keep(connection, item.origin, [reason], item.payload)
    _count_unknown(connection, good)
    return Taken(outcomes, _receipts(connection, good))


def _arrival(item: Incoming) -> readings.Arrival:
    assert item.message is not None
    assert item.origin.node_id is not None
    return readings.Arrival(
        item.origin.node_id,
        item.origin.received_ms,
        item.message.readings,
        item.message.boot,
        item.message.sequence,
        item.origin.import_id,
    )


def _count_unknown(connection: Connection, good: Sequence[Incoming]) -> None:
    known: dict[int, set[str]] = {}
    counted: dict[tuple[int, str], tuple[int, int]] = {}
    for item in good:
        assert item.message is not None
        node_id = item.origin.node_id
        assert node_id is not None
        for stated, times in item.message.unknown.items():
            if node_id not in known:
                known[node_id] = set(unknown_names(connection, node_id))
            names, name = known[node_id], aside.storable(stated)[:100]
            if name not in names and len(names) >= NAMES_KEPT:
                name = OTHER_NAMES
            names.add(name)
            before = counted.get((node_id, name), (0, 0))
            counted[(node_id, name)] = (before[0] + times, max(before[1], item.origin.received_ms))
    if counted:
        connection.exec_driver_sql(
            "INSERT INTO unknown_name (node_id, name, count, last_ms) VALUES (?, ?, ?, ?) "
            "ON CONFLICT (node_id, name) DO UPDATE SET count = count + excluded.count, last_ms = excluded.last_ms",
            [(node_id, name, times, last) for (node_id, name), (times, last) in sorted(counted.items())],
        )


def _receipts(connection: Connection, good: Sequence[Incoming]) -> list[receipts.Receipt]:
    sequences: dict[tuple[int, int], list[int]] = defaultdict(list)
    oldest: dict[tuple[int, int], int] = {}
    for item in good:
        message, node_id = item.message, item.origin.node_id
        assert message is not None
        assert node_id is not None
        if message.boot is None or message.sequence is None:
            continue
        key = (node_id, message.boot)
        sequences[key].append(message.sequence)
        # A node still holds the message it is sending; one that says otherwise must not lose the rest over it.
        if message.oldest is not None and message.oldest <= message.sequence:
            oldest[key] = max(oldest.get(key, 0), message.oldest)
    earned = (
        receipts.note(connection, node_id, boot, numbers, oldest.get((node_id, boot)))
        for (node_id, boot), numbers in sequences.items()
    )
    return [receipt for receipt in earned if receipt is not None]


def note_presence(connection: Connection, node_id: int, state: str, changed_ms: int) -> None:
    """Note that a node came or went."""
    connection.exec_driver_sql(
        "INSERT INTO presence (node_id, state, changed_ms) VALUES (?, ?, ?) ON CONFLICT (node_id) "
        "DO UPDATE SET state = excluded.state, changed_ms = excluded.changed_ms WHERE state <> excluded.state",
        (node_id, state, changed_ms),
    )


def presence_of(connection: Connection) -> dict[int, tuple[str, int]]:
    """Each node's last word about itself, and when it changed."""
    return {row.node_id: (row.state, row.changed_ms) for row in connection.execute(t.presence.select())}


def unknown_names(connection: Connection, node_id: int) -> dict[str, int]:
    """Names a node sends that the catalogue does not have, with how often."""
    rows = connection.execute(
        t.unknown_name.select().where(t.unknown_name.c.node_id == node_id).order_by(t.unknown_name.c.name)
    )
    return {row["name"]: row["count"] for row in rows.mappings()}
