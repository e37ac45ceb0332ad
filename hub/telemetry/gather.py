"""Values to readings: the rules that hold whichever way a value came in."""

from math import isfinite
from typing import Final

from hub.quantities import BY_NAME
from hub.telemetry.message import EARLIEST_MS, FUTURE_LIMIT_MS, Message, Remark, Values

# Beyond this no conversion into a stored integer is safe: the finest resolution is 1e-6, and 1e12 times 1e6 still
# fits a signed 64-bit integer. Values beyond the catalogue's range but within this one are kept: raw is raw.
LARGEST: Final = 1e12

# A node that sends thousands of names must not fill the keeper's page with them.
MOST_UNKNOWN: Final = 100
LONGEST_UNKNOWN: Final = 64
OTHERS: Final = "(others)"

# Counters of a message must fit the same integer.
LARGEST_COUNT: Final = 2**63 - 1


def add_value(
    message: Message, values: Values, time_ms: int, quantity: str, value: float, line: int | None = None
) -> bool:
    """Put one value, already in the catalogue's unit, into the reading ``values``; return whether it belongs there.

    A value that is not finite, cannot be represented or contradicts the one already there becomes a remark. The
    same value again is the same reading, and counts as belonging.
    """
    if not isfinite(value):
        detail = f"{quantity} is not a finite number; leave it out of the message where there is no value."
        message.remarks.append(Remark("not-finite", detail, time_ms, quantity, None, line))
        return False
    if abs(value) > LARGEST:
        detail = f"{quantity} of {value:g} is beyond ±1e12, which no sensor reports; check the node's arithmetic."
        message.remarks.append(Remark("out-of-range", detail, time_ms, quantity, value, line))
        return False
    known = values.setdefault(quantity, value)
    if round(known * BY_NAME[quantity].scale) != round(value * BY_NAME[quantity].scale):
        detail = (
            f"{quantity} came twice for one instant, as {known:g} and as {value:g}; the first was kept. "
            "Check the node's clock resolution."
        )
        message.remarks.append(Remark("contradiction", detail, time_ms, quantity, value, line))
        return False
    return True


def add_count(message: Message, name: str, value: float, line: int | None = None) -> bool:
    """Take a message field (``boot``, ``sequence``, ``oldest``) out of the stream of values."""
    if not (isfinite(value) and 0 <= value <= LARGEST_COUNT and value == int(value)):
        detail = f"{name} must be a whole number from 0 to {LARGEST_COUNT}; send it as a plain count."
        stated = value if isfinite(value) else None
        message.remarks.append(Remark("malformed", detail, None, name, stated, line))
        return False
    known = getattr(message, name)
    if known is not None and known != int(value):
        detail = f"{name} came as {known} and as {int(value)} in one message; the first was kept."
        message.remarks.append(Remark("contradiction", detail, None, name, value, line))
        return False
    setattr(message, name, int(value))
    return True


def add_unknown(message: Message, name: str) -> None:
    """Count a name that is not in the catalogue; names beyond the first hundred of a message count as one."""
    name = name[:LONGEST_UNKNOWN]
    if name not in message.unknown and len(message.unknown) >= MOST_UNKNOWN:
        name = OTHERS
    message.unknown[name] = message.unknown.get(name, 0) + 1


def time_problem(time_ms: int, received_ms: int) -> tuple[str, str] | None:
    """Reason and sentence for an instant that cannot be stored as good, ``None`` for one that can."""
    if time_ms > received_ms + FUTURE_LIMIT_MS:
        return "future", "The reading is more than 5 min ahead of the hub's clock; set the node's clock to UTC."
    if time_ms < EARLIEST_MS:
        return "too-old", "The reading is dated before 2020; the node's clock has fallen back, so set it again."
    return None


def set_times_aside(message: Message, received_ms: int) -> None:
    """Move readings with an impossible instant to the remarks, and drop instants that carry no value."""
    for time_ms in [at for at, values in message.readings.items() if not values]:
        del message.readings[time_ms]
    for time_ms in [at for at in message.readings if time_problem(at, received_ms)]:
        reason, detail = time_problem(time_ms, received_ms) or ("", "")
        values = message.readings.pop(time_ms)
        message.remarks.append(Remark(reason, detail, time_ms, values=values))
