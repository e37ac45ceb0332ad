"""Panels, and how a small node charges from one: through a diode, or with a regulated current that may end itself."""

from dataclasses import dataclass
from math import exp, log
from typing import Final, NamedTuple, Protocol

DIODE_V: Final = 0.35
DARK_W: Final = 5.0


@dataclass(frozen=True, slots=True)
class Panel:
    """A photovoltaic panel by three figures of its label.

    The curve is the single exponential of the ideal-diode model, i = i_light (1 - exp((v - v_open) / a)), with
    a = v_open / 17 (a silicon cell of 0.6 V and an ideality of about 1.35; [M]).

    Attributes
    ----------
    power_w
        At 1000 W/m² and 25 °C, W.
    open_v
        Open-circuit voltage there, V.
    short_a
        Short-circuit current there, A.
    tilt_deg, facing_deg
        Tilt from horizontal, and azimuth clockwise from north.
    horizon_deg
        A ridge, wall or ravine all round.
    rise_k
        How much warmer than the air the panel is at 800 W/m² (nominal operating temperature less 20 °C).
    """

    power_w: float
    open_v: float
    short_a: float
    tilt_deg: float
    facing_deg: float
    horizon_deg: float = 0.0
    rise_k: float = 26.0

    def lit(self, irradiance_w: float, air_c: float) -> "Lit":
        """The panel in this light and air."""
        if irradiance_w <= 0.5:
            return Lit(0.0, 0.0, self.open_v / 17.0)
        light = irradiance_w / 1000.0
        slope = self.open_v / 17.0
        warmer = air_c + self.rise_k * irradiance_w / 800.0 - 25.0
        open_v = max(0.0, self.open_v * (1.0 - 0.0031 * warmer) + slope * log(light))
        return Lit(self.short_a * light * (1.0 + 0.0005 * warmer), open_v, slope)


class Lit(NamedTuple):
    """A panel at one moment: photocurrent A, open-circuit voltage V, slope V."""

    light_a: float
    open_v: float
    slope_v: float

    def current(self, volts: float) -> float:
        """Current at a voltage, A; never negative: a diode blocks."""
        if volts >= self.open_v:
            return 0.0
        return self.light_a * (1.0 - exp((volts - self.open_v) / self.slope_v))


class Delivery(NamedTuple):
    """What a charger did in a step: mean currents in A, panel voltage in V; duty and target where it has them."""

    charge_a: float
    panel_v: float
    panel_a: float
    duty: float | None = None
    target_a: float | None = None


class Charger(Protocol):
    """Whatever stands between panel and pack."""

    def deliver(self, lit: Lit, emf_v: float, ohm: float, load_a: float, dt_s: float) -> Delivery:
        """Charge for ``dt_s`` seconds into a pack of this electromotive force and resistance, beside a load."""
        ...

    def watch(self, pack_v: float, pack_c: float, current_a: float, dark: bool, dt_s: float) -> None:
        """Look at the pack after the step."""
        ...


class Direct:
    """Panel, diode, pack: the panel's voltage is the pack's."""

    def deliver(self, lit: Lit, emf_v: float, ohm: float, load_a: float, dt_s: float) -> Delivery:  # noqa: ARG002
        """See ``Charger``."""
        if lit.light_a <= 0.0:
            return Delivery(0.0, 0.0, 0.0)
        low, high = 0.0, lit.light_a
        volts = emf_v + DIODE_V - ohm * load_a
        # The panel's current falls and the pack's voltage rises with current: halve the interval between them.
        for _ in range(14):
            middle = 0.5 * (low + high)
            if lit.current(volts + ohm * middle) > middle:
                low = middle
            else:
                high = middle
        current = 0.5 * (low + high)
        if low == 0.0:
            return Delivery(0.0, lit.open_v, 0.0)
        return Delivery(current, volts + ohm * current, current)

    def watch(self, pack_v: float, pack_c: float, current_a: float, dark: bool, dt_s: float) -> None:
        """A diode looks at nothing."""


@dataclass(frozen=True, slots=True)
class EndRule:
    """When a charger believes the pack is full. An unreachable number switches a test off.

    ``drop_v`` per cell below the peak; ``slope_c_per_min`` over ten minutes; ``hot_c``; ``timer_s`` of charging.
    ``trickle_a`` flows afterwards. The tests start ``hold_off_s`` after charging began, and the voltage drop counts
    only while at least ``steady_it`` flows.
    """

    cells: int
    rated_ah: float
    drop_v: float = 9.0
    slope_c_per_min: float = 99.0
    hot_c: float = 99.0
    timer_s: float = 1e9
    trickle_a: float = 0.0
    hold_off_s: float = 600.0
    steady_it: float = 0.2


@dataclass(frozen=True, slots=True)
class Tuning:
    """The regulator: period s, integral and proportional gain per ampere of error, delay in periods, limits of duty."""

    period_s: float = 10.0
    integral: float = 0.4
    proportional: float = 0.1
    delay: int = 0
    slew: float = 1.0
    windup: float = 1.0


class Regulated:
    """A switch between panel and pack whose duty a regulator moves so that the pack's current meets a target.

    The switch joins panel and pack directly while it is on (no conversion), so the pack's mean current is the duty
    times the panel's current at the pack's voltage, less the load.
    """

    def __init__(self, target_a: float, tuning: Tuning, end: EndRule | None = None) -> None:
        self.target_a = target_a
        self.end = end
        self.ended = False
        self._tuning = tuning
        self._duty = 0.0
        self._sum = 0.0
        self._until_s = tuning.period_s
        self._seen = [0.0] * (tuning.delay + 1)
        self._charging_s = 0.0
        self._dark_s = 0.0
        self._peak_v = 0.0
        self._peak_a = 0.0
        self._warm: list[tuple[float, float]] = []

    def deliver(self, lit: Lit, emf_v: float, ohm: float, load_a: float, dt_s: float) -> Delivery:
        """See ``Charger``."""
        aim = self.target_a if not self.ended or self.end is None else self.end.trickle_a
        on_v = emf_v + DIODE_V + ohm * aim
        on_a = lit.current(on_v)
        if on_a <= 0.0:
            self._duty = self._sum = 0.0 if lit.light_a <= 0.0 else min(self._sum, self._tuning.windup)
            return Delivery(0.0, lit.open_v, 0.0, self._duty, aim)
        charged, left = 0.0, dt_s
        while left > 1e-9:
            span = min(left, self._until_s)
            charged += self._duty * on_a * span
            left -= span
            self._until_s -= span
            if self._until_s <= 1e-9:
                self._until_s = self._tuning.period_s
                self._regulate(aim, self._duty * on_a - load_a)
        mean = charged / dt_s
        panel_v = on_v * self._duty + lit.open_v * (1.0 - self._duty)
        return Delivery(mean, panel_v, mean, self._duty, aim)

    def _regulate(self, aim: float, pack_a: float) -> None:
        tuning = self._tuning
        self._seen.append(pack_a)
        error = aim - self._seen.pop(0)
        self._sum = min(tuning.windup, max(0.0, self._sum + tuning.integral * error))
        wanted = min(1.0, max(0.0, self._sum + tuning.proportional * error))
        self._duty += min(tuning.slew, max(-tuning.slew, wanted - self._duty))

    def watch(self, pack_v: float, pack_c: float, current_a: float, dark: bool, dt_s: float) -> None:
        """See ``Charger``: apply the end rule, and take it back after an hour of darkness."""
        rule = self.end
        if rule is None:
            return
        self._dark_s = self._dark_s + dt_s if dark else 0.0
        if self._dark_s >= 3600.0:
            self.ended, self._charging_s, self._peak_v, self._peak_a = False, 0.0, 0.0, 0.0
            self._warm.clear()
        if self.ended or current_a <= 0.02 * rule.rated_ah:
            return
        self._charging_s += dt_s
        self.ended = self._full(rule, pack_v / rule.cells, pack_c, current_a)

    def _full(self, rule: EndRule, cell_v: float, pack_c: float, current_a: float) -> bool:
        now = self._charging_s
        self._warm.append((now, pack_c))
        while now - self._warm[0][0] > 600.0:
            self._warm.pop(0)
        if now < rule.hold_off_s:
            return False
        # A cloud lowers voltage and current together: a peak counts for the current it was seen at.
        if current_a < rule.steady_it * rule.rated_ah or abs(current_a - self._peak_a) > 0.1 * self._peak_a:
            self._peak_v, self._peak_a = cell_v, current_a
        self._peak_v = max(self._peak_v, cell_v)
        since, then_c = self._warm[0]
        slope = (pack_c - then_c) / max(1.0, (now - since) / 60.0)
        return (
            self._peak_v - cell_v >= rule.drop_v
            or (now - since > 300.0 and slope >= rule.slope_c_per_min)
            or pack_c >= rule.hot_c
            or now >= rule.timer_s
        )
