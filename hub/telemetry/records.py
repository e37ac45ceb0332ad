"""Records of a SenML pack with the base fields in force applied to each (RFC 8428, sections 4.1 to 4.5)."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite
from typing import Any, Final

from hub.errors import PayloadError
from hub.telemetry import packs
from hub.telemetry.message import Remark
from hub.telemetry.units import shortened

# Names and units are repeated into every record and remembered, so they must not be long.
MAX_TEXT: Final = 255

# A time beyond this (the year 5138) is no time; the bound keeps the arithmetic in milliseconds exact.
LATEST_S: Final = 1e11

# Version 10 is that of RFC 8428; RFC 9100 reads it as features 1 and 3, reserved for that purpose, and gives
# feature 4, worth 16, to secondary units.
VERSION: Final = 10
SECONDARY_UNITS: Final = 1 << 4


@dataclass(frozen=True, slots=True)
class Combined:
    """A record with its base fields applied and its time, in seconds, still relative or absolute as it was sent."""

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


def combined(records: Sequence[Any], remarks: list[Remark] | None) -> Iterator[Combined]:
    """Records with their base fields applied, in their order; those that only set base fields are not among them.

    Parameters
    ----------
    records
        What the parser found in the array, with the labels of JSON.
    remarks
        Takes one remark for each record that cannot be read. Without it such a record raises.

    Raises
    ------
    PayloadError
        Where the pack cannot be read as a whole, and, without ``remarks``, at the first record that cannot be read.
    """
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


def _combine(base: _Base, record: Any, number: int) -> Combined | None:  # noqa: ANN401 - anything a parser yields
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
    return Combined(name, unit, at, value, total, update)


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
