"""Readings on their way into the store, and what becomes of them."""

from dataclasses import dataclass, field

from hub.telemetry.message import Remark, Values


@dataclass(slots=True)
class Arrival:
    """Readings that arrived together: one message, or a stretch of a log.

    Attributes
    ----------
    node_id
        Whose readings.
    received_ms
        When the hub got them.
    readings
        Instant in UTC milliseconds to values in catalogue units. An instant without values is no reading.
    boot, sequence, import_id
        Where they came from.
    device_ms
        Instant to the node's own time, for readings that were placed elsewhere.
    """

    node_id: int
    received_ms: int
    readings: dict[int, Values]
    boot: int | None = None
    sequence: int | None = None
    import_id: int | None = None
    device_ms: dict[int, int] = field(default_factory=dict)

    def evidence(self, time_ms: int) -> tuple[int | None, ...]:
        """Values of the evidence columns for one reading."""
        return (self.received_ms, self.device_ms.get(time_ms), self.boot, self.sequence, self.import_id)


@dataclass(slots=True)
class Outcome:
    """What became of an arrival's readings.

    ``new`` readings were stored, ``filled`` ones completed a stored reading, ``repeated`` ones told nothing new;
    ``contradictions`` has one remark for each value that was kept out.
    """

    new: int = 0
    filled: int = 0
    repeated: int = 0
    contradictions: list[Remark] = field(default_factory=list)


@dataclass(frozen=True, slots=True)
class Meeting:
    """A reading that meets something stored: its instant is known already, or its day is sealed."""

    arrival: Arrival
    outcome: Outcome
    time_ms: int
    values: Values
