"""Arrivals that meet each other, and what should become of them by the plainest of rules."""

from dataclasses import dataclass, field

import numpy as np
from hypothesis import strategies as st

from hub.quantities import NAMES
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS, HOUR_MS, SCALES, fixed_point

DAY = 20_600
# Few instants, so that arrivals meet: edges of days, hours and milliseconds.
INSTANTS = [
    (DAY + day) * DAY_MS + offset
    for day in range(3)
    for offset in (0, 1, HOUR_MS - 1, HOUR_MS, 5 * HOUR_MS, DAY_MS - 1)
]
times = st.sampled_from(INSTANTS)
names = st.sampled_from(["pack_voltage", "pack_current", "pack_temperature", "charge_in", "uptime"])
values = st.sampled_from([0.0, -0.0, 1.5, -0.25, 20.0625, 1e12, -1e12, 1.00004])
reading = st.dictionaries(names, values, max_size=4)


@st.composite
def arrivals(draw, import_id=None):
    return Arrival(
        draw(st.sampled_from([1, 2])),
        draw(st.integers(0, 2**53)),
        draw(st.dictionaries(times, reading, max_size=5)),
        draw(st.none() | st.integers(0, 2**63 - 1)),
        draw(st.none() | st.integers(0, 2**63 - 1)),
        import_id,
        draw(st.dictionaries(times, st.integers(0, 2**53), max_size=2)),
    )


# Seal what lies before an instant, or store a batch.
seals = st.sampled_from(INSTANTS)
batches = st.lists(arrivals(), max_size=4)


@dataclass
class Model:
    """Each quantity of an instant once, the first value that came."""

    stored: dict = field(default_factory=dict)

    def take(self, arrival):
        """New, filled, repeated readings and contradictions."""
        counts = [0, 0, 0, 0]
        for time_ms, offered in arrival.readings.items():
            if not offered:
                continue
            numbers = {name: fixed_point(name, value) for name, value in offered.items()}
            row = self.stored.get((arrival.node_id, time_ms))
            if row is None:
                self.stored[(arrival.node_id, time_ms)] = dict(numbers)
                counts[0] += 1
                continue
            missing = {name: number for name, number in numbers.items() if name not in row}
            counts[3] += sum(row[name] != number for name, number in numbers.items() if name in row)
            counts[1 if missing else 2] += 1
            row.update(missing)
        return counts

    def rows(self, node_id, start_ms=0, end_ms=2**62):
        """Instant to numbers, in order."""
        return {
            time_ms: row
            for (node, time_ms), row in sorted(self.stored.items())
            if node == node_id and start_ms <= time_ms < end_ms
        }


def as_rows(series):
    """A series as the model has it; checks its promises on the way."""
    assert series.time_ms.dtype == np.int64
    assert (np.diff(series.time_ms) > 0).all()
    assert list(series.columns) == [name for name in NAMES if name in series.columns]
    for column in series.columns.values():
        assert column.dtype == np.float64
        assert column.shape == series.time_ms.shape
        assert np.isfinite(column).any()
    return {
        time_ms: {
            name: round(column[i] * SCALES[name]) for name, column in series.columns.items() if np.isfinite(column[i])
        }
        for i, time_ms in enumerate(series.time_ms.tolist())
    }
