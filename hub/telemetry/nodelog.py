"""Node logs from a card: CSV to readings, every physical line accounted for.

A log is read as a stream and handed on in chunks, so that a file of any size needs the memory of one chunk. Each line
is exactly one of: taken, set aside with its number and reason, header, or blank.
"""

from collections.abc import Iterator
from dataclasses import dataclass, field
from math import isfinite
from typing import BinaryIO, Final

from hub.errors import PayloadError, UsageError
from hub.quantities import NAMES
from hub.telemetry import logtime
from hub.telemetry.cells import decimals, number, split
from hub.telemetry.columns import Layout, foreign, mapped_layout, native_layout
from hub.telemetry.gather import LARGEST, add_unknown, add_value, time_problem
from hub.telemetry.lines import Line, physical_lines
from hub.telemetry.logmapping import LogMapping, check_mapping
from hub.telemetry.message import Message, Remark, Values
from hub.telemetry.units import SAME, column_problem, shortened

CHUNK_READINGS: Final = 5000
# A header is looked for this far into a file; what precedes it is a banner or the debris of a torn write.
HEADER_WITHIN_LINES: Final = 200

_UTF8_BOM: Final = b"\xef\xbb\xbf"
_UTF16_BOMS: Final = (b"\xff\xfe", b"\xfe\xff")


@dataclass(slots=True)
class Chunk:
    """A stretch of a log.

    Attributes
    ----------
    message
        Readings, unknown columns, remarks on single values of lines that were taken, and the boot they belong to.
    lines
        Physical lines of the stretch: ``taken + headers + blank + len(set_aside)``.
    taken
        Lines of which at least one value became part of a reading.
    headers, blank
        Header lines, and lines of nothing.
    set_aside
        One remark for every other line, with its number.
    """

    message: Message = field(default_factory=Message)
    lines: int = 0
    taken: int = 0
    headers: int = 0
    blank: int = 0
    set_aside: list[Remark] = field(default_factory=list)


def read_log(
    source: bytes | BinaryIO,
    *,
    mapping: LogMapping | None = None,
    received_ms: int,
    chunk_readings: int = CHUNK_READINGS,
) -> Iterator[Chunk]:
    """Read a node log.

    Parameters
    ----------
    source
        The bytes, or a file opened for reading bytes (which must be able to seek where the mapping skips to the last
        of several beginnings).
    mapping
        How a foreign log is read; ``None`` for the form of the node interface.
    received_ms
        The hub's time in UTC milliseconds; lines more than 5 min ahead of it are set aside.
    chunk_readings
        Readings, or lines set aside, after which a chunk is handed on. A new chunk also begins where the column
        ``boot`` changes.

    Raises
    ------
    PayloadError
        Where the file is not a log that can be read: no header within 200 lines, or a header without any known
        column. No reading has been handed on then.
    """
    if mapping is not None:
        check_mapping(mapping)
    return _Reader(source, mapping, received_ms, chunk_readings).chunks()


class _Reader:
    def __init__(
        self, source: bytes | BinaryIO, mapping: LogMapping | None, received_ms: int, chunk_readings: int
    ) -> None:
        self.source = source
        self.mapping = mapping
        self.received_ms = received_ms
        self.chunk_readings = chunk_readings
        self.chunk = Chunk()
        self.layout: Layout | None = None
        self.header_text: str | None = None
        self.first_text = ""
        self.last_cells: list[str] = []
        self.row = 0
        self.start_ms = 0
        if mapping is not None and mapping.time.start is not None:
            self.start_ms = logtime.rfc3339_ms(mapping.time.start)

    def chunks(self) -> Iterator[Chunk]:
        begin = self._first_line()
        for line in physical_lines(self.source):
            self.chunk.lines += 1
            text = self._text(line)
            if line.number < begin:
                if text is not None:
                    self._aside(line, "line", "The line comes before the one the data begins with.")
            elif text is not None and not self._header(line, text):
                yield from self._take(line, text)
            if self.layout is None and len(self.chunk.set_aside) > HEADER_WITHIN_LINES and line.number >= begin:
                raise foreign(self.first_text)
            full = max(len(self.chunk.message.readings), len(self.chunk.set_aside)) >= self.chunk_readings
            if full and (self.layout is not None or line.number < begin):
                yield self._next_chunk(self.chunk.message.boot)
        if self.layout is None and self.first_text:
            raise foreign(self.first_text)
        if self.chunk.lines:
            yield self._next_chunk(None)

    def _next_chunk(self, boot: int | None) -> Chunk:
        done, self.chunk = self.chunk, Chunk(Message(boot=boot))
        return done

    def _aside(self, line: Line, reason: str, detail: str) -> None:
        self.chunk.set_aside.append(Remark(reason, detail, line=line.number))

    # Lines -------------------------------------------------------------------------------------------------------

    def _first_line(self) -> int:
        """Number of the line the data begins with."""
        if self.mapping is None or self.mapping.skip_until is None:
            return 1
        beginning = self.mapping.skip_until.encode()
        found = None
        where = None if isinstance(self.source, bytes) else _position(self.source)
        for line in physical_lines(self.source):
            if line.content.lstrip(b"\0").removeprefix(_UTF8_BOM).startswith(beginning):
                found = line.number
                if not self.mapping.skip_until_last:
                    break
        if not isinstance(self.source, bytes):
            self.source.seek(where or 0)
        if found is None:
            raise PayloadError(f"No line begins with {shortened(self.mapping.skip_until)}; correct skip_until.")
        return found

    def _text(self, line: Line) -> str | None:
        """The line as text, or ``None`` where it is dealt with here."""
        if line.too_long:
            self._aside(line, "line", "The line is too long for a log; part of the file is damaged.")
            return None
        content = line.content
        if line.number == 1:
            if content.startswith(_UTF16_BOMS):
                raise PayloadError("The file is UTF-16; save it as UTF-8 or plain text and import it again.")
            content = content.removeprefix(_UTF8_BOM)
        if b"\0" in content:
            # A card that lost power leaves blocks of NULs. In front of a whole line they are harmless; behind or
            # inside one, the line itself was cut.
            content = content.lstrip(b"\0")
            if not content.strip() or b"\0" in content:
                self._aside(line, "line", "The line has NUL bytes where text should be; a write was cut off there.")
                return None
        text = content.decode("utf-8", "replace").strip(" \r")
        if not text:
            self.chunk.blank += 1
            return None
        return text

    def _header(self, line: Line, text: str) -> bool:
        """Whether the line is a header; one of the hub's own form also changes how the lines after it are read."""
        if self.mapping is None:
            found = native_layout(text)
            if found is None:
                return False
            if not found.columns and self.layout is None:
                raise foreign(text)
            self._note_unknown(line, found)
            self.layout, self.last_cells = found, []
        elif self.layout is None:
            self.layout = mapped_layout(self.mapping, text)
            self.header_text = text if self.mapping.header else None
        if self.mapping is None or text == self.header_text:
            self.chunk.headers += 1
            return True
        return False

    def _note_unknown(self, line: Line, layout: Layout) -> None:
        message = self.chunk.message
        for heading in layout.unknown:
            add_unknown(message, heading)
            if any(heading.startswith(f"{name}_") for name in NAMES):
                message.remarks.append(Remark("unit", column_problem(heading), line=line.number))

    # Rows --------------------------------------------------------------------------------------------------------

    def _take(self, line: Line, text: str) -> Iterator[Chunk]:
        """Take a row in; hand on the chunk before it where the row begins a new boot."""
        layout = self.layout
        if layout is None:
            self.first_text = self.first_text or text
            self._aside(line, "line", "The line comes before the header.")
            return
        row, self.row = self.row, self.row + 1
        try:
            row_cells = self._cells(line, text, layout)
            time_ms = self._time(row_cells, layout, row)
            boot = _boot(row_cells, layout)
        except PayloadError as problem:
            self._aside(line, "line", str(problem))
            return
        if boot != self.chunk.message.boot and layout.boot is not None:
            if self.chunk.message.readings:
                self.chunk.lines -= 1
                yield self._next_chunk(boot)
                self.chunk.lines = 1
            self.chunk.message.boot = boot
        wrong = time_problem(time_ms, self.received_ms)
        if wrong is None:
            self._store(line, row_cells, time_ms)
            return
        reason, detail = wrong
        values: Values = {}
        self._fill(Message(), values, row_cells, time_ms, line)
        self.chunk.set_aside.append(Remark(reason, detail, time_ms, line=line.number, values=values))

    def _store(self, line: Line, row_cells: list[str], time_ms: int) -> None:
        message = self.chunk.message
        mark = len(message.remarks)
        values = message.readings.setdefault(time_ms, {})
        good = self._fill(message, values, row_cells, time_ms, line)
        if not values:
            del message.readings[time_ms]
        if good:
            self.chunk.taken += 1
            self.last_cells = row_cells
            return
        problems = message.remarks[mark:]
        del message.remarks[mark:]
        first = problems[0] if problems else Remark("line", "The line has a time and no value.")
        self.chunk.set_aside.append(
            Remark(first.reason, first.detail, time_ms, first.quantity, first.value, line.number)
        )

    def _fill(self, message: Message, values: Values, row_cells: list[str], time_ms: int, line: Line) -> int:
        """Add the row's values to a reading; return how many belong there."""
        layout = self.layout
        assert layout is not None
        good = 0
        for index, quantity, scale, shift, unit in layout.columns:
            cell = row_cells[index].strip()
            if not cell:
                continue
            try:
                value = number(cell, layout.decimal)
            except ValueError:
                detail = f"{quantity} reads {shortened(cell)}, which is no number; it was left out."
                message.remarks.append(Remark("malformed", detail, time_ms, quantity, None, line.number))
                continue
            if scale != 1.0 or shift != 0.0:
                value = value * scale + shift
            if unit is not SAME:
                value = unit(value)
            if quantity not in values and -LARGEST <= value <= LARGEST:
                values[quantity] = value
                good += 1
            else:
                good += add_value(message, values, time_ms, quantity, value, line.number)
        return good

    def _cells(self, line: Line, text: str, layout: Layout) -> list[str]:
        row_cells = split(text, layout.delimiter)
        short = len(row_cells) < layout.width
        if short or (layout.exact and len(row_cells) > layout.width and any(row_cells[layout.width :])):
            raise PayloadError(
                f"The line has {len(row_cells)} cells and needs {layout.width}; it is torn or runs into another."
            )
        if not line.ended and self.last_cells and len(row_cells) == len(self.last_cells):
            # The last line of a file needs no line end, but a write that was cut off has none either. A last value
            # with fewer decimals than the one above it may be the beginning of a longer one.
            last, above = row_cells[-1].strip(), self.last_cells[-1].strip()
            if decimals(last, layout.decimal) < decimals(above, layout.decimal) or (above and not last):
                raise PayloadError(
                    "The last line has no line end and its last value is shorter than the one above, so it may be "
                    "cut; add a line end if it is whole."
                )
        return row_cells

    def _time(self, row_cells: list[str], layout: Layout, row: int) -> int:
        if layout.clock is None:
            assert self.mapping is not None
            assert self.mapping.time.step_s is not None
            return self.start_ms + round(row * self.mapping.time.step_s * 1000)
        text = " ".join(row_cells[index].strip() for index in layout.times)
        if not text.strip():
            raise PayloadError("The line has no time.")
        if layout.decimal == "," and text.count(",") == 1 and self.mapping is None:
            text = text.replace(",", ".")
        return layout.clock(text)


def _boot(row_cells: list[str], layout: Layout) -> int | None:
    if layout.boot is None:
        return None
    try:
        value = number(row_cells[layout.boot].strip())
    except ValueError:
        return None
    return int(value) if isfinite(value) and 0 <= value < 2**53 and value == int(value) else None


def _position(source: BinaryIO) -> int:
    if not source.seekable():
        raise UsageError("A mapping with skip_until reads the file twice; give a file rather than a pipe.")
    return source.tell()
