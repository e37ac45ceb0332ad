import numpy as np
import pytest

from hub.series import Series
from hub.web import traces as module
from hub.web.traces import STEP_MS, SURROUNDINGS_MS, Traces
from hub.web.words import DAY_MS

DAYS = 20_000 * DAY_MS


class Store:
    """Readings each minute, with a revision an hour, that notes what is asked of it."""

    def __init__(self) -> None:
        self.revisions: dict[int, int] = {}
        self.reads: list[tuple[int, int]] = []
        self.value = 10.4

    def revision(self, start: int, end: int) -> int:
        return max((r for at, r in self.revisions.items() if start <= at < end), default=0)

    def read(self, start: int, end: int) -> Series:
        self.reads.append((start, end))
        times = np.arange(start, end, 60_000, dtype=np.int64)
        return Series(times, {"pack_voltage": np.full(times.size, self.value)})


@pytest.fixture
def store():
    found = Store()
    found.revisions = {DAYS + day * DAY_MS + DAY_MS // 2: day + 1 for day in range(7)}
    return found


def asked(traces: Traces, store: Store, start=DAYS, end=DAYS + 7 * DAY_MS, conditions=None):
    return traces.get(1, start, end, revision=store.revision, read=store.read, conditions=conditions)


def test_days_are_read_once(store):
    traces = Traces()
    first = asked(traces, store)
    assert len(store.reads) == 7
    again = asked(traces, store)
    assert len(store.reads) == 7
    np.testing.assert_array_equal(first["pack_voltage"].low, again["pack_voltage"].low)


def test_only_the_day_that_changed_is_read_again(store):
    traces = Traces()
    asked(traces, store)
    store.revisions[DAYS + 3 * DAY_MS + DAY_MS // 2] = 99
    store.value = 11.0
    found = asked(traces, store)["pack_voltage"]
    assert store.reads[7:] == [(DAYS + 3 * DAY_MS, DAYS + 4 * DAY_MS)]
    assert found.high[3 * 96] == pytest.approx(11.0, rel=1e-6)
    assert found.high[3 * 96 - 1] == pytest.approx(10.4, rel=1e-6)


def test_a_change_near_a_day_s_edge_concerns_its_neighbour_too(store):
    traces = Traces()
    asked(traces, store)
    store.revisions[DAYS + 3 * DAY_MS + SURROUNDINGS_MS - 1] = 99
    asked(traces, store)
    assert [start for start, _ in store.reads[7:]] == [DAYS + 2 * DAY_MS, DAYS + 3 * DAY_MS]


def test_another_calibration_makes_everything_void(store):
    traces = Traces()
    asked(traces, store, conditions="a")
    asked(traces, store, conditions="b")
    assert len(store.reads) == 14


def test_days_without_readings_are_not_read(store):
    traces = Traces()
    store.revisions = {}
    found = asked(traces, store)
    assert store.reads == []
    assert not found["pack_voltage"].known


def test_a_span_is_covered_from_its_first_to_its_last_column(store):
    found = asked(Traces(), store, DAYS + 1000, DAYS + DAY_MS + STEP_MS + 1)["pack_voltage"]
    assert found.start_ms == DAYS
    assert found.end_ms == DAYS + DAY_MS + 2 * STEP_MS
    assert set(asked(Traces(), store)) == set(module.NAMES)


def test_memory_is_bounded(store, monkeypatch):
    monkeypatch.setattr(module, "MOST_DAYS", 3)
    traces = Traces()
    asked(traces, store)
    assert len(traces._days) == 3
    again = asked(traces, store)["pack_voltage"]
    assert again.known
