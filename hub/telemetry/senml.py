"""Sensor Measurement Lists (RFC 8428) in JSON and CBOR to readings.

Almost every message uses only base name, base time, base unit, name, unit, value and time. Those packs take a fast
path: a typed parse that refuses every other field, and one loop. Whatever it refuses is read again by the general
path, which knows the whole of the standard and says record by record what was wrong.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import isfinite
from typing import Any, Final, Literal, NamedTuple

import msgspec

from hub.errors import PayloadError
from hub.quantities import BY_NAME, MESSAGE_FIELDS
from hub.telemetry import packs
from hub.telemetry.gather import LARGEST, add_count, add_unknown, add_value, set_times_aside
from hub.telemetry.message import Message, Remark, Values
from hub.telemetry.records import LATEST_S, MAX_TEXT, combined
from hub.telemetry.units import conversion, misfit

MAX_PAYLOAD_BYTES: Final = 1 << 20
MAX_RECORDS: Final = 50_000

# Below this a time counts from the moment of receipt, from here on it is Unix time (RFC 8428, section 4.5.3).
RELATIVE_BELOW_S: Final = 2**28

Content = Literal["json", "cbor"]


@dataclass(frozen=True, slots=True)
class Resolved:
    """One record with its base fields applied (RFC 8428, section 4.6).

    Attributes
    ----------
    name
        Base name and name.
    unit
        The record's unit, else the base unit, else ``None``.
    time_s
        Unix time in seconds.
    value
        Number, text, truth value or data; ``None`` where the record has only a sum.
    sum
        Base sum and sum, in the unit times seconds; ``None`` where the record has none.
    update_s
        Longest time until the next value, in seconds.
    """

    name: str
    unit: str | None
    time_s: float
    value: float | str | bool | bytes | None
    sum: float | None = None
    update_s: float | None = None


def decode(payload: bytes, received_ms: int, *, content: Content | None = None) -> Message:
    """Read one SenML pack.

    Parameters
    ----------
    payload
        The bytes as they came.
    received_ms
        Instant of receipt in UTC milliseconds; relative times count from it.
    content
        Encoding of the payload; ``None`` tells it from the first byte.

    Raises
    ------
    PayloadError
        Where the payload cannot be read as a whole: cut short, no SenML, too large, too deep, too many records, of
        a later version, or with a field that must be understood and is not.
    """
    if len(payload) > MAX_PAYLOAD_BYTES:
        raise PayloadError(
            f"The message has {len(payload)} bytes and the hub reads at most {MAX_PAYLOAD_BYTES}; "
            "send the backlog in several messages."
        )
    if content is None:
        content = packs.sniff(payload)
    message = _plain_json(payload, received_ms) if content == "json" else None
    if message is None:
        pack = packs.parse_json(payload) if content == "json" else packs.parse_cbor(payload)
        _check_size(pack)
        message = _plain_cbor(pack, received_ms) if content == "cbor" else None
        if message is None:
            message = _general(pack, received_ms)
    set_times_aside(message, received_ms)
    return message


def resolve(
    records: Sequence[Mapping[str, Any]], received_s: float, remarks: list[Remark] | None = None
) -> list[Resolved]:
    """Resolve records with the labels of JSON, in order of time (RFC 8428, section 4.6).

    Parameters
    ----------
    records
        The records of one pack in their order.
    received_s
        Unix time of receipt in seconds; relative times count from it.
    remarks
        Takes one remark for each record that cannot be read, which is then left out. Without it such a record
        raises.

    Raises
    ------
    PayloadError
        Where the pack cannot be read as a whole, and, without ``remarks``, at the first record that cannot be read.
    """
    found = [
        Resolved(
            r.name, r.unit, r.at_s if r.at_s >= RELATIVE_BELOW_S else received_s + r.at_s, r.value, r.sum, r.update_s
        )
        for r in combined(records, remarks)
    ]
    return sorted(found, key=lambda record: record.time_s)


# The fast path ---------------------------------------------------------------------------------------------------


class _Plain(msgspec.Struct, forbid_unknown_fields=True, gc=False):
    v: float
    n: str = ""
    u: str | None = None
    t: float = 0.0
    bn: str | None = None
    bt: float | None = None
    bu: str | None = None


_PLAIN_JSON: Final = msgspec.json.Decoder(list[_Plain])
_PLAIN_LABELS: Final = {key: label for key, label in packs.LABELS.items() if label in _Plain.__struct_fields__}


class _NotPlainError(Exception):
    """The pack uses more of the standard than the fast path knows."""


def _plain_json(payload: bytes, received_ms: int) -> Message | None:
    try:
        records = _PLAIN_JSON.decode(payload)
    except (ValueError, RecursionError):
        return None
    _check_size(records)
    try:
        return _fold(records, received_ms, Message())
    except _NotPlainError:
        return None


def _plain_cbor(pack: list[Any], received_ms: int) -> Message | None:
    try:
        named = [{_PLAIN_LABELS[key]: value for key, value in record.items()} for record in pack]
        return _fold(msgspec.convert(named, list[_Plain]), received_ms, Message())
    except (AttributeError, KeyError, msgspec.ValidationError, _NotPlainError):
        return None


def _fold(records: list[_Plain], received_ms: int, message: Message) -> Message:
    readings = message.readings
    places: dict[str, tuple[str | None, _Place]] = {}
    base_name, base_unit, base_time = "", None, 0.0
    last_time: float | None = None
    time_ms = received_ms
    values: Values = {}
    for record in records:
        if record.bn is not None or record.bu is not None:
            base_name = base_name if record.bn is None else record.bn
            base_unit = base_unit if record.bu is None else record.bu
            places = {}
        if record.bt is not None:
            base_time = record.bt
            last_time = None
        if record.t != last_time:
            last_time = record.t
            at = base_time + last_time
            if not -LATEST_S < at < LATEST_S:
                raise _NotPlainError
            time_ms = round(at * 1000) if at >= RELATIVE_BELOW_S else received_ms + round(at * 1000)
            found = readings.get(time_ms)
            if found is None:
                found = readings[time_ms] = {}
            values = found
        known = places.get(record.n)
        if known is None or known[0] != record.u:
            place = _place_of(base_name, record.n, base_unit if record.u is None else record.u)
            known = places[record.n] = record.u, place
        name, multiply, divide, offset, trouble = known[1]
        if trouble is not None:
            _aside(message, name, trouble, record.v, time_ms)
            continue
        value = record.v * multiply / divide + offset
        if name in values or not -LARGEST <= value <= LARGEST:
            add_value(message, values, time_ms, name, value)
        else:
            values[name] = value
    return message


def _place_of(base_name: str, name: str, unit: str | None) -> "_Place":
    if len(base_name) + len(name) > MAX_TEXT or (unit is not None and len(unit) > MAX_TEXT):
        raise _NotPlainError
    return _place(base_name + name, unit)


class _Place(NamedTuple):
    """Where a value of a resolved name belongs: quantity and conversion, or why it has no place."""

    name: str
    multiply: float
    divide: float
    offset: float
    trouble: str | None


@lru_cache(maxsize=8192)
def _place(full_name: str, unit: str | None) -> _Place:
    name = full_name.rpartition(":")[2]
    if not packs.legal_name(full_name):
        return _Place(name, 1, 1, 0, packs.illegal(full_name))
    if name in MESSAGE_FIELDS:
        return _Place(name, 1, 1, 0, "")
    quantity = BY_NAME.get(name)
    if quantity is None:
        return _Place(name, 1, 1, 0, "")
    found = conversion(quantity, unit)
    if found is None:
        assert unit is not None
        return _Place(name, 1, 1, 0, misfit(quantity, unit))
    return _Place(name, found.multiply, found.divide, found.offset, None)


def _aside(message: Message, name: str, trouble: str, value: float, time_ms: int) -> None:
    stated = float(value)
    if not trouble and name in MESSAGE_FIELDS:
        add_count(message, name, stated)
    elif not trouble:
        add_unknown(message, name)
    else:
        quantity = name if name in BY_NAME else None
        reason = "unit" if quantity else "malformed"
        message.remarks.append(Remark(reason, trouble, time_ms, quantity, stated if isfinite(stated) else None))


# The general path ------------------------------------------------------------------------------------------------


def _general(pack: list[Any], received_ms: int) -> Message:
    message = Message()
    plain: list[_Plain] = []
    records = [packs.labelled(record) if isinstance(record, Mapping) else record for record in pack]
    for record in combined(records, message.remarks):
        if isinstance(record.value, float):
            plain.append(_Plain(record.value, record.name, record.unit, record.at_s))
        else:
            message.ignored += 1
    return _fold(plain, received_ms, message)


def _check_size(records: Sequence[Any]) -> None:
    if len(records) > MAX_RECORDS:
        raise PayloadError(
            f"The message has {len(records)} records and the hub reads at most {MAX_RECORDS}; "
            "send the backlog in several messages."
        )
