"""The one catalogue of measured quantities: name, unit, resolution and range.

Every other part asks this table instead of knowing a quantity by itself: the decoders for units, the store
for the fixed-point resolution, the screening for the range, the pages for the unit behind a number.
Current is positive into the pack.
"""

from dataclasses import dataclass
from typing import Final


@dataclass(frozen=True, slots=True)
class Quantity:
    """One measured quantity.

    Attributes
    ----------
    name
        The name in messages, columns and code.
    unit
        The unit inside the hub, as people write it: V, A, Ah, °C, s, dBm or ratio.
    senml_unit
        The unit of the SenML registry that stands for it; ``None`` where the registry has no such unit.
    decimals
        Decimal places kept; a stored integer is the value times ``10 ** decimals``.
    low, high
        The range a working sensor of the kind described in the node interface can report. Values outside are
        kept as they came and never used for a figure.
    label
        What a page calls it.
    """

    name: str
    unit: str
    senml_unit: str | None
    decimals: int
    low: float
    high: float
    label: str

    @property
    def scale(self) -> int:
        """Stored integers per unit."""
        return int(10**self.decimals)

    @property
    def column(self) -> str:
        """The name with its unit, for files that leave typed code."""
        suffix = COLUMN_SUFFIX.get(self.unit, "")
        return f"{self.name}_{suffix}" if suffix else self.name


COLUMN_SUFFIX: Final = {"V": "V", "A": "A", "Ah": "Ah", "°C": "C", "s": "s", "dBm": "dBm"}

# Resolutions follow the parts: a 12-bit shunt current monitor resolves 4 mV and, on 0.1 ohm, 0.1 mA; a one-wire
# digital thermometer 0.0625 °C, which has four decimals. So every step of such a part is kept exactly, and voltages and
# currents one decimal finer, for nodes that send averages.
# Ranges: bus voltage register of such a monitor 0..32 V with room for larger packs; thermometer -55..125 °C with the
# disconnect marker -127 °C and colder nonsense outside it (common practice of drivers, no source).
CATALOGUE: Final[tuple[Quantity, ...]] = (
    Quantity("pack_voltage", "V", "V", 4, 0.0, 100.0, "Pack voltage"),
    Quantity("pack_current", "A", "A", 5, -100.0, 100.0, "Pack current"),
    Quantity("pack_temperature", "°C", "Cel", 4, -55.0, 125.0, "Pack temperature"),
    Quantity("air_temperature", "°C", "Cel", 4, -55.0, 125.0, "Air temperature"),
    Quantity("panel_voltage", "V", "V", 4, 0.0, 200.0, "Panel voltage"),
    Quantity("panel_current", "A", "A", 5, -1.0, 100.0, "Panel current"),
    Quantity("load_current", "A", "A", 5, -1.0, 100.0, "Load current"),
    Quantity("charger_duty", "ratio", "/", 4, 0.0, 1.0, "Charger duty"),
    Quantity("charge_target", "A", "A", 5, 0.0, 100.0, "Charge target"),
    Quantity("charge_in", "Ah", "Ah", 6, 0.0, 1e7, "Charge in, running total"),
    Quantity("charge_out", "Ah", "Ah", 6, 0.0, 1e7, "Charge out, running total"),
    Quantity("signal", "dBm", "dBm", 2, -200.0, 60.0, "Link strength"),
    Quantity("uptime", "s", "s", 3, 0.0, 1e10, "Time since restart"),
)

BY_NAME: Final[dict[str, Quantity]] = {q.name: q for q in CATALOGUE}
NAMES: Final[tuple[str, ...]] = tuple(BY_NAME)

# Three plain records of a message that are no measurements: restarts so far, the message's number within the boot, and
# the lowest number the node still holds, so that a receipt need not wait for what is gone for good.
MESSAGE_FIELDS: Final = ("boot", "sequence", "oldest")
