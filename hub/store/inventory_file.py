"""The inventory as a TOML file: reading it with exact complaints, and writing what is known."""

import datetime as dt
import difflib
import json
import tomllib
import zoneinfo
from collections.abc import Mapping
from dataclasses import fields
from pathlib import Path
from typing import Annotated, Any, Literal

import msgspec
from msgspec import UNSET, Meta, Struct, UnsetType

from hub.errors import InventoryError
from hub.quantities import BY_NAME
from hub.stated import convert, nearest
from hub.store.inventory import KEYS, Calibration, Fitting, Inventory, Node, Pack, Site

# Instants of an inventory: no node of this kind is older, and a year beyond is a slip of the fingers.
EARLIEST_YEAR, LATEST_YEAR = 2000, 2199

Name = Annotated[str, Meta(pattern=r"\A[a-z0-9-]{1,64}\Z", description="1 to 64 of a-z, 0-9 and - in quotation marks")]
Label = Annotated[str, Meta(min_length=1, max_length=64)]
Instant = Annotated[dt.datetime, Meta(tz=True)]
Positive = Annotated[float, Meta(gt=0)]
NotNegative = Annotated[float, Meta(ge=0)]


class SiteRow(Struct, forbid_unknown_fields=True):
    """``[[site]]``."""

    name: Label
    latitude: Annotated[float, Meta(ge=-90, le=90)]
    longitude: Annotated[float, Meta(ge=-180, le=180)]
    altitude_m: Annotated[float, Meta(ge=-500, le=9000)] | UnsetType = UNSET
    timezone: str | UnsetType = UNSET
    horizon_notes: str | UnsetType = UNSET


class NodeRow(Struct, forbid_unknown_fields=True):
    """``[[node]]``."""

    name: Name
    site: Label
    interval_s: Annotated[float, Meta(gt=0, le=86400)] | UnsetType = UNSET
    current_sensing: Literal["net", "charge-only"] | UnsetType = UNSET
    standing_load_a: NotNegative | UnsetType = UNSET
    panel_power_w: Positive | UnsetType = UNSET
    panel_tilt_deg: Annotated[float, Meta(ge=0, le=90)] | UnsetType = UNSET
    panel_azimuth_deg: Annotated[float, Meta(ge=0, le=360)] | UnsetType = UNSET
    panel_temperature_coefficient: Annotated[float, Meta(ge=-0.02, le=0)] | UnsetType = UNSET
    current_gain_error: NotNegative | UnsetType = UNSET
    current_offset_a: NotNegative | UnsetType = UNSET
    voltage_gain_error: NotNegative | UnsetType = UNSET
    temperature_error_c: NotNegative | UnsetType = UNSET
    current_full_scale_a: Positive | UnsetType = UNSET
    integration: Literal["trapezoid", "hold"] | UnsetType = UNSET


class PackRow(Struct, forbid_unknown_fields=True):
    """``[[pack]]``."""

    label: Label
    cells_in_series: Annotated[int, Meta(ge=1, le=100)]
    rated_capacity_ah: Positive
    designation: str | UnsetType = UNSET
    cells_in_parallel: Annotated[int, Meta(ge=1, le=100)] | UnsetType = UNSET
    commissioned: dt.date | UnsetType = UNSET


class FittingRow(Struct, forbid_unknown_fields=True):
    """``[[fitting]]``."""

    pack: Label
    node: Name
    start: Instant
    end: Instant | UnsetType = UNSET


class CalibrationRow(Struct, forbid_unknown_fields=True):
    """``[[calibration]]``."""

    node: Name
    quantity: str
    start: Instant
    gain: Positive | UnsetType = UNSET
    offset: float | UnsetType = UNSET
    note: str | UnsetType = UNSET


_KINDS: dict[str, type[Struct]] = {
    "site": SiteRow,
    "node": NodeRow,
    "pack": PackRow,
    "fitting": FittingRow,
    "calibration": CalibrationRow,
}
Rows = dict[str, list[dict[str, Any]]]


def read_file(path: Path) -> Rows:
    """Stated rows of an inventory file by kind; keys that the file leaves out are absent, not defaulted.

    Raises
    ------
    InventoryError
        The file cannot be read, is not TOML, or a row cannot be used; the text says which row and what to do.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise InventoryError(f"The inventory {path} cannot be read: {error.strerror}.") from None
    except UnicodeDecodeError:
        raise InventoryError(f"The inventory {path} is not UTF-8 text. Save it as UTF-8 and try again.") from None
    return parse(text, str(path))


def parse(text: str, source: str) -> Rows:
    """As ``read_file``, from text."""
    try:
        document = tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        raise InventoryError(f"{source} is not TOML: {error}. Correct that line and try again.") from None
    rows: Rows = {kind: [] for kind in _KINDS}
    for kind, entries in document.items():
        if kind not in _KINDS:
            raise InventoryError(f"{source}: there is no [[{kind}]] in an inventory.{nearest(kind, _KINDS)}")
        if not isinstance(entries, list) or not all(isinstance(entry, dict) for entry in entries):
            raise InventoryError(f"{source}: write [[{kind}]] with two brackets on each side: there may be several.")
        for number, entry in enumerate(entries, start=1):
            where = f"{source}: [[{kind}]] number {number}"
            rows[kind].append(_row(kind, entry, where))
            _refuse_twice(kind, rows[kind], where)
    return rows


def _row(kind: str, entry: Mapping[str, Any], where: str) -> dict[str, Any]:
    struct = _KINDS[kind]
    known = struct.__struct_fields__
    for key in entry:
        if key not in known:
            raise InventoryError(f"{where}: unknown key “{key}”.{nearest(key, known)}")
    try:
        row = convert(entry, struct)
    except ValueError as error:
        raise InventoryError(f"{where}: {error}.") from None
    return _checked({key: value for key in known if (value := getattr(row, key)) is not UNSET}, where)


def _refuse_twice(kind: str, rows: list[dict[str, Any]], where: str) -> None:
    """Two rows about the same thing are a slip: the second would silently overrule the first."""
    keys = [tuple(row[name] for name in KEYS[kind]) for row in rows]
    first = keys.index(keys[-1])
    if first < len(keys) - 1:
        raise InventoryError(
            f"{where}: it is about the same {kind} as number {first + 1}. Correct or remove one of them."
        )


def _checked(stated: dict[str, Any], where: str) -> dict[str, Any]:
    """Instants as milliseconds, dates as text; refuse zones and quantities that do not exist."""
    zone = stated.get("timezone")
    if zone is not None:
        try:
            zoneinfo.ZoneInfo(zone)
        except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
            near = difflib.get_close_matches(zone, zoneinfo.available_timezones(), n=1)
            raise InventoryError(
                f"{where}: there is no time zone “{zone}”."
                f" {f'Did you mean “{near[0]}”?' if near else 'Write it as in Europe/London.'}"
            ) from None
    quantity = stated.get("quantity")
    if quantity is not None and quantity not in BY_NAME:
        raise InventoryError(f"{where}: there is no quantity “{quantity}”.{nearest(quantity, BY_NAME)}")
    for key in ("start", "end"):
        if key in stated:
            moment = stated.pop(key)
            if not EARLIEST_YEAR <= moment.year <= LATEST_YEAR:
                raise InventoryError(f"{where}: its {key} is in the year {moment.year}. Correct the year.")
            stated[f"{key}_ms"] = round(moment.timestamp() * 1000)
    if stated.get("end_ms", float("inf")) <= stated.get("start_ms", float("-inf")):
        raise InventoryError(f"{where}: its end lies before its start.")
    if "commissioned" in stated:
        stated["commissioned"] = stated["commissioned"].isoformat()
    return stated


def write(inventory: Inventory) -> str:
    """The inventory as a file that ``read_file`` understands; keys at their defaults are left out."""
    parts: list[str] = []
    for kind, rows in (
        ("site", inventory.sites),
        ("node", inventory.nodes),
        ("pack", inventory.packs),
        ("fitting", inventory.fittings),
        ("calibration", inventory.calibrations),
    ):
        parts += [_table(kind, row) for row in rows]
    return "\n".join(parts)


def _table(kind: str, row: Site | Node | Pack | Fitting | Calibration) -> str:
    required = {known.name for known in msgspec.structs.fields(_KINDS[kind]) if known.required}
    lines = [f"[[{kind}]]"]
    for spec in fields(row):
        value = getattr(row, spec.name)
        if value is None or (value == spec.default and spec.name not in required):
            continue
        if spec.name.endswith("_ms"):
            lines.append(f"{spec.name.removesuffix('_ms')} = {instant_text(value)}")
        elif spec.name == "commissioned":
            lines.append(f"commissioned = {value}")
        else:
            # TOML's strings are JSON's but for one character that JSON leaves as it is.
            text = json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
            lines.append(f"{spec.name} = {text}")
    return "\n".join(lines) + "\n"


def instant_text(time_ms: int) -> str:
    """An instant as RFC 3339 in UTC, with milliseconds only where there are some."""
    moment = dt.datetime.fromtimestamp(time_ms / 1000, dt.UTC)
    return moment.isoformat(timespec="milliseconds" if time_ms % 1000 else "seconds").replace("+00:00", "Z")
