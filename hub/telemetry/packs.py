"""Bytes to the records of a SenML pack: the two encodings, and the small rules of fields.

Nothing a broker can deliver may hang the hub or fill its memory, so the CBOR parser is told to leave alone the tags
that build regular expressions, dates or numbers of unbounded size.
"""

import base64
import binascii
import json
import re
from collections.abc import Callable
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
    """Records of a JSON pack, each whatever stands there.

    Beyond the letter of JSON, the tokens ``NaN`` and ``Infinity`` are let through, so that one value that some
    firmware could not help writing does not cost the whole message; they are refused later, one by one.
    """
    try:
        pack = json.loads(payload.removeprefix(_BOM).decode("utf-8"))
    except UnicodeDecodeError as problem:
        raise PayloadError(
            f"The message is not UTF-8 (byte {problem.start + 1}); SenML in JSON allows nothing else."
        ) from None
    except RecursionError:
        raise PayloadError("The message is nested too deeply; a SenML pack is a flat array of records.") from None
    except ValueError as problem:
        where = f" at character {problem.pos + 1}" if isinstance(problem, json.JSONDecodeError) else ""
        raise PayloadError(
            f"The message is not whole JSON{where}; it was cut short or is not written by the rules."
        ) from None
    return _array(pack)


def parse_cbor(payload: bytes) -> list[Any]:
    """Records of a CBOR pack; integer labels stay as they are until `labelled`."""
    try:
        pack = cbor2.loads(payload, semantic_decoders=_TAGS, max_depth=MAX_DEPTH)
    except cbor2.CBORDecodeEOF:
        raise PayloadError("The CBOR message ends too early; it was cut short on the way.") from None
    except (cbor2.CBORDecodeError, RecursionError, ValueError, TypeError, OverflowError, MemoryError):
        raise PayloadError("The message is not CBOR that the hub can read; send SenML (RFC 8428, section 6).") from None
    return _array(pack)
