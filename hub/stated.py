"""What a person states in a file, and how to say what is wrong with it.

A validator names types and patterns; a person wants to know what to write. Both are derived here from the same
declaration: an annotated ``msgspec`` structure.
"""

import datetime as dt
import types
from collections.abc import Iterable, Mapping
from difflib import SequenceMatcher
from math import isfinite
from typing import Annotated, Any, Final, Literal, Union, get_args, get_origin, get_type_hints

import msgspec
from msgspec import Meta, Struct, UnsetType

_WORDS: Final[Mapping[Any, str]] = {
    int: "a whole number",
    float: "a number",
    str: "text in quotation marks",
    bool: "true or false",
    dt.datetime: "an instant with its zone, such as 2026-03-01T09:00:00Z",
    dt.date: "a date, such as 2026-03-01",
}
# Words further apart than this share of their letters are not a slip of the fingers.
_FARTHEST: Final = 0.5
# No key is longer; comparing takes time with the length.
_LONGEST: Final = 64


def nearest(word: str, known: Iterable[str]) -> str:
    """A sentence, after a blank, that names the known word somebody may have meant, or all there are."""
    names, word = list(known), word[:_LONGEST]
    found = min(names, key=lambda name: (_away(word, name), -_alike(word, name)), default=None)
    if found is not None and _away(word, found) <= _FARTHEST * max(len(word), len(found)):
        return f" Did you mean “{found}”?"
    return f" Known here: {', '.join(names)}."


def _away(word: str, name: str) -> int:
    """How far a word is from a name; not at all where only the unit at the end is missing."""
    return 0 if name.startswith(f"{word}_") else slips(word, name)


def slips(one: str, other: str) -> int:
    """How many slips of the fingers turn one word into the other: letters left out, added, changed or swapped.

    The optimal string alignment distance (after F. J. Damerau, doi:10.1145/363958.363994).
    """
    rows = [list(range(len(other) + 1))]
    for i, a in enumerate(one, start=1):
        row = [i]
        for j, b in enumerate(other, start=1):
            row.append(min(rows[-1][j] + 1, row[-1] + 1, rows[-1][j - 1] + (a != b)))
            if i > 1 and j > 1 and a == other[j - 2] and b == one[i - 2]:
                row[j] = min(row[j], rows[-2][j - 2] + 1)
        rows.append(row)
    return rows[-1][-1]


def _alike(one: str, other: str) -> float:
    return SequenceMatcher(None, one, other).ratio()


def convert(document: Mapping[str, Any], struct: type[Struct]) -> Any:  # noqa: ANN401 - an instance of ``struct``
    """The document as ``struct``, every number finite.

    Raises
    ------
    ValueError
        A key is missing or cannot be used; the text names the key and what it must be, without a full stop.
    """
    _check_finite(document, struct, ())
    try:
        return msgspec.convert(document, struct)
    except msgspec.ValidationError as error:
        raise ValueError(_complaint(str(error), document, struct)) from None


def _check_finite(table: Mapping[str, Any], struct: type[Struct], trail: tuple[str, ...]) -> None:
    hints = get_type_hints(struct, include_extras=True)
    for key, value in table.items():
        inner = struct_of(hints[key]) if key in hints else None
        if inner is not None and isinstance(value, Mapping):
            _check_finite(value, inner, (*trail, key))
        elif isinstance(value, float) and not isfinite(value):
            raise ValueError(_must_be((*trail, key), hints.get(key, float), value))


def _complaint(text: str, document: Mapping[str, Any], struct: type[Struct]) -> str:
    """A validator's remark as a person writes keys; the remark ends in the path, such as ``at `$.broker.port```."""
    remark, _, path = text.partition(" - at `$.")
    trail = tuple(path.removesuffix("`").split(".")) if path else ()
    missing = remark.partition("missing required field `")[2].removesuffix("`")
    if missing:
        return f"{'.'.join((*trail, missing))} is missing"
    hint: Any = struct
    value: Any = document
    for key in trail:
        owner = struct_of(hint)
        assert owner is not None
        hint, value = get_type_hints(owner, include_extras=True)[key], value[key]
    return _must_be(trail, hint, value)


def _must_be(trail: tuple[str, ...], hint: object, value: object) -> str:
    shown = "a table" if isinstance(value, Mapping) else "a list" if isinstance(value, list) else _written(value)
    return f"{'.'.join(trail) or 'this'} must be {must_be(hint)}, not {shown}"


def _written(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return f"“{value[:40].strip()}{'…' if len(value) > 40 else ''}”"  # noqa: PLR2004 - enough to recognise it
    return value.isoformat() if isinstance(value, dt.date | dt.time) else f"{value}"[:40]


def must_be(hint: object) -> str:
    """What a key of this type may hold, to complete “must be …”."""
    kind, metas = _unwrapped(hint)
    described = next((meta.description for meta in metas if meta.description), None)
    if described:
        return described
    if get_origin(kind) is Literal:
        *others, last = (f"“{choice}”" for choice in get_args(kind))
        return f"{', '.join(others)} or {last}" if others else last
    if struct_of(kind) is not None:
        return "a table of keys"
    return _WORDS.get(kind, "something else") + _bounds(metas)


def _bounds(metas: list[Meta]) -> str:
    def stated(name: str) -> Any:  # noqa: ANN401 - a number of either kind
        return next((value for meta in metas if (value := getattr(meta, name)) is not None), None)

    shortest, longest = stated("min_length"), stated("max_length")
    if longest is not None:
        return f" of {shortest or 0} to {longest} characters"
    at_least, above, at_most = stated("ge"), stated("gt"), stated("le")
    if at_least is not None and at_most is not None:
        return f" from {at_least} to {at_most}"
    low = f" above {above}" if above is not None else f" of at least {at_least}" if at_least is not None else ""
    high = "" if at_most is None else f" and at most {at_most}" if low else f" of at most {at_most}"
    return low + high


def struct_of(hint: object) -> type[Struct] | None:
    """The structure a key holds; ``None`` for anything else."""
    kind, _ = _unwrapped(hint)
    return kind if isinstance(kind, type) and issubclass(kind, Struct) else None


def _unwrapped(hint: Any) -> tuple[Any, list[Meta]]:  # noqa: ANN401 - a type hint may be anything
    """The plain type and what is said about it; “or not stated” is taken off."""
    if get_origin(hint) is Annotated:
        inner, *extras = get_args(hint)
        kind, metas = _unwrapped(inner)
        return kind, [*(extra for extra in extras if isinstance(extra, Meta)), *metas]
    if get_origin(hint) in {Union, types.UnionType}:
        stated = [part for part in get_args(hint) if part is not UnsetType]
        return _unwrapped(stated[0])
    return hint, []
