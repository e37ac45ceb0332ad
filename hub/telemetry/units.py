"""Units of messages and of log headers to the one unit each quantity has inside the hub.

Primary units are those of the SenML registry (RFC 8428, section 12.1), secondary units those of RFC 8798, section 3.
Three more are read although no registry has them, because small firmwares write them: ``mAh``, ``uA`` and ``kV``.
"""

import difflib
from dataclasses import dataclass
from typing import Final

from hub.quantities import BY_NAME, CATALOGUE, Quantity


@dataclass(frozen=True, slots=True)
class Conversion:
    """A linear conversion into the catalogue's unit: ``value * multiply / divide + offset``.

    Numerator and denominator are kept apart because dividing by 1000 rounds correctly and multiplying by 0.001 does
    not: 10410 mV must become the very number that 10.41 V is.
    """

    multiply: float = 1.0
    divide: float = 1.0
    offset: float = 0.0

    def __call__(self, value: float) -> float:
        """The value in the catalogue's unit."""
        return value * self.multiply / self.divide + self.offset


SAME: Final = Conversion()

# Catalogue unit -> unit as written in a SenML record -> conversion.
SENML: Final[dict[str, dict[str, Conversion]]] = {
    "V": {"V": SAME, "mV": Conversion(divide=1000), "kV": Conversion(multiply=1000)},
    "A": {"A": SAME, "mA": Conversion(divide=1000), "uA": Conversion(divide=1_000_000)},
    "°C": {"Cel": SAME, "K": Conversion(offset=-273.15)},
    "Ah": {"Ah": SAME, "mAh": Conversion(divide=1000), "C": Conversion(divide=3600)},
    "s": {
        "s": SAME,
        "ms": Conversion(divide=1000),
        "min": Conversion(multiply=60),
        "h": Conversion(multiply=3600),
    },
    # "%" is, by history, the plain ratio in the registry; a percentage is "/100" (RFC 8428, section 12.1, note 1).
    "ratio": {"/": SAME, "%": SAME, "/100": Conversion(divide=100), "/1000": Conversion(divide=1000)},
    # RFC 8798 has dBm = dBW - 30, so a level in dBW reads 30 higher in dBm.
    "dBm": {"dBm": SAME, "dBW": Conversion(offset=30)},
}

# Symbols of other kinds of quantity, so that a misfit can be told from a slip of the pen.
OTHER_UNITS: Final = frozenset(
    {"W", "kW", "J", "Wh", "kWh", "Ohm", "W/m2", "count", "%RH", "%EL", "EL", "Hz", "1/s", "dB", "ppm"}
)

# A longer word is no slip of the pen, and comparing it would take time.
LONGEST_SLIP: Final = 8

# Endings of column names. A header has no room for "/" and "%", and its "C" is what the quantity makes of it.
HEADER: Final[dict[str, dict[str, Conversion]]] = {
    "V": SENML["V"],
    "A": SENML["A"],
    "°C": {"C": SAME, "degC": SAME, **SENML["°C"]},
    "Ah": SENML["Ah"],
    "s": SENML["s"],
    "ratio": {"ratio": SAME, "percent": Conversion(divide=100), "permille": Conversion(divide=1000)},
    "dBm": SENML["dBm"],
}


def conversion(quantity: Quantity, unit: str | None) -> Conversion | None:
    """How a SenML value of ``quantity`` in ``unit`` becomes the catalogue's unit.

    A missing unit means the catalogue's own. ``None`` means that the unit cannot belong to the quantity; `misfit`
    then says so in words.
    """
    return SAME if unit is None else SENML[quantity.unit].get(unit)


def misfit(quantity: Quantity, unit: str) -> str:
    """One sentence for the keeper about a unit that cannot belong to the quantity."""
    fitting = list(SENML[quantity.unit])
    advice = f"send it in {_either(fitting)}"
    elsewhere = unit in OTHER_UNITS or any(unit in units for units in SENML.values())
    if (
        not elsewhere
        and len(unit) <= LONGEST_SLIP
        and (close := difflib.get_close_matches(unit.casefold(), [u.casefold() for u in fitting], 1))
    ):
        advice = f"write {next(u for u in fitting if u.casefold() == close[0])}"
    kind = "is a unit of something else" if elsewhere else "is not a unit the hub knows"
    return f"{quantity.name} came in {shortened(unit)}, which {kind}; {advice}."


def split_column(heading: str) -> tuple[Quantity, Conversion] | None:
    """Quantity and conversion of a column named ``quantity_unit``, as in ``pack_voltage_mV``.

    A bare quantity name stands for the catalogue's unit. ``None`` where the name is no quantity of the catalogue or
    its ending is no unit of that quantity; `column_problem` tells the two apart.
    """
    for quantity in CATALOGUE:
        if heading == quantity.name:
            return quantity, SAME
        if heading.startswith(f"{quantity.name}_"):
            found = HEADER[quantity.unit].get(heading.removeprefix(f"{quantity.name}_"))
            return None if found is None else (quantity, found)
    return None


def column_problem(heading: str) -> str:
    """One sentence about a heading that `split_column` does not know."""
    for quantity in CATALOGUE:
        if heading.startswith(f"{quantity.name}_"):
            endings = _either([f"_{unit}" for unit in HEADER[quantity.unit]])
            return f"The column {shortened(heading)} ends in no unit of {quantity.name}; it may end in {endings}."
    return f"The column {shortened(heading)} is no quantity of the hub{suggestion(heading, list(BY_NAME))}."


def suggestion(word: str, known: list[str]) -> str:
    """An ending for a sentence about an unknown word: the nearest known one, or nothing where none is close."""
    close = difflib.get_close_matches(word, known, 1)
    return f"; the nearest name is {close[0]}" if close else ""


def shortened(text: str, limit: int = 60) -> str:
    """Text from outside, quoted, printable and of bounded length, for use inside a sentence."""
    clean = "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text[: limit + 1])
    return f"“{clean[:limit]}…”" if len(clean) > limit else f"“{clean}”"


def _either(words: list[str]) -> str:
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} or {words[-1]}"
