"""The days of a node as a table: every figure with its unit, and the reason where one is not known."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from zoneinfo import ZoneInfo

from hub.store.inventory import Node
from hub.web.days import Row
from hub.web.sentences import SEEN_ENOUGH
from hub.web.words import NBSP, NOT_KNOWN, listed, moment, number


@dataclass(frozen=True, slots=True)
class Column:
    """One figure of a day: its column in the store, what the page calls it, its unit and decimals."""

    key: str
    name: str
    unit: str
    decimals: int
    uncertainty: str = ""

    @property
    def heading(self) -> str:
        """Name and unit."""
        return f"{self.name}, {self.unit}"


COLUMNS = (
    Column("charge_ah", "Charge in", "Ah", 2, "charge_uncertainty_ah"),
    Column("discharge_ah", "Charge out", "Ah", 2, "discharge_uncertainty_ah"),
    Column("charge_wh", "Energy in", "Wh", 1),
    Column("discharge_wh", "Energy out", "Wh", 1),
    Column("load_wh", "Load", "Wh", 1),
    Column("panel_wh", "Panel", "Wh", 1),
    Column("clear_sky_wh", "Clear sky", "Wh", 1),
    Column("harvest_ratio", "Of clear sky", "%", 0),
    Column("pack_temperature_max_c", "Warmest", "°C", 1),
    Column("cell_voltage_min_v", "Lowest cell", "V", 3),
    Column("cell_voltage_max_v", "Highest cell", "V", 3),
)


@dataclass(frozen=True, slots=True)
class Cell:
    """A figure in the table; ``note`` is the letter of the reason where it is not known."""

    name: str
    text: str
    note: str = ""


@dataclass(frozen=True, slots=True)
class DayRow:
    """A day."""

    date: str
    cells: tuple[Cell, ...]


@dataclass(slots=True)
class Table:
    """All rows, newest first, and the reasons by their letter."""

    rows: list[DayRow] = field(default_factory=list)
    notes: dict[str, str] = field(default_factory=dict)

    def note(self, reason: str) -> str:
        """The letter of a reason, a new one for a new reason."""
        for letter, known in self.notes.items():
            if known == reason:
                return letter
        letter = chr(ord("a") + len(self.notes))
        self.notes[letter] = reason
        return letter


def table(days: Iterable[Row], node: Node, zone: ZoneInfo, now_ms: int) -> Table:
    """Day figures, oldest first, as a table, newest first."""
    found = Table()
    for day in reversed(list(days)):
        cells = [
            Cell("Pack", day["pack"] or "none fitted"),
            Cell("Seen, %", number(100 * day["coverage"])),
            _full(found, day, zone, now_ms),
        ]
        cells += [_cell(found, column, day, node) for column in COLUMNS]
        found.rows.append(DayRow(day["date"], tuple(cells)))
    return found


def headings() -> Sequence[str]:
    """Names of the columns after the date and the pack."""
    return ("Pack", "Seen, %", "Full", *(column.heading for column in COLUMNS))


def _full(found: Table, day: Row, zone: ZoneInfo, now_ms: int) -> Cell:
    if day["full_at_ms"] is not None:
        at = moment(day["full_at_ms"], zone)
        return Cell("Full", f"{at.clock}{NBSP}{at.zone}")
    if day["pack"] is None:
        return Cell("Full", NOT_KNOWN, found.note(NO_PACK))
    if day["end_ms"] > now_ms:
        return Cell("Full", "not yet")
    if day["coverage"] < SEEN_ENOUGH:
        return Cell("Full", NOT_KNOWN, found.note("Too little of the day was seen to say that the pack did not fill."))
    return Cell("Full", "did not fill")


def _cell(found: Table, column: Column, day: Row, node: Node) -> Cell:
    value = day[column.key]
    if value is None:
        return Cell(column.heading, NOT_KNOWN, found.note(reason(column.key, day, node)))
    text = number(100 * value if column.unit == "%" else value, column.decimals)
    spread = day[column.uncertainty] if column.uncertainty else None
    if spread is not None:
        text += f"{NBSP}±{NBSP}{number(spread, column.decimals)}"
    return Cell(column.heading, text)


NO_PACK = "No pack was fitted. Add a fitting to the inventory, and the day is computed again."


REASONS = {
    "panel_wh": "The node sent no panel voltage and current that day.",
    "harvest_ratio": (
        "It needs the panel's energy, that of the clear sky, and hours in which the panel limits the charging."
    ),
    "load_wh": "The node sent no load current that day, and no load is stated for it in the inventory.",
    "cell_voltage_min_v": "The node sent no usable pack voltage that day.",
    "cell_voltage_max_v": "The node sent no usable pack voltage that day.",
    "pack_temperature_max_c": "The node sent no usable pack temperature that day.",
}
UNSEEN_LOAD = "The node's sensor does not see the load. State standing_load_a in the inventory."
NO_CURRENT = "The node sent no usable pack voltage and current that day."


def reason(key: str, day: Row, node: Node) -> str:
    """Why a figure of a day is not known, and what would make it known."""
    if key == "clear_sky_wh":
        return _no_clear_sky(node)
    if key.startswith("discharge") and node.current_sensing == "charge-only":
        return UNSEEN_LOAD
    if key.startswith("cell_voltage") and day["pack"] is None:
        return NO_PACK
    return REASONS.get(key, NO_CURRENT)


def _no_clear_sky(node: Node) -> str:
    stated = (("power", node.panel_power_w), ("tilt", node.panel_tilt_deg), ("azimuth", node.panel_azimuth_deg))
    missing = [words for words, value in stated if value is None]
    if not missing:
        return "The clear sky of that day has not been computed."
    return f"The panel's {listed(missing)} {'is' if len(missing) == 1 else 'are'} not in the inventory."
