"""A log file as physical lines, in bounded memory whatever the file holds."""

import io
from collections.abc import Iterator
from typing import BinaryIO, Final, NamedTuple

BLOCK_BYTES: Final = 1 << 18
# A log line of all quantities has some 200 characters; what runs on for longer than this is not a line of a log.
MAX_LINE_BYTES: Final = 1 << 14


class Line(NamedTuple):
    """One physical line.

    Attributes
    ----------
    number
        Counted from 1.
    content
        The bytes without the line end; empty where the line is too long to be kept.
    ended
        Whether a line end followed. Only the last line of a file may lack it.
    too_long
        Whether the line had more than `MAX_LINE_BYTES` bytes.
    """

    number: int
    content: bytes
    ended: bool
    too_long: bool


def physical_lines(source: bytes | BinaryIO) -> Iterator[Line]:
    """Lines of a file or of bytes, ended by LF or CR LF, or by CR where the first block has no LF at all.

    Stray CRs at either end of a line belong to the line end. A file that ends with a line end has no further line.
    """
    stream = io.BytesIO(source) if isinstance(source, bytes) else source
    number = 0
    rest = b""
    too_long = False
    separator = b""
    while block := stream.read(BLOCK_BYTES):
        separator = separator or (b"\r" if b"\n" not in block and b"\r" in block else b"\n")
        pieces = (rest + block).split(separator)
        rest = pieces.pop()
        for piece in pieces:
            number += 1
            too_long = too_long or len(piece) > MAX_LINE_BYTES
            yield Line(number, b"" if too_long else piece.strip(b"\r"), ended=True, too_long=too_long)
            too_long = False
        if len(rest) > MAX_LINE_BYTES:
            too_long = True
            rest = b""
    if rest or too_long:
        yield Line(number + 1, b"" if too_long else rest.strip(b"\r"), ended=False, too_long=too_long)
