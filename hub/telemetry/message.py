"""What a message or a log line turns into."""

from dataclasses import dataclass, field

# One reading: instant in UTC milliseconds, and the values it carries in catalogue units.
Values = dict[str, float]

# How far an instant may lie ahead of the hub's clock, and the year before which no node of this kind existed
# (node interface, "Time"). Both are reasons to set a reading aside, not to drop it.
FUTURE_LIMIT_MS = 5 * 60 * 1000
EARLIEST_MS = 1_577_836_800_000  # 2020-01-01T00:00:00Z


@dataclass(slots=True)
class Remark:
    """Something of a message that could not be used, with the reason a keeper reads.

    Attributes
    ----------
    reason
        Short stable code: ``malformed``, ``unit``, ``not-finite``, ``future``, ``too-old``, ``out-of-range``,
        ``contradiction``, ``unknown-node``, ``too-large``, ``line``.
    detail
        One sentence with what to do.
    time_ms
        The instant in question, where there is one.
    quantity, value
        What was said, where it concerns one value.
    line
        Physical line number in a file, counted from 1.
    values
        All values of the reading, where a whole reading was set aside.
    """

    reason: str
    detail: str
    time_ms: int | None = None
    quantity: str | None = None
    value: float | None = None
    line: int | None = None
    values: Values | None = None


@dataclass(slots=True)
class Message:
    """A decoded message: readings by instant, and everything that was not one.

    Attributes
    ----------
    readings
        Instant in UTC milliseconds to quantity values. One instant, one reading.
    boot, sequence, oldest
        Restarts so far, number of the message within the boot, and the lowest sequence the node still holds.
    unknown
        Names that are not in the catalogue, with how often each came.
    remarks
        Parts that were set aside.
    ignored
        Records that carry no number: text, truth values, data, or a sum without a value.
    """

    readings: dict[int, Values] = field(default_factory=dict)
    boot: int | None = None
    sequence: int | None = None
    oldest: int | None = None
    unknown: dict[str, int] = field(default_factory=dict)
    remarks: list[Remark] = field(default_factory=list)
    ignored: int = 0
