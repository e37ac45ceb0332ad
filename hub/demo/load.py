"""What a site draws from its pack: a standing load, bursts at fixed intervals, and a lamp at night."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Burst:
    """``current_a`` for ``length_s`` at the start of every ``period_s``, shifted by ``phase_s``."""

    current_a: float
    period_s: float
    length_s: float
    phase_s: float = 0.0

    def on_s(self, time_s: Floats) -> Floats:
        """Seconds of operation from the origin to each instant; the difference of two is exact."""
        since = np.asarray(time_s, np.float64) - self.phase_s
        whole = np.floor(since / self.period_s)
        return whole * self.length_s + np.minimum(since - whole * self.period_s, self.length_s)


@dataclass(frozen=True, slots=True)
class Lamp:
    """Lit while the sun is below ``below_deg``; off from ``off_hour`` to ``on_hour`` by the sun, to spare the pack."""

    current_a: float
    below_deg: float = -4.0
    off_hour: float = 23.0
    on_hour: float = 5.0


@dataclass(frozen=True, slots=True)
class Load:
    """All loads of a site."""

    standing_a: float = 0.0
    bursts: tuple[Burst, ...] = ()
    lamp: Lamp | None = None

    def mean_a(self, start_s: Floats, end_s: Floats, elevation_deg: Floats, longitude_deg: float) -> Floats:
        """Mean current between pairs of instants, A, shape (n,): exact for bursts whatever the step."""
        span = end_s - start_s
        total = np.full(np.shape(end_s), self.standing_a)
        for burst in self.bursts:
            total += burst.current_a * (burst.on_s(end_s) - burst.on_s(start_s)) / span
        if self.lamp is not None:
            hour = (end_s / 3600.0 + longitude_deg / 15.0) % 24.0
            resting = (hour >= self.lamp.off_hour) | (hour < self.lamp.on_hour)
            total += np.where((elevation_deg < self.lamp.below_deg) & ~resting, self.lamp.current_a, 0.0)
        return total
