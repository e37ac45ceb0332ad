"""Node logs into the store: a chunk a transaction, each physical line accounted for; all of it can be taken back."""

import hashlib
import tomllib
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO

import msgspec

from hub.errors import PayloadError, UsageError
from hub.store import aside, imports, intake, inventory, mappings
from hub.store.engine import Database
from hub.store.readings import Outcome
from hub.telemetry.logmapping import LogMapping, mapping_from
from hub.telemetry.message import Remark
from hub.telemetry.nodelog import Chunk, read_log


@dataclass(slots=True)
class Report:
    """What became of a file.

    Attributes
    ----------
    file, import_id
        The file's name, and the number with which the import can be taken back; ``None`` for a dry run.
    lines, taken, repeated, headers, blank
        Physical lines: all, those whose readings are new or completed one, those known already, headers, empty ones.
    set_aside
        A remark for each other line, with its number.
    remarks
        Single values of taken lines that were set aside.
    unknown
        Columns nobody knows, with how often each came.
    first_ms, last_ms
        The span of the readings.
    """

    file: str
    import_id: int | None = None
    lines: int = 0
    taken: int = 0
    repeated: int = 0
    headers: int = 0
    blank: int = 0
    set_aside: list[Remark] = field(default_factory=list)
    remarks: list[Remark] = field(default_factory=list)
    unknown: dict[str, int] = field(default_factory=dict)
    first_ms: int | None = None
    last_ms: int | None = None

    @property
    def span(self) -> tuple[int, int] | None:
        """From the first to the last instant."""
        return None if self.first_ms is None or self.last_ms is None else (self.first_ms, self.last_ms)


def load_mapping(path: Path) -> LogMapping:
    """A mapping from its TOML file.

    Raises
    ------
    UsageError
        The file cannot be read or is not a mapping; the text says which key.
    """
    try:
        document = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise UsageError(f"The mapping {path} cannot be read: {error.strerror}.") from None
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise UsageError(f"The mapping {path} is not TOML: {error}. Correct that line and try again.") from None
    return mapping_from(document)


def import_log(
    database: Database,
    node: str,
    path: Path,
    *,
    mapping: LogMapping | None,
    now_ms: int,
    dry_run: bool = False,
    progress: Callable[[int], None] | None = None,
) -> Report:
    """Import one node log.

    A mapping is remembered for the node; without one, the remembered mapping applies if the file is not a node log of
    the hub's own form. Lines set aside are kept with the file's name and their number. Importing the same file again
    adds nothing.

    Parameters
    ----------
    dry_run
        Only say how each line would be read; nothing is stored, and what is known already is not looked up.
    progress
        Told the bytes read so far.

    Raises
    ------
    PackfoldError
        There is no such node, or the file cannot be read as a log.
    """
    with database.read() as connection:
        node_id = inventory.node_id(connection, node)
        text = mappings.remembered(connection, node_id)
    try:
        with path.open("rb") as stream:
            chosen = mapping or _remembered(stream, text, now_ms)
            chunks = read_log(stream, mapping=chosen, received_ms=now_ms)
            if dry_run:
                return _preview(path.name, chunks)
            return _Import(database, node_id, path, now_ms).run(chunks, stream, mapping, progress)
    except OSError as error:
        raise UsageError(f"The log {path} cannot be read: {error.strerror}.") from None


def _remembered(stream: BinaryIO, text: str | None, now_ms: int) -> LogMapping | None:
    """The remembered mapping, unless the file is a log of the hub's own form."""
    if text is None:
        return None
    try:
        next(read_log(stream, received_ms=now_ms, chunk_readings=1), None)
    except PayloadError:
        return msgspec.json.decode(text, type=LogMapping)
    finally:
        stream.seek(0)
    return None


def _preview(file: str, chunks: Iterator[Chunk]) -> Report:
    report = Report(file)
    for chunk in chunks:
        _count(report, chunk)
        report.taken += chunk.taken
    return report


def _count(report: Report, chunk: Chunk) -> None:
    report.lines += chunk.lines
    report.headers += chunk.headers
    report.blank += chunk.blank
    report.set_aside += chunk.set_aside
    report.remarks += chunk.message.remarks
    for name, times in chunk.message.unknown.items():
        report.unknown[name] = report.unknown.get(name, 0) + times
    times_ms = chunk.message.readings
    if times_ms:
        report.first_ms = min(times_ms) if report.first_ms is None else min(report.first_ms, *times_ms)
        report.last_ms = max(times_ms) if report.last_ms is None else max(report.last_ms, *times_ms)


class _Import:
    def __init__(self, database: Database, node_id: int, path: Path, now_ms: int) -> None:
        self._database = database
        self._node_id = node_id
        self._path = path
        self._now_ms = now_ms
        self._report = Report(path.name)

    def run(
        self,
        chunks: Iterator[Chunk],
        stream: BinaryIO,
        mapping: LogMapping | None,
        progress: Callable[[int], None] | None,
    ) -> Report:
        digest = _sha256(self._path)
        # A file that is no log at all is refused before anything is written.
        first = next(chunks, None)
        if first is None or not (first.taken or first.headers):
            why = f" Line {first.set_aside[0].line}: {first.set_aside[0].detail}" if first and first.set_aside else ""
            raise PayloadError(f"{self._path.name} holds no line of a node log.{why} Nothing was imported.")
        with self._database.write() as connection:
            earlier = imports.known(connection, self._node_id, digest)
            import_id = imports.begin(connection, self._node_id, self._path.name, digest, self._now_ms)
            if mapping is not None:
                mappings.remember(connection, self._node_id, msgspec.json.encode(mapping).decode())
        self._report.import_id = import_id
        while first is not None:
            self._store(first, import_id, keep_aside=earlier is None)
            if progress is not None:
                progress(stream.tell())
            first = next(chunks, None)
        return self._report

    def _store(self, chunk: Chunk, import_id: int, *, keep_aside: bool) -> None:
        report = self._report
        _count(report, chunk)
        origin = aside.Origin("log", self._path.name, self._node_id, None, self._now_ms, import_id)
        remarks, chunk.message.remarks = chunk.message.remarks, []
        with self._database.write() as connection:
            taken = intake.take(connection, [intake.Incoming(origin, b"", chunk.message)])
            if keep_aside:
                aside.keep(connection, origin, [*chunk.set_aside, *remarks])
            outcome = taken.outcomes[0]
            assert outcome is not None
            repeated = _repeated_lines(chunk, outcome)
            report.repeated += repeated
            report.taken += chunk.taken - repeated
            report.remarks += outcome.contradictions
            imports.finish(
                connection,
                import_id,
                lines=report.lines,
                taken=report.taken,
                repeated=report.repeated,
                set_aside=len(report.set_aside),
                span=report.span,
            )


def _repeated_lines(chunk: Chunk, outcome: Outcome) -> int:
    """Lines that told nothing new: their instant was stored already, or an earlier line of the file had it."""
    return max(0, chunk.taken - outcome.new - outcome.filled)


def _sha256(path: Path) -> str:
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def undo(database: Database, import_id: int, now_ms: int) -> int:
    """Take an import back; how many readings went.

    Raises
    ------
    PackfoldError
        There is no such import, or it was taken back before.
    """
    with database.write() as connection:
        return imports.undo(connection, import_id, now_ms)
