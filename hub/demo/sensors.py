"""Cheap sensors: gain, offset, noise and steps, range ends, and the ways they fail."""

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from hub.demo import noise

Floats = npt.NDArray[np.float64]
Times = npt.NDArray[np.int64]

# A 12-bit shunt current monitor on 0.1 Ω: 4 mV on the bus, 0.1 mA, ends at ± 3.2 A. A one-wire digital thermometer:
# 1/16 °C, 85 °C at power-on, and -127 °C is what its common driver reports for a loose wire. (Public driver sources.)
VOLTAGE_STEP_V: Final = 0.004
CURRENT_STEP_A: Final = 0.0001
CURRENT_END_A: Final = 3.2
TEMPERATURE_STEP_C: Final = 0.0625
POWER_ON_C: Final = 85.0
LOOSE_WIRE_C: Final = -127.0


@dataclass(frozen=True, slots=True)
class Fault:
    """From ``start_ms`` to before ``end_ms`` a channel shows a code, or stays where it was."""

    channel: str
    kind: Literal["power-on", "loose-wire", "stuck"]
    start_ms: int
    end_ms: int


@dataclass(frozen=True, slots=True)
class Kind:
    """What a kind of sensor does to a value: step, range, noise (standard deviation) and decimals worth sending."""

    step: float
    low: float
    high: float
    noise: float
    decimals: int


VOLTMETER: Final = Kind(VOLTAGE_STEP_V, 0.0, 32.0, 0.0025, 3)
AMMETER: Final = Kind(CURRENT_STEP_A, -CURRENT_END_A, CURRENT_END_A, 0.0003, 4)
THERMOMETER: Final = Kind(TEMPERATURE_STEP_C, -55.0, 125.0, 0.04, 4)
KINDS: Final = {
    "pack_voltage": VOLTMETER,
    "panel_voltage": VOLTMETER,
    "pack_current": AMMETER,
    "panel_current": AMMETER,
    "load_current": AMMETER,
    "pack_temperature": THERMOMETER,
    "air_temperature": THERMOMETER,
    "signal": Kind(1.0, -140.0, 0.0, 2.0, 0),
    "charger_duty": Kind(1.0 / 256.0, 0.0, 1.0, 0.0, 4),
    "charge_target": Kind(0.001, 0.0, 10.0, 0.0, 3),
}


class Channel:
    """One sensor of one node.

    Parameters
    ----------
    name
        The quantity.
    seed
        Its noise.
    gain, offset
        Shown value = true value times gain plus offset.
    faults
        Those of this channel are applied.
    """

    def __init__(
        self, name: str, seed: int, gain: float = 1.0, offset: float = 0.0, faults: tuple[Fault, ...] = ()
    ) -> None:
        self.name = name
        self.kind = KINDS[name]
        self.gain, self.offset = gain, offset
        self._seed = noise.salt(seed, name)
        self._faults = tuple(f for f in faults if f.channel == name)
        self._last = 0.0
        self._held: dict[Fault, float] = {}

    def show(self, true: Floats, time_ms: Times, first_of_boot: npt.NDArray[np.bool_] | None = None) -> Floats:
        """What the node reads for true values at instants, shape (n,).

        ``first_of_boot`` marks readings taken before a thermometer has converted for the first time.
        """
        if not true.size:
            return true
        kind = self.kind
        value = true * self.gain + self.offset
        if kind.noise:
            value = value + kind.noise * noise.normal(time_ms, self._seed)
        value = np.clip(np.round(value / kind.step) * kind.step, kind.low, kind.high)
        if first_of_boot is not None and kind is THERMOMETER:
            value = np.where(first_of_boot, POWER_ON_C, value)
        for fault in self._faults:
            inside = (time_ms >= fault.start_ms) & (time_ms < fault.end_ms)
            if inside.any():
                value = np.where(inside, self._code(fault, value, int(np.argmax(inside))), value)
        self._last = float(value[-1])
        return np.round(value, kind.decimals)

    def _code(self, fault: Fault, value: Floats, first: int) -> float:
        if fault.kind == "power-on":
            return POWER_ON_C
        if fault.kind == "loose-wire":
            return LOOSE_WIRE_C
        before = float(value[first - 1]) if first else self._last
        return self._held.setdefault(fault, before)
