"""Tables of a TOML file to typed values, with a sentence a keeper understands where they do not fit."""

from collections.abc import Mapping
from typing import Any, TypeVar

import msgspec

from hub.errors import PackfoldError
from hub.telemetry.units import shortened, suggestion

T = TypeVar("T")


def to_struct(table: Mapping[str, Any], kind: type[T], where: str, error: type[PackfoldError]) -> T:
    """Build ``kind``, a msgspec structure, from a table.

    Parameters
    ----------
    where
        How a sentence calls the table, as in "The log mapping".
    error
        The error to raise: an unknown key with the nearest known one, or a value of the wrong type with its key.
    """
    known = [f.encode_name for f in msgspec.structs.fields(kind)]  # type: ignore[arg-type]
    for key in table:
        if key not in known:
            raise error(f"{where} has the unknown key {shortened(str(key))}{suggestion(str(key), known)}.")
    try:
        return msgspec.convert(table, kind)
    except msgspec.ValidationError as problem:
        text, _, at = str(problem).partition(" - at ")
        place = f" at {at.strip('`').removeprefix('$.')}" if at else ""
        raise error(f"{where} cannot be read{place}: {text[:1].lower()}{text[1:]}.") from None
