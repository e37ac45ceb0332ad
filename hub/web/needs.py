"""What needs a person, most urgent first, and what to do about it. Pure rules on what is known of a node."""

from collections.abc import Iterable
from dataclasses import dataclass

from hub.quantities import BY_NAME
from hub.web import cautions
from hub.web.glance import Glance, Latest
from hub.web.sentences import is_silent, never_filled
from hub.web.words import HOUR_MS, count, duration, figure, listed, when

# End of the makers' charging range, and the highest of the usual cut-offs (Panasonic's charge handbook for these
# cells; Battery University, article 410).
HOT_C = 45.0
VERY_HOT_C = 55.0
# Continuous low-rate charge that makers allow, in It (one maker's sheet: 0.05 to 0.1; others less).
TRICKLE_IT = 0.05
# A value older than this tells nothing about now.
PRESENT_MS = HOUR_MS
CHARGING_A = 0.01
LAST_URGENT = 4
# Below this a cell is past the knee of its discharge curve (common practice, no source).
KNEE_V = 1.1


@dataclass(frozen=True, slots=True)
class Need:
    """One thing that needs a person.

    Attributes
    ----------
    rank
        Smaller is more urgent.
    kind
        Short stable word for it.
    node
        The node it is about; empty where it is about the hub.
    headline
        What is the matter, one sentence.
    advice
        What to do.
    cautions
        What may happen and what not to do, where it can hurt.
    """

    rank: int
    kind: str
    node: str
    headline: str
    advice: str
    cautions: tuple[str, ...] = ()

    @property
    def urgent(self) -> bool:
        """Whether it should not wait."""
        return self.rank <= LAST_URGENT


def needs(glances: Iterable[Glance], now_ms: int) -> list[Need]:
    """What needs a person, most urgent first, then by node."""
    found: list[Need] = []
    for glance in glances:
        found += [
            need
            for rule in (_heat, _frost, _silent, _never_full, _sensors, _set_aside, _no_pack)
            if (need := rule(glance, now_ms)) is not None
        ]
    return sorted(found, key=lambda need: (need.rank, need.node, need.kind))


def _present(latest: Latest | None, now_ms: int) -> float | None:
    return latest.value if latest is not None and now_ms - latest.time_ms <= PRESENT_MS else None


def _who(glance: Glance) -> str:
    return f"Pack {glance.pack.label} on {glance.node.name}" if glance.pack else f"The pack on {glance.node.name}"


def _heat(glance: Glance, now_ms: int) -> Need | None:
    hot = _present(glance.latest.get("pack_temperature"), now_ms)
    if hot is not None and hot >= HOT_C:
        current = _present(glance.latest.get("pack_current"), now_ms)
        air = _present(glance.latest.get("air_temperature"), now_ms)
        text = f"{_who(glance)} is {figure(hot, '°C')}"
        text += " while charging" if current is not None and current > CHARGING_A else ""
        text += f", {figure(hot - air, '°C')} above the air" if air is not None and hot - air >= 1 else ""
        very = hot >= VERY_HOT_C
        advice = (
            "That is as hot as makers let a pack get at all. Stop the charge if you can reach it safely: cover the "
            "panel or open its isolator. Otherwise stay away and let it cool."
            if very
            else "Makers end a charge between 45 °C and 55 °C. Stop the charge if you can reach it safely, then find "
            "out why: too much current, a charge that missed its end, or a box in the sun."
        )
        return Need(0 if very else 1, "overheating", glance.node.name, f"{text}.", advice, cautions.HOT)
    peak = glance.peak_temperature
    if peak is not None and peak.value >= HOT_C and now_ms - peak.time_ms <= 24 * HOUR_MS:
        return Need(
            2,
            "overheating",
            glance.node.name,
            f"{_who(glance)} reached {figure(peak.value, '°C')} in the last 24 hours, "
            f"within a quarter of an hour of {when(peak.time_ms, glance.zone, now_ms)}.",
            f"It is {figure(hot, '°C')} now. See on its page what charged it then; shade the box or lower the current "
            "before the next sunny day."
            if hot is not None
            else "What it is now is not known. Keep your distance until it has been heard again.",
            cautions.HOT,
        )
    return None


def _frost(glance: Glance, now_ms: int) -> Need | None:
    cold = _present(glance.latest.get("pack_temperature"), now_ms)
    current = _present(glance.latest.get("pack_current"), now_ms)
    if cold is None or current is None or glance.pack is None or cold >= 0:
        return None
    if current <= TRICKLE_IT * glance.pack.rated_capacity_ah:
        return None
    return Need(
        3,
        "frost-charging",
        glance.node.name,
        f"{_who(glance)} is being charged with {figure(current, 'A', 2)} at {figure(cold, '°C')}.",
        "Below 0 °C a pack should get a trickle at most. Lower the current, or let the charger wait for warmth.",
        cautions.FROST,
    )


def _silent(glance: Glance, now_ms: int) -> Need | None:
    if glance.last_ms is None or not is_silent(glance.node, glance.last_ms, now_ms):
        return None
    quiet = duration(now_ms - glance.last_ms)
    voltage = glance.latest.get("cell_voltage")
    last_words = ""
    if voltage is not None:
        last_words = f" Its last cell voltage was {figure(voltage.value, 'V', 2)}"
        last_words += (
            ": the pack may be empty."
            if voltage.value < KNEE_V
            else ", so the pack was not empty: look at the link first."
        )
    said = " It said goodbye itself." if glance.presence == "offline" else ""
    return Need(
        4,
        "node-silent",
        glance.node.name,
        f"{glance.node.name} has been silent for {quiet}, since {when(glance.last_ms, glance.zone, now_ms)}.",
        f"It usually reports every {duration(glance.node.interval_s * 1000)}.{said}{last_words} "
        "Check its supply, its antenna and its way to the broker.",
        cautions.VISIT,
    )


def _never_full(glance: Glance, _now_ms: int) -> Need | None:
    if len(glance.days) < 7 or not never_filled(glance.days, glance.today):  # noqa: PLR2004 - a week
        return None
    return Need(
        5,
        "not-filling",
        glance.node.name,
        f"{_who(glance)} has not filled once in {count(len(glance.days), 'day')}.",
        "Look at its harvest: a dirty or shaded panel, a load that grew, or a dull week. Charge the pack on a bench "
        "if the load must not fail.",
    )


REASONS = {
    "disconnected": "no sensor answered",
    "power-on": "the value a thermometer shows before its first measurement",
    "out-of-range": "beyond what the sensor can measure",
    "spike": "single values far from their neighbours",
    "frozen": "values that stand still where they should move",
    "saturated": "at the end of the sensor's range, so the true value is at least that",
}


# How often in a week before it is a fault: a thermometer that starts up says one wrong value, a load that switches may
# reach the end of a range (common practice, no source).
OFTEN = {"power-on": 12, "saturated": 12, "spike": 6, "disconnected": 3, "out-of-range": 3, "frozen": 1}


def _sensors(glance: Glance, _now_ms: int) -> Need | None:
    often = {key: times for key, times in glance.findings.items() if times >= OFTEN.get(key[1], 1)}
    if not often:
        return None
    parts = [
        f"{BY_NAME[quantity].label.lower() if quantity in BY_NAME else quantity}: {count(times, 'value')}, "
        f"{REASONS.get(reason, reason)}"
        for (quantity, reason), times in sorted(often.items())
    ]
    return Need(
        6,
        "sensor-fault",
        glance.node.name,
        f"Sensors of {glance.node.name} gave values in the last 7 days that cannot be right.",
        f"They were kept out of every figure ({'; '.join(parts)}). Check the sensor's plug and cable if it goes on.",
    )


ASIDE_REASONS = {
    "malformed": "not readable",
    "unit": "a unit that does not fit",
    "not-finite": "not a number",
    "future": "dated in the future",
    "too-old": "dated before 2020",
    "out-of-range": "beyond the sensor's range",
    "contradiction": "contradicts what is stored",
    "unknown-node": "from a node nobody knows",
    "too-large": "too large",
    "line": "lines of a log that could not be read",
}


def _set_aside(glance: Glance, _now_ms: int) -> Need | None:
    if not glance.set_aside:
        return None
    parts = [
        f"{times}{chr(0xA0)}{ASIDE_REASONS.get(reason, reason)}" for reason, times in sorted(glance.set_aside.items())
    ]
    total = sum(glance.set_aside.values())
    return Need(
        7,
        "set-aside",
        glance.node.name,
        f"{count(total, 'thing')} from {glance.node.name} could not be used in the last 7 days.",
        f"They are kept with their reason: {listed(parts)}. Its page lists them under “Set aside”. "
        "Correct the node or its clock.",
    )


def _no_pack(glance: Glance, _now_ms: int) -> Need | None:
    if glance.pack is not None or glance.last_ms is None:
        return None
    return Need(
        8,
        "no-fitting",
        glance.node.name,
        f"{glance.node.name} sends readings, but no pack is fitted to it.",
        "Add a [[fitting]] to the inventory file, with the time the pack was put in, and load it: "
        "the days since then are computed again.",
    )
