"""A node's clock: a crystal that drifts between corrections, and the ways it can be quite wrong."""

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

Times = npt.NDArray[np.int64]

YEAR_2000_S: Final = 946_684_800


@dataclass(frozen=True, slots=True)
class Wrong:
    """From ``start_ms`` to before ``end_ms`` the clock is wrong.

    ``year-2000``: counts from 2000-01-01T00:00:00Z; ``zone``: ahead by ``hours``; ``none``: there is no clock, only a
    counter, so that a node can say no more than how long ago a reading was.
    """

    kind: Literal["year-2000", "zone", "none"]
    start_ms: int
    end_ms: int
    hours: float = 0.0


@dataclass(frozen=True, slots=True)
class Clock:
    """A crystal that gains ``drift_ppm`` (20 ppm are 1.73 s a day) and is set right every ``corrected_s``."""

    drift_ppm: float = 20.0
    corrected_s: float = 86400.0
    wrong: tuple[Wrong, ...] = ()

    def stamp(self, time_ms: Times) -> tuple[Times, npt.NDArray[np.bool_]]:
        """What the clock shows, in whole seconds since 1970, and whether the node has a clock at all."""
        true_s = time_ms / 1000.0
        shown = true_s + true_s % self.corrected_s * self.drift_ppm * 1e-6
        known = np.ones(time_ms.shape, bool)
        for wrong in self.wrong:
            inside = (time_ms >= wrong.start_ms) & (time_ms < wrong.end_ms)
            if wrong.kind == "year-2000":
                shown = np.where(inside, YEAR_2000_S + (time_ms - wrong.start_ms) / 1000.0, shown)
            elif wrong.kind == "zone":
                shown = np.where(inside, shown + 3600.0 * wrong.hours, shown)
            else:
                known &= ~inside
        return np.floor(shown + 1e-6).astype(np.int64), known
