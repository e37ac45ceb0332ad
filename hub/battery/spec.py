"""What a computation must know about a node, a pack and the stretch of time it is asked for."""

from dataclasses import dataclass
from typing import Literal

from hub.errors import InventoryError, UsageError

Rule = Literal["trapezoid", "hold"]


@dataclass(frozen=True, slots=True)
class PackSpec:
    """A pack: ``rated_capacity_ah`` is that of the whole pack, so 1 It is as many amperes (IEC 61434)."""

    label: str
    cells_in_series: int
    cells_in_parallel: int
    rated_capacity_ah: float

    def __post_init__(self) -> None:
        if self.cells_in_series < 1 or self.cells_in_parallel < 1 or not self.rated_capacity_ah > 0.0:
            raise InventoryError(
                f"Pack {self.label} needs at least one cell and a rated capacity above 0 Ah. Correct the inventory."
            )


@dataclass(frozen=True, slots=True)
class NodeSpec:
    """A node's sensing, with the standard uncertainties (k = 1) of its sensors.

    The defaults describe a 12-bit shunt current monitor on 0.1 ohm and a one-wire digital thermometer. Limits of
    error become standard uncertainties by division by the square root of 3 (rectangular, JCGM 100:2008, 4.3.7).

    Attributes
    ----------
    name, interval_s
        The node and its nominal reading interval.
    current_sensing
        ``net``: the sensor sees all current of the pack; ``charge-only``: it does not see the load.
    standing_load_a
        Assumed load where it is not seen and not measured; 0 means not known.
    current_gain_error
        1 % accuracy class of such a monitor (A grade) together with a 1 % shunt: sqrt(2) * 0.01 / sqrt(3).
    current_offset_a
        100 µV on 0.1 ohm are 1 mA (from memory of such a monitor's datasheet, A grade), over sqrt(3).
    voltage_gain_error
        1 %, as the current register, over sqrt(3).
    temperature_error_c
        ± 0.5 °C from -10 to 85 °C (from memory of such a thermometer's datasheet), over sqrt(3).
    integration
        ``trapezoid`` for readings of the moment, as nodes send them; ``hold`` for logs whose rows close a step
        (see `hub.battery.charge`).
    """

    name: str
    interval_s: float
    current_sensing: Literal["net", "charge-only"] = "net"
    standing_load_a: float = 0.0
    current_gain_error: float = 0.0082
    current_offset_a: float = 0.00058
    voltage_gain_error: float = 0.0058
    temperature_error_c: float = 0.29
    integration: Rule = "trapezoid"

    def __post_init__(self) -> None:
        if not self.interval_s > 0.0:
            raise InventoryError(f"Node {self.name} needs an interval above 0 s. Correct the inventory.")


@dataclass(frozen=True, slots=True)
class Window:
    """``start_ms <= time < end_ms``, UTC milliseconds.

    ``pack_leaves`` says that the pack is taken out at ``end_ms``: a charge session that is open then ends there.
    """

    start_ms: int
    end_ms: int
    pack_leaves: bool = False

    def __post_init__(self) -> None:
        if self.end_ms <= self.start_ms:
            raise UsageError(
                f"A window must end after it starts, but it runs from {self.start_ms} to {self.end_ms} ms."
            )
