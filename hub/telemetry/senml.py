"""Sensor Measurement Lists (RFC 8428) in JSON and CBOR to readings.

Almost every message uses only base name, base time, base unit, name, unit, value and time. Those packs take a fast
path: a typed parse that refuses every other field, and one loop. Whatever it refuses is read again by the general
path, which knows the whole of the standard and says record by record what was wrong.
"""

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import isfinite
from typing import Any, Final, Literal, NamedTuple

import msgspec

from hub.errors import PayloadError
from hub.quantities import BY_NAME, MESSAGE_FIELDS
from hub.telemetry import packs
from hub.telemetry.gather import LARGEST, add_count, add_value, set_times_aside
from hub.telemetry.message import Message, Remark, Values
from hub.telemetry.units import conversion, misfit, shortened

MAX_PAYLOAD_BYTES: Final = 1 << 20
MAX_RECORDS: Final = 50_000
# Names and units are repeated into every record and remembered, so they must not be long.
MAX_TEXT: Final = 255

# Below this a time counts from the moment of receipt, from here on it is Unix time (RFC 8428, section 4.5.3).
RELATIVE_BELOW_S: Final = 2**28
# A time beyond this (the year 5138) is no time; the bound keeps the arithmetic in milliseconds exact.
LATEST_S: Final = 1e11

# Version 10 is that of RFC 8428; RFC 9100 reads it as features 1 and 3, reserved for that purpose, and gives
# feature 4, worth 16, to secondary units.
VERSION: Final = 10
SECONDARY_UNITS: Final = 1 << 4

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
        for r in _combined(records, remarks)
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
_PLAIN_LABELS: Final = frozenset({-4, -3, -2, 0, 1, 2, 6})
_NUMBERS: Final = frozenset({int, float})
_TEXTS: Final = frozenset({str, type(None)})


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
        return _fold(_cbor_records(pack), received_ms, Message())
    except _NotPlainError:
        return None


def _cbor_records(pack: list[Any]) -> Iterator[_Plain]:
    for record in pack:
        if type(record) is not dict or not _PLAIN_LABELS.issuperset(record):
            raise _NotPlainError
        get = record.get
        value: Any = get(2)
        time, name, unit, bn, bt, bu = get(6, 0.0), get(0, ""), get(1), get(-2), get(-3), get(-4)
        if type(value) not in _NUMBERS or type(time) not in _NUMBERS or type(name) is not str:
            raise _NotPlainError
        if not (type(unit) in _TEXTS and type(bn) in _TEXTS and type(bu) in _TEXTS):
            raise _NotPlainError
        if bt is not None and type(bt) not in _NUMBERS:
            raise _NotPlainError
        yield _Plain(value, name, unit, time, bn, bt, bu)


def _fold(records: Iterable[_Plain], received_ms: int, message: Message) -> Message:
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
        return _Place(name[:64], 1, 1, 0, "")
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
        message.unknown[name] = message.unknown.get(name, 0) + 1
    else:
        quantity = name if name in BY_NAME else None
        reason = "unit" if quantity else "malformed"
        message.remarks.append(Remark(reason, trouble, time_ms, quantity, stated if isfinite(stated) else None))


# The general path ------------------------------------------------------------------------------------------------


def _general(pack: list[Any], received_ms: int) -> Message:
    message = Message()
    plain: list[_Plain] = []
    records = [packs.labelled(record) if isinstance(record, Mapping) else record for record in pack]
    for record in _combined(records, message.remarks):
        if isinstance(record.value, float):
            plain.append(_Plain(record.value, record.name, record.unit, record.at_s))
        else:
            message.ignored += 1
    return _fold(plain, received_ms, message)


@dataclass(frozen=True, slots=True)
class _Combined:
    """A record with its base fields applied and its time still as it was sent."""

    name: str
    unit: str | None
    at_s: float
    value: float | str | bool | bytes | None
    sum: float | None
    update_s: float | None


@dataclass(slots=True)
class _Base:
    """Base fields in force, by their labels."""

    bn: str = ""
    bt: float = 0.0
    bu: str | None = None
    bv: float = 0.0
    bs: float | None = None
    bver: int | None = None


def _combined(records: Sequence[Any], remarks: list[Remark] | None) -> Iterator[_Combined]:
    base = _Base()
    for number, record in enumerate(records, 1):
        if isinstance(record, Mapping):
            _set_base(base, record, number)
        try:
            found = _combine(base, record, number)
        except PayloadError as problem:
            if remarks is None:
                raise
            remarks.append(Remark("malformed", str(problem)))
            continue
        if found is not None:
            yield found


def _set_base(base: _Base, record: Mapping[str, Any], number: int) -> None:
    """Take the base fields of a record. What is wrong with one spoils every record after it, so it raises."""
    for label in record:
        if isinstance(label, str) and label.endswith("_"):
            raise PayloadError(
                f"Record {number} has the field {shortened(label)}, which must be understood and is not; leave it out."
            )
    if "bver" in record:
        base.bver = _version(record["bver"], base.bver, number)
    for label in ("bn", "bu"):
        if label in record:
            if not isinstance(record[label], str) or len(record[label]) > MAX_TEXT:
                raise PayloadError(
                    f"Record {number}: {label} must be text of at most {MAX_TEXT} characters; "
                    "the pack cannot be read without it."
                )
            setattr(base, label, record[label])
    for label in ("bt", "bv", "bs"):
        if label in record:
            value = packs.number(record[label])
            if value is None or not isfinite(value):
                raise PayloadError(
                    f"Record {number}: {label} must be a finite number; the pack cannot be read without it."
                )
            setattr(base, label, value)


def _version(stated: Any, before: int | None, number: int) -> int:  # noqa: ANN401 - anything a parser yields
    if isinstance(stated, bool) or not isinstance(stated, int) or stated < 1:
        raise PayloadError(
            f"Record {number}: the version bver must be a whole number above 0; send 10 or leave it out."
        )
    if stated > VERSION and stated != VERSION + SECONDARY_UNITS:
        raise PayloadError(
            f"Record {number} is of a SenML version the hub does not know; send version {VERSION}, or "
            f"{VERSION + SECONDARY_UNITS} with secondary units (RFC 9100)."
        )
    if before is not None and before != stated:
        raise PayloadError(f"Record {number} changes the version within the pack; all records must be of one version.")
    return stated


def _combine(base: _Base, record: Any, number: int) -> _Combined | None:  # noqa: ANN401 - anything a parser yields
    if not isinstance(record, Mapping):
        raise PayloadError(f"Record {number} is no object with fields.")
    kinds = [label for label in ("v", "vs", "vb", "vd") if label in record]
    if not kinds and "s" not in record and not {"n", "u", "t", "ut"} & record.keys():
        return None  # only sets base fields, as in the first example of section 5.1.7
    name, unit = record.get("n", ""), record.get("u", base.bu)
    if not isinstance(name, str) or not (unit is None or isinstance(unit, str)):
        raise PayloadError(f"Record {number}: name and unit must be text.")
    if len(base.bn) + len(name) > MAX_TEXT or (unit is not None and len(unit) > MAX_TEXT):
        raise PayloadError(f"Record {number}: name and unit have at most {MAX_TEXT} characters; shorten them.")
    name = base.bn + name
    if not packs.legal_name(name):
        raise PayloadError(f"Record {number}: {packs.illegal(name)}")
    at = base.bt + _finite(record, "t", 0.0, name)
    if not -LATEST_S < at < LATEST_S:
        raise PayloadError(f"Record {number}: the time of {shortened(name)} is no time; send Unix seconds.")
    if len(kinds) > 1 or not (kinds or "s" in record):
        held = " and ".join(kinds) or "no value"
        raise PayloadError(f"Record {number} ({shortened(name)}) has {held}; a record carries exactly one value.")
    total = _finite(record, "s", 0.0, name) + (base.bs or 0.0) if "s" in record or base.bs is not None else None
    update = _finite(record, "ut", 0.0, name) if "ut" in record else None
    value = _value(base, record, kinds[0], name) if kinds else None
    return _Combined(name, unit, at, value, total, update)


def _finite(record: Mapping[str, Any], label: str, default: float, name: str) -> float:
    value = packs.number(record.get(label, default))
    if value is None or not isfinite(value):
        raise PayloadError(f"The field {label} of {shortened(name)} is no finite number; send a number.")
    return value


def _value(base: _Base, record: Mapping[str, Any], kind: str, name: str) -> float | str | bool | bytes:
    value = record[kind]
    if kind == "v":
        stated = packs.number(value)
        if stated is None:
            raise PayloadError(f"The value of {shortened(name)} is no number; send it without quotation marks.")
        return base.bv + stated
    if kind == "vs" and isinstance(value, str):
        return value
    if kind == "vb" and isinstance(value, bool):
        return value
    data = packs.data(value) if kind == "vd" else None
    if data is None:
        raise PayloadError(f"The field {kind} of {shortened(name)} holds something of another type.")
    return data


def _check_size(records: Sequence[Any]) -> None:
    if len(records) > MAX_RECORDS:
        raise PayloadError(
            f"The message has {len(records)} records and the hub reads at most {MAX_RECORDS}; "
            "send the backlog in several messages."
        )
