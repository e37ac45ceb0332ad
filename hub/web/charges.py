"""Charge sessions as a page tells them: when, how much, how they ended, how sure, and on what evidence."""

import json
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

from hub.web.days import Row
from hub.web.sentences import ending
from hub.web.words import MINUS, NBSP, NOT_KNOWN, duration, figure, moment, when


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
    words: str
    figures: tuple[tuple[str, str], ...]
    evidence: tuple[tuple[str, str], ...]


def sessions(rows: Iterable[Row], zone: ZoneInfo) -> list[Session]:
    """Rows of charge figures, numbered from 1 in order of time."""
    return [_session(number_, row, zone) for number_, row in enumerate(rows, start=1)]


def _session(number_: int, row: Row, zone: ZoneInfo) -> Session:
    how = ending(row["ended_by"], row["end_ms"], row["full_at_ms"], row["confidence"])
    full = row["full_at_ms"] is not None
    tick_ms = row["full_at_ms"] if full else row["end_ms"]
    at = f", {when(tick_ms, zone)}" if tick_ms is not None else ""
    return Session(
        number_,
        row["pack"],
        row["start_ms"],
        row["end_ms"],
        tick_ms,
        full,
        how,
        f"Charge {number_}{at}. {how}.",
        (
            ("Charge into the pack", figure(row["charge_ah"], "Ah", 2)),
            ("Energy into the pack", figure(row["charge_wh"], "Wh", 1)),
            ("Mean rate", figure(row["mean_rate_it"], "It", 2)),
            ("Highest pack temperature", figure(row["peak_temperature_c"], "°C", 1)),
            ("Full at", when(row["full_at_ms"], zone) if full else "was not full"),
            ("Charge after full", figure(row["overcharge_ah"], "Ah", 2) if full else "none: it was not full"),
        ),
        tuple(evidence(row["evidence"], zone)),
    )


SECONDS_READABLE = 120
PLAIN_BELOW = 1e9

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


# What the rules of the end of charge look at, in words.
RULES = {
    "charge-held": "Charge it took",
    "charge-returned": "Charge returned since it was last full",
    "charger-cut": "Current after the charger's cut",
    "heating": "Charging power that became heat",
    "overcharge": "Charge after full",
    "temperature-limit": "Temperature at the end",
    "temperature-slope": "Warming",
    "timer": "Duration",
    "voltage-drop": "Drop from the highest voltage",
    "voltage-level": "Highest voltage",
    "voltage-plateau": "Charge during which the voltage stood still",
}


def evidence(text: str, zone: ZoneInfo) -> Iterator[tuple[str, str]]:
    """What a method noted, as name and words; whatever its form, nothing of it is lost."""
    try:
        content = json.loads(text) if text else {}
    except ValueError:
        yield "Noted", text
        return
    if isinstance(content, Mapping):
        for name, value in content.items():
            words, unit = _name(str(name))
            sign = isinstance(value, Mapping) and value.keys() >= {"value", "limit", "met", "unit"}
            yield (RULES.get(name, words), _sign(value, zone)) if sign else (words, _value(value, unit))
    elif content:
        yield "Noted", _value(content, "")


def _sign(sign: Mapping[str, Any], zone: ZoneInfo) -> str:
    """One rule's finding: what it measured, its limit, whether and when that was met, and what that speaks for."""
    unit = str(sign["unit"] or "").replace("per cell", "a cell")
    at_ms, weight = sign.get("at_ms"), sign.get("weight") or 0
    at = f" at {moment(at_ms, zone).clock}{NBSP}{moment(at_ms, zone).zone}" if sign["met"] and at_ms is not None else ""
    met = "met" if sign["met"] else "not met"
    parts = [_value(sign["value"], unit), f"limit {_value(sign['limit'], unit)}", f"{met}{at}"]
    if weight:
        parts.append(f"speaks {'for' if weight > 0 else 'against'} a full pack")
    return "; ".join(parts)


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
        return _number(value, unit)
    return str(value)


def _number(value: float, unit: str) -> str:
    """Four figures, enough to compare a finding with its limit; long times in minutes and hours."""
    if unit == "s" and value >= SECONDS_READABLE:
        return duration(1000 * value)
    text = f"{value:.4g}" if isinstance(value, float) else str(value)
    if "e+" in text and abs(value) < PLAIN_BELOW:
        text = f"{value:.0f}"
    return f"{text.replace('-', MINUS)}{f'{NBSP}{unit}' if unit else ''}"
