"""Charge sessions as a page tells them: when, how much, how they ended, how sure, and on what evidence."""

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from hub.web.days import Row
from hub.web.sentences import confidence, ending
from hub.web.words import MINUS, NBSP, NOT_KNOWN, figure, when


@dataclass(frozen=True, slots=True)
class Session:
    """One charge session.

    Attributes
    ----------
    number
        Its number on the plot.
    tick_ms
        Where the plot ticks it: when the pack was full, or the session's end; ``None`` while it goes on.
    figures
        Name and figure with its unit.
    evidence
        Name and finding of the method that decided how it ended.
    """

    number: int
    pack: str | None
    start_ms: int
    end_ms: int | None
    tick_ms: int | None
    full: bool
    how: str
    sure: str
    words: str
    figures: tuple[tuple[str, str], ...]
    evidence: tuple[tuple[str, str], ...]


def sessions(rows: Iterable[Row], zone: ZoneInfo) -> list[Session]:
    """Rows of charge figures, numbered from 1 in order of time."""
    return [_session(number_, row, zone) for number_, row in enumerate(rows, start=1)]


def _session(number_: int, row: Row, zone: ZoneInfo) -> Session:
    how = ending(row["ended_by"], row["end_ms"], row["full_at_ms"])
    sure = confidence(row["confidence"]) if row["end_ms"] is not None or row["full_at_ms"] is not None else ""
    full = row["full_at_ms"] is not None
    tick_ms = row["full_at_ms"] if full else row["end_ms"]
    at = f"{when(tick_ms, zone)}: " if tick_ms is not None else ""
    return Session(
        number_,
        row["pack"],
        row["start_ms"],
        row["end_ms"],
        tick_ms,
        full,
        how,
        sure,
        f"Charge {number_}, {at}{how}{f', {sure}' if sure else ''}",
        (
            ("Charge into the pack", figure(row["charge_ah"], "Ah", 2)),
            ("Energy into the pack", figure(row["charge_wh"], "Wh", 1)),
            ("Mean rate", figure(row["mean_rate_it"], "It", 2)),
            ("Highest pack temperature", figure(row["peak_temperature_c"], "°C", 1)),
            ("Full at", when(row["full_at_ms"], zone) if full else "was not full"),
            ("Charge after full", figure(row["overcharge_ah"], "Ah", 2) if full else "none: it was not full"),
        ),
        tuple(evidence(row["evidence"])),
    )


# Suffixes of the names in figures and evidence, with the unit they stand for.
UNITS = {
    "_mv_per_cell": "mV a cell",
    "_v_per_cell": "V a cell",
    "_c_per_min": "°C/min",
    "_mv": "mV",
    "_v": "V",
    "_ah": "Ah",
    "_wh": "Wh",
    "_it": "It",
    "_c": "°C",
    "_min": "min",
    "_s": "s",
    "_a": "A",
    "_ohm": "Ω",
}


def evidence(text: str) -> Iterable[tuple[str, str]]:
    """What a method noted, as name and words; whatever its form, nothing of it is lost."""
    try:
        content = json.loads(text) if text else {}
    except ValueError:
        yield "noted", text
        return
    if isinstance(content, Mapping):
        for name, value in content.items():
            words, unit = _name(str(name))
            yield words, _value(value, unit)
    elif content:
        yield "noted", _value(content, "")


def _name(name: str) -> tuple[str, str]:
    for suffix, unit in UNITS.items():
        if name.endswith(suffix) and len(name) > len(suffix):
            return name.removesuffix(suffix).replace("_", " "), unit
    return name.replace("_", " ").replace("-", " "), ""


def _value(value: object, unit: str) -> str:
    """A value of whatever form in words."""
    if isinstance(value, Mapping):
        named = ((_name(str(inner)), content) for inner, content in value.items())
        parts = [f"{words} {_value(content, inner_unit)}" for (words, inner_unit), content in named]
        return "; ".join(parts) or "nothing"
    if isinstance(value, list):
        return ", ".join(_value(item, unit) for item in value) or "nothing"
    if isinstance(value, bool) or value is None:
        return {None: NOT_KNOWN, True: "yes", False: "no"}[value]
    if isinstance(value, int | float):
        text = f"{value:.4g}" if isinstance(value, float) else str(value)
        return f"{text.replace('-', MINUS)}{f'{NBSP}{unit}' if unit else ''}"
    return str(value)
