"""Mapped feeds: messages that are not SenML, read by a description the keeper writes.

A feed says which topics it takes, where the node's name stands, and for each quantity where its value stands: a JSON
Pointer, a column of CSV, or the whole message as one number.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final, Literal

import msgspec

from hub.errors import PayloadError, SettingsError, UsageError
from hub.quantities import BY_NAME
from hub.telemetry import cells, logtime, packs
from hub.telemetry.gather import add_value, set_times_aside
from hub.telemetry.message import Message, Remark, Values
from hub.telemetry.pointer import look_up, pointer_problem
from hub.telemetry.senml import MAX_PAYLOAD_BYTES
from hub.telemetry.tables import to_struct
from hub.telemetry.topics import filter_problem, matches, node_problem
from hub.telemetry.units import conversion, misfit, shortened, suggestion

LARGEST_FACTOR: Final = 1e12
MAX_CSV_LINES: Final = 50_000


class FeedValue(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """Where one quantity stands: ``value * scale + offset`` is in ``unit`` (SenML; the catalogue's where absent).

    ``pointer`` belongs to JSON, ``column`` (counted from 1) to CSV, ``word`` to plain numbers: it is the text of the
    topic level that tells the quantity.
    """

    quantity: str
    pointer: str | None = None
    column: int | None = None
    word: str | None = None
    unit: str | None = None
    scale: float = 1.0
    offset: float = 0.0


class FeedTime(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """Where the time stands, and its form as in a log mapping. Without one the moment of receipt counts."""

    pointer: str | None = None
    column: int | None = None
    format: str | None = None
    timezone: str | None = None
    utc_offset: str | None = None


class Feed(msgspec.Struct, frozen=True, forbid_unknown_fields=True):
    """One feed.

    Attributes
    ----------
    filter
        MQTT topic filter.
    values
        What is read.
    node, node_level, nodes
        A fixed node, or the topic level (counted from 1) that names it; ``nodes`` translates names of that level
        that are not node names of the hub.
    format
        ``json``, ``csv`` or ``number``.
    quantity_level
        For plain numbers: the topic level that tells the quantity.
    delimiter, decimal
        For CSV and plain numbers.
    time
        Where the time stands.
    """

    filter: str
    values: list[FeedValue]
    node: str | None = None
    node_level: int | None = None
    nodes: dict[str, str] = {}
    format: Literal["json", "csv", "number"] = "json"
    quantity_level: int | None = None
    delimiter: str = ","
    decimal: Literal[".", ","] = "."
    time: FeedTime | None = None

    def takes(self, topic: str) -> bool:
        """Whether a message of this topic belongs to the feed."""
        return matches(self.filter, topic)

    def decode(self, topic: str, payload: bytes, received_ms: int) -> tuple[str, Message]:
        """Node and readings of one message.

        Values that are absent or null are left out quietly, for many devices send only what changed; a message in
        which none is found says so in a remark.

        Raises
        ------
        PayloadError
            Where the message cannot be read as a whole.
        """
        node = self.node_of(topic)
        message = Message()
        for row in self._rows(topic, payload):
            time_ms = self._time(row, received_ms)
            values = message.readings.setdefault(time_ms, {})
            if not _take(self, row, message, values, time_ms):
                detail = "The message has none of the values this feed reads; compare a sample with its description."
                message.remarks.append(Remark("malformed", detail, time_ms))
        set_times_aside(message, received_ms)
        return node, message

    def node_of(self, topic: str) -> str:
        """The node a topic speaks of."""
        if self.node is not None:
            return self.node
        assert self.node_level is not None
        levels = topic.split("/")
        word = levels[self.node_level - 1] if self.node_level <= len(levels) else ""
        name = self.nodes.get(word, word)
        if node_problem(name):
            raise PayloadError(
                f"Level {self.node_level} of the topic reads {shortened(word)}, which is no node name; "
                f"add it to the feed's nodes, with the node it stands for."
            )
        return name

    def _rows(self, topic: str, payload: bytes) -> "list[_Row]":
        if len(payload) > MAX_PAYLOAD_BYTES:
            raise PayloadError(f"The message has {len(payload)} bytes and the hub reads at most {MAX_PAYLOAD_BYTES}.")
        if self.format == "json":
            return [_Row(packs.parse_document(payload), (), self.values)]
        try:
            text = payload.decode("utf-8").strip()
        except UnicodeDecodeError:
            raise PayloadError("The message is not UTF-8 text; this feed reads text.") from None
        if self.format == "number":
            return [_Row(text, (), self._by_word(topic))]
        lines = [line for line in text.splitlines() if line.strip()]
        if not lines or len(lines) > MAX_CSV_LINES or (self.time is None and len(lines) > 1):
            raise PayloadError(
                f"The message has {len(lines)} lines; a CSV feed reads one, or up to {MAX_CSV_LINES} where each "
                "carries its time."
            )
        return [_Row(None, tuple(cells.split(line, self.delimiter)), self.values) for line in lines]

    def _by_word(self, topic: str) -> list[FeedValue]:
        if self.quantity_level is None:
            return self.values
        levels = topic.split("/")
        word = levels[self.quantity_level - 1] if self.quantity_level <= len(levels) else ""
        found = [value for value in self.values if value.word == word]
        if not found:
            raise PayloadError(
                f"Level {self.quantity_level} of the topic reads {shortened(word)}, which this feed does not know; "
                "add a value with that word, or narrow the filter."
            )
        return found

    def _time(self, row: "_Row", received_ms: int) -> int:
        if self.time is None:
            return received_ms
        try:
            stated = row.at(self.time.pointer, self.time.column)
        except PayloadError:
            return received_ms
        if stated is None:
            return received_ms
        if isinstance(stated, bool) or not isinstance(stated, str | int | float):
            raise PayloadError("The time of the message is neither text nor number; correct the feed's time.")
        read = logtime.clock(self.time.format, self.time.timezone, self.time.utc_offset)
        return read(stated.strip() if isinstance(stated, str) else str(stated))


def feed_from(table: Mapping[str, Any]) -> Feed:
    """Build and check a feed from a table of the settings.

    Raises
    ------
    SettingsError
        With one sentence on the first thing that does not fit.
    """
    plain = dict(table)
    values = plain.get("values")
    if not isinstance(values, Sequence) or isinstance(values, str) or not values:
        raise SettingsError('A feed needs values, as in values = [{quantity = "pack_voltage", pointer = "/u"}].')
    plain["values"] = [_part(v, FeedValue, f"Value {i} of the feed") for i, v in enumerate(values, 1)]
    if plain.get("time") is not None:
        plain["time"] = _part(plain["time"], FeedTime, "The time of the feed")
    feed = to_struct(plain, Feed, "The feed", SettingsError)
    check_feed(feed)
    return feed


def check_feed(feed: Feed) -> None:
    """Raise `SettingsError` where the parts of a feed contradict each other."""
    for problem in _problems(feed):
        if problem is not None:
            raise SettingsError(f"The feed {shortened(feed.filter)} cannot be used: {problem}")


def _problems(feed: Feed) -> Iterator[str | None]:
    """What is wrong with a feed, in the order in which a keeper would put it right."""
    yield filter_problem(feed.filter)
    if (feed.node is None) == (feed.node_level is None):
        yield "A feed needs either node, or node_level, the topic level that names the node, counted from 1."
    for name in [*feed.nodes.values(), *([feed.node] if feed.node is not None else [])]:
        yield node_problem(name)
    if any(level is not None and level < 1 for level in (feed.node_level, feed.quantity_level)):
        yield "Topic levels are counted from 1."
    yield from _format_problems(feed)
    for value in feed.values:
        yield _value_problem(feed, value)
    quantities = [value.quantity for value in feed.values]
    if feed.format != "number" and len(set(quantities)) < len(quantities):
        yield "The feed gives a quantity twice; keep one place for each."
    if feed.time is not None:
        yield _time_problem(feed, feed.time)


def _format_problems(feed: Feed) -> Iterator[str]:
    if feed.format == "csv" and feed.delimiter not in {*cells.DELIMITERS, "|", " "}:
        yield "The delimiter of a feed is one of comma, semicolon, tab, | and space."
    if feed.format == "csv" and feed.delimiter == feed.decimal:
        yield "Delimiter and decimal sign are both a comma; choose another delimiter."
    if feed.quantity_level is not None and feed.format != "number":
        yield 'quantity_level goes with format = "number"; JSON and CSV name their quantities by place.'
    if feed.format == "number" and feed.quantity_level is None and len(feed.values) > 1:
        yield "Plain numbers of several quantities need quantity_level, and a word for each value."


@dataclass(frozen=True, slots=True)
class Explained:
    """How one value of a sample is read.

    Attributes
    ----------
    quantity
        Name in the catalogue, or ``time``.
    place
        Pointer, column or topic word.
    found
        What stands there, as text; ``None`` where nothing does.
    value
        The value in ``unit``; for ``time`` the instant in UTC milliseconds. ``None`` where it cannot be used.
    unit
        The catalogue's unit; ``ms`` for ``time``.
    remark
        Why it cannot be used; empty where it can.
    """

    quantity: str
    place: str
    found: str | None
    value: float | None
    unit: str
    remark: str = ""


def explain(feed: Feed, topic: str, payload: bytes, received_ms: int) -> list[Explained]:
    """How the first reading of a sample would be read, place by place, for the page on which a feed is tried out.

    Raises
    ------
    PayloadError
        Where the topic is not the feed's, or the message cannot be read as a whole.
    """
    if not feed.takes(topic):
        raise PayloadError(f"The topic {shortened(topic)} is not taken by the filter {shortened(feed.filter)}.")
    feed.node_of(topic)
    row = feed._rows(topic, payload)[0]  # noqa: SLF001 - the same module
    rows = []
    if feed.time is not None:
        found = row.peek(feed.time.pointer, feed.time.column)
        place = _place(feed.time.pointer, feed.time.column, None)
        try:
            rows.append(Explained("time", place, found, feed._time(row, received_ms), "ms"))  # noqa: SLF001
        except PayloadError as problem:
            rows.append(Explained("time", place, found, None, "ms", str(problem)))
    for value in row.values:
        message, read = Message(), Values()
        _take_one(feed, value, row, message, read, received_ms)
        remark = message.remarks[0].detail if message.remarks else ""
        found = row.peek(value.pointer, value.column)
        if found is None and not remark:
            remark = "There is nothing at this place in the sample."
        place = _place(value.pointer, value.column, value.word)
        unit = BY_NAME[value.quantity].unit
        rows.append(Explained(value.quantity, place, found, read.get(value.quantity), unit, remark))
    return rows


@dataclass(frozen=True, slots=True)
class _Row:
    """One reading of a message before it is read: a document, or the cells of a line."""

    document: Any
    cells: tuple[str, ...]
    values: list[FeedValue]

    def at(self, pointer: str | None, column: int | None) -> Any:  # noqa: ANN401 - anything JSON can say
        if pointer is not None:
            return look_up(self.document, pointer)
        if column is None:
            return self.document
        if column > len(self.cells):
            raise PayloadError(f"The line has {len(self.cells)} columns and the feed reads column {column}.")
        return self.cells[column - 1].strip() or None

    def peek(self, pointer: str | None, column: int | None) -> str | None:
        try:
            found = self.at(pointer, column)
        except PayloadError:
            return None
        return None if found is None else str(found)[:100]


def _take(feed: Feed, row: _Row, message: Message, values: Values, time_ms: int) -> bool:
    """Read all values of a row; return whether anything stood in any of their places."""
    return sum(_take_one(feed, value, row, message, values, time_ms) for value in row.values) > 0


def _take_one(feed: Feed, value: FeedValue, row: _Row, message: Message, values: Values, time_ms: int) -> bool:
    try:
        found = row.at(value.pointer, value.column)
    except PayloadError:
        return False
    if found is None:
        return False
    stated = _number(feed, found)
    unit = conversion(BY_NAME[value.quantity], value.unit)
    assert unit is not None
    if stated is None:
        detail = f"{value.quantity} reads {shortened(str(found)[:100])}, which is no number; it was left out."
        message.remarks.append(Remark("malformed", detail, time_ms, value.quantity))
        return True
    add_value(message, values, time_ms, value.quantity, unit(stated * value.scale + value.offset))
    return True


def _number(feed: Feed, found: object) -> float | None:
    if isinstance(found, str):
        try:
            return cells.number(found.strip(), feed.decimal)
        except ValueError:
            return None
    return packs.number(found)


def _place(pointer: str | None, column: int | None, word: str | None) -> str:
    if pointer is not None:
        return pointer
    return f"column {column}" if column is not None else word or "message"


def _part(value: object, kind: type[Any], where: str) -> Any:  # noqa: ANN401 - an instance of kind
    if not isinstance(value, Mapping):
        raise SettingsError(f"{where} must be a table.")
    return to_struct(value, kind, where, SettingsError)


def _value_problem(feed: Feed, value: FeedValue) -> str | None:
    quantity = BY_NAME.get(value.quantity)
    if quantity is None:
        return f"There is no quantity {shortened(value.quantity)}{suggestion(value.quantity, list(BY_NAME))}."
    if conversion(quantity, value.unit) is None:
        return misfit(quantity, value.unit or "")
    if not (0 < abs(value.scale) <= LARGEST_FACTOR and abs(value.offset) <= LARGEST_FACTOR):
        return f"The scale of {value.quantity} must be a finite number other than 0, its offset finite."
    wants_word = feed.quantity_level is not None
    if (value.word is not None) != wants_word:
        return f"{value.quantity} needs a word exactly where the feed has quantity_level."
    return _place_problem(feed, value.pointer, value.column, value.quantity)


def _place_problem(feed: Feed, pointer: str | None, column: int | None, what: str) -> str | None:
    if (pointer is not None) != (feed.format == "json") or (column is not None) != (feed.format == "csv"):
        wanted = {"json": "a pointer and no column", "csv": "a column and no pointer", "number": "neither"}
        return f"{what} needs {wanted[feed.format]}, as the feed's format is {feed.format}."
    if column is not None and column < 1:
        return "Columns are counted from 1."
    return pointer_problem(pointer) if pointer is not None else None


def _time_problem(feed: Feed, time: FeedTime) -> str | None:
    if feed.format == "number":
        return "A plain number has no room for a time; leave time out."
    problem = _place_problem(feed, time.pointer, time.column, "time")
    if problem:
        return problem
    try:
        logtime.check_format(time.format, time.timezone, time.utc_offset, None)
    except UsageError as wrong:
        return str(wrong)
    return None
