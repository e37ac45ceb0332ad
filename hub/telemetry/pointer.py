"""JSON Pointer (RFC 6901): one value inside a JSON document."""

import re
from typing import Any, Final

from hub.errors import PayloadError

_SYNTAX: Final = re.compile(r"(/([^~/]|~[01])*)*")
_INDEX: Final = re.compile(r"0|[1-9][0-9]*", re.ASCII)


def pointer_problem(pointer: str) -> str | None:
    """One sentence on why ``pointer`` is no JSON Pointer, ``None`` where it is one (RFC 6901, section 3)."""
    if _SYNTAX.fullmatch(pointer):
        return None
    if not pointer.startswith("/"):
        return f"The JSON Pointer {pointer!r} must begin with / or be empty for the whole document."
    return f"In the JSON Pointer {pointer!r} a ~ must be written ~0 and a / inside a name ~1."


def look_up(document: Any, pointer: str) -> Any:  # noqa: ANN401 - anything JSON can say
    """The value a valid pointer leads to (RFC 6901, section 4).

    Raises
    ------
    PayloadError
        Where the document has no such place; ``-``, the place after the last of an array, is no value.
    """
    found = document
    for token in pointer.split("/")[1:]:
        name = token.replace("~1", "/").replace("~0", "~")  # in this order, so that ~01 is ~1
        if isinstance(found, dict) and name in found:
            found = found[name]
        elif isinstance(found, list) and _INDEX.fullmatch(name) and len(name) < 10 and int(name) < len(found):  # noqa: PLR2004
            found = found[int(name)]
        else:
            raise PayloadError(f"The message has nothing at {pointer}.")
    return found
