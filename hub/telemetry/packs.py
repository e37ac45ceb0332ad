"""Bytes to the records of a SenML pack: the two encodings, and the small rules of fields.

Nothing a broker can deliver may hang the hub or fill its memory, so the CBOR parser is told to leave alone the tags
that build regular expressions, dates or numbers of unbounded size.
"""

import base64
import binascii
import io
import json
import re
from collections.abc import Callable, Mapping
from math import inf
from typing import Any, Final, Literal

import cbor2

from hub.errors import PayloadError
from hub.telemetry.units import shortened

# An array of maps is two levels deep; the rest is room for fields that are to be ignored.
MAX_DEPTH: Final = 16

# CBOR map keys of RFC 8428, table 6.
LABELS: Final = {
    -1: "bver",
    -2: "bn",
    -3: "bt",
    -4: "bu",
    -5: "bv",
    -6: "bs",
    0: "n",
    1: "u",
    2: "v",
    3: "vs",
    4: "vb",
    5: "s",
    6: "t",
    7: "ut",
    8: "vd",
}

# Integers wider than this are not needed to write any double; parsing them takes time that grows with the square.
_BIGNUM_BYTES: Final = 8
_SET_ASIDE: Final = 0xFFFF
_SELF_DESCRIBED: Final = b"\xd9\xd9\xf7"  # tag 55799 in front of the pack (RFC 8949, section 3.4.6)
_BOM: Final = b"\xef\xbb\xbf"
_JSON_START: Final = frozenset(b"[{ \t\r\n\xef")
_CBOR_START: Final = frozenset([*range(0x80, 0xA0), 0xD9])
# Resulting names (RFC 8428, section 4.5.1).
_NAME: Final = re.compile(r"[A-Za-z0-9][A-Za-z0-9\-:._/]*", re.ASCII)


def sniff(payload: bytes) -> Literal["json", "cbor"]:
    """Encoding of a pack by its first byte: a JSON array opens with ``[``, a CBOR array with 0x80 to 0x9f.

    Raises
    ------
    PayloadError
        Where the first byte begins neither, or there is none.
    """
    if not payload:
        raise PayloadError("The message is empty; a SenML pack is an array of records.")
    if payload[0] in _JSON_START:
        return "json"
    if payload[0] in _CBOR_START:
        return "cbor"
    raise PayloadError(
        "The message is neither a JSON array nor a CBOR array; send SenML (RFC 8428), or map this topic as a feed."
    )


def parse_json(payload: bytes) -> list[Any]:
    """Records of a JSON pack, each whatever stands there."""
    return _array(parse_document(payload))


def parse_document(payload: bytes) -> Any:  # noqa: ANN401 - anything JSON can say
    """Any JSON document.

    Beyond the letter of JSON, the tokens ``NaN`` and ``Infinity`` are let through, so that one value that some
    firmware could not help writing does not cost the whole message; they are refused later, one by one.
    """
    try:
        return json.loads(payload.removeprefix(_BOM).decode("utf-8"))
    except UnicodeDecodeError as problem:
        raise PayloadError(f"The message is not UTF-8 (byte {problem.start + 1}); JSON allows nothing else.") from None
    except RecursionError:
        raise PayloadError("The message is nested too deeply; send a flat list of values.") from None
    except ValueError as problem:
        where = f" at character {problem.pos + 1}" if isinstance(problem, json.JSONDecodeError) else ""
        raise PayloadError(
            f"The message is not whole JSON{where}; it was cut short or is not written by the rules."
        ) from None


def parse_cbor(payload: bytes) -> list[Any]:
    """Records of a CBOR pack; integer labels stay as they are until `labelled`."""
    stream = io.BytesIO(payload.removeprefix(_SELF_DESCRIBED))
    decoder = cbor2.CBORDecoder(stream, semantic_decoders=_TAGS, max_depth=MAX_DEPTH)
    try:
        pack = decoder.decode()
    except cbor2.CBORDecodeEOF:
        raise PayloadError("The CBOR message ends too early; it was cut short on the way.") from None
    except (cbor2.CBORDecodeError, ValueError, TypeError, RecursionError, OverflowError, MemoryError):
        raise PayloadError("The message is not CBOR that the hub can read; send SenML (RFC 8428, section 6).") from None
    if stream.read(1):
        raise PayloadError("Something follows the CBOR array; send one SenML pack a message.")
    return _array(pack)


def labelled(record: Mapping[Any, Any]) -> dict[Any, Any]:
    """A record of a CBOR pack with the labels of JSON; labels that are text already stay (RFC 8428, section 6)."""
    return {(LABELS.get(key, key) if type(key) is int else key): value for key, value in record.items()}


def number(value: object) -> float | None:
    """A number of either encoding as a double, infinite beyond its range; ``None`` for anything else."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    try:
        return float(value)
    except OverflowError:
        return inf if value > 0 else -inf


def data(value: object) -> bytes | None:
    """A data value: bytes in CBOR, base64url without padding in JSON; ``None`` for anything else."""
    if isinstance(value, bytes):
        return value
    if not isinstance(value, str):
        return None
    try:
        return base64.b64decode(value + "=" * (-len(value) % 4), altchars=b"-_", validate=True)
    except (binascii.Error, ValueError):
        return None


def legal_name(name: str) -> bool:
    """Whether a resulting name keeps to the characters of RFC 8428, section 4.5.1."""
    return _NAME.fullmatch(name) is not None


def illegal(name: str) -> str:
    """One sentence about a name that is not legal."""
    if not name:
        return "A record has no name; give each a name or a base name."
    return (
        f"The name {shortened(name)} is not allowed; use letters, digits and - : . / _, "
        "and begin with a letter or digit."
    )


def _array(pack: object) -> list[Any]:
    if not isinstance(pack, list):
        raise PayloadError("The message is no array; a SenML pack is an array of records, even for a single one.")
    return pack


def _whole(magnitude: bytes, _immutable: bool) -> int:
    if len(magnitude) > _BIGNUM_BYTES:
        raise ValueError("a number beyond 64 bits")
    return int.from_bytes(magnitude, "big")


def _negative(magnitude: bytes, immutable: bool) -> int:
    return -1 - _whole(magnitude, immutable)


def _decimal(parts: object, _immutable: bool) -> float:
    """Tag 4, a decimal fraction: exponent of ten and mantissa (RFC 8949, section 3.4.4)."""
    if not isinstance(parts, list | tuple) or len(parts) != 2 or not all(type(part) is int for part in parts):  # noqa: PLR2004 - a pair
        raise ValueError("not a decimal fraction")
    exponent, mantissa = parts
    return float(f"{mantissa}e{exponent}")


def _opaque(value: object, _immutable: bool) -> cbor2.CBORTag:
    return cbor2.CBORTag(_SET_ASIDE, value)


# Dates, binary fractions, shared values, rationals, patterns, addresses, sets and the like: SenML has none of them,
# and building them is where a hostile message would hurt. They stay a tag around whatever they held.
_TAGS: Final[dict[int, Callable[..., Any]]] = {
    **dict.fromkeys((0, 1, 5, 25, 28, 29, 30, 35, 36, 37, 52, 54, 100, 256, 258, 260, 261, 1004, 43000), _opaque),
    2: _whole,
    3: _negative,
    4: _decimal,
}
