"""Readings of one node as columns: what every computation starts from."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
Times = npt.NDArray[np.int64]
Mask = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Series:
    """Readings of one node in order of time.

    Attributes
    ----------
    time_ms
        Shape (n,), int64, strictly increasing: UTC instants in milliseconds since 1970.
    columns
        Quantity name to values of shape (n,), float64 in the catalogue's unit; NaN where the reading has no such
        value. A quantity that no reading has is absent.
    """

    time_ms: Times
    columns: Mapping[str, Floats] = field(default_factory=dict)

    def __len__(self) -> int:
        return int(self.time_ms.size)

    def get(self, name: str) -> Floats:
        """Values of one quantity, all NaN where the node does not send it."""
        found = self.columns.get(name)
        return np.full(self.time_ms.size, np.nan) if found is None else found

    def between(self, start_ms: int, end_ms: int) -> "Series":
        """The readings with ``start_ms <= time < end_ms``."""
        a, b = np.searchsorted(self.time_ms, [start_ms, end_ms])
        return Series(self.time_ms[a:b], {name: values[a:b] for name, values in self.columns.items()})

    def where(self, mask: Mask) -> "Series":
        """The readings for which ``mask`` is true."""
        return Series(self.time_ms[mask], {name: values[mask] for name, values in self.columns.items()})


EMPTY = Series(np.empty(0, np.int64))
