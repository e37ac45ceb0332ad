"""A node's firmware: it reads its sensors, stamps with its clock, counts boots and messages, and keeps an outbox."""

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from hub.demo import noise
from hub.demo.cell import Pack
from hub.demo.clock import Clock
from hub.demo.outbox import Outbox, Packet
from hub.demo.plant import Course, Plant
from hub.demo.sensors import Channel, Fault

Floats = npt.NDArray[np.float64]
Times = npt.NDArray[np.int64]

START_UP_MS: Final = 4000
# How long a node is without power while somebody changes its pack.
SWAP_MS: Final = 600_000
MESSAGE_READINGS: Final = 60


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happens to a node at an instant: it restarts, or somebody gives it another pack."""

    at_ms: int
    kind: Literal["restart", "swap"]
    pack: Pack | None = None


@dataclass(frozen=True, slots=True)
class Fitout:
    """What a node has and what goes wrong with it.

    Attributes
    ----------
    sends
        Quantities it measures and sends, in order.
    gains, offsets
        Sensor errors by quantity.
    totals
        Whether it keeps running totals of charge (from its own current readings, lost at a restart).
    outages
        Spans in ms in which its link is down.
    repeats
        Share of messages that a poor link makes it send twice.
    """

    sends: tuple[str, ...]
    form: Literal["json", "cbor"] = "json"
    gains: dict[str, float] = field(default_factory=dict)
    offsets: dict[str, float] = field(default_factory=dict)
    faults: tuple[Fault, ...] = ()
    clock: Clock = field(default_factory=Clock)
    totals: bool = False
    outages: tuple[tuple[int, int], ...] = ()
    repeats: float = 0.0
    signal_dbm: float = -71.0


@dataclass(frozen=True, slots=True)
class Stretch:
    """Readings a node took, each array of shape (n,); ``course`` is what was true at the same instants."""

    time_ms: Times
    stamp_s: Times
    has_clock: npt.NDArray[np.bool_]
    boot: Times
    columns: dict[str, Floats]
    course: Course


class Node:
    """A simulated node.

    Parameters
    ----------
    name
        Its name on the broker.
    plant
        Its hardware; its present instant is where the readings begin.
    events
        Restarts and swaps, in any order.
    """

    def __init__(self, name: str, plant: Plant, fitout: Fitout, seed: int, events: tuple[Event, ...] = ()) -> None:
        self.name, self.plant, self.fitout = name, plant, fitout
        self.seed = noise.salt(seed, name)
        self.urn = f"urn:dev:mac:{noise.salt(self.seed, 'mac') % 2**48:012x}fffe:"
        self.outbox = Outbox()
        self.boot = 1
        self.sequence = 0
        self._channels = [
            Channel(q, self.seed, fitout.gains.get(q, 1.0), fitout.offsets.get(q, 0.0), fitout.faults)
            for q in fitout.sends
        ]
        self._events = sorted(events, key=lambda e: e.at_ms)
        self._booted_ms = plant.time_ms
        self._fresh = True
        self._off_until_ms = 0
        self._running = True
        self._total = {"charge_in": 0.0, "charge_out": 0.0}
        self._total_ms = plant.time_ms
        self._total_boot = self._message_boot = 1
        self._held_back: list[Packet] = []

    def run(self, time_ms: Times) -> Iterator[Stretch]:
        """Take readings at instants after the present one; one stretch between any two events."""
        while time_ms.size:
            if self._events and self._events[0].at_ms <= time_ms[0]:
                self._happen(self._events.pop(0))
                continue
            cut = int(np.searchsorted(time_ms, self._events[0].at_ms)) if self._events else time_ms.size
            yield self._read(self.plant.run(time_ms[:cut]))
            time_ms = time_ms[cut:]

    def _happen(self, event: Event) -> None:
        self._running = False
        if event.kind == "swap" and event.pack is not None:
            self.plant.swap(event.pack)
            self.plant.powered = True
            self._off_until_ms = event.at_ms + SWAP_MS

    def _read(self, course: Course) -> Stretch:
        on = course.powered & (course.time_ms >= self._off_until_ms)
        rising = on & ~np.concatenate(([self._running], on[:-1]))
        boot = (self.boot + np.cumsum(rising))[on]
        time_ms = course.time_ms[on]
        first = rising[on]
        if self._fresh and first.size:
            first[0], self._fresh = True, False
        started = np.where(first, time_ms - START_UP_MS, self._booted_ms)
        started = np.maximum.accumulate(started) if started.size else started
        if on.size:
            self._running = bool(on[-1])
        if time_ms.size:
            self.boot, self._booted_ms = int(boot[-1]), int(started[-1])
        columns = {c.name: c.show(self._true(c.name, course)[on], time_ms, first) for c in self._channels}
        if self.fitout.totals:
            columns |= self._totals(columns["pack_current"], time_ms, boot)
        columns["uptime"] = (time_ms - started) / 1000.0
        stamp_s, has_clock = self.fitout.clock.stamp(time_ms)
        return Stretch(time_ms, stamp_s, has_clock, boot, columns, _where(course, on))

    def _true(self, name: str, course: Course) -> Floats:
        if name != "signal":
            return course.columns[name]
        fading = 14.0 * (noise.smooth(course.time_ms / 1000.0, 5400.0, noise.salt(self.seed, "signal")) - 0.5)
        return self.fitout.signal_dbm + fading

    def _totals(self, current_a: Floats, time_ms: Times, boot: Times) -> dict[str, Floats]:
        """Running totals from the node's own readings: each holds for the step before it."""
        if not time_ms.size:
            return {"charge_in": current_a, "charge_out": current_a}
        hours = np.diff(time_ms, prepend=self._total_ms) / 3.6e6
        restarts = np.flatnonzero(np.diff(boot, prepend=self._total_boot))
        out = {}
        for name, sign in (("charge_in", 1.0), ("charge_out", -1.0)):
            total = self._total[name] + np.cumsum(np.maximum(sign * current_a, 0.0) * hours)
            for k in restarts:
                total[k:] -= total[k]
            self._total[name] = float(total[-1])
            out[name] = np.round(total, 5)
        self._total_ms, self._total_boot = int(time_ms[-1]), int(boot[-1])
        return out

    def post(self, stretch: Stretch, readings: int = MESSAGE_READINGS) -> int:
        """Put a stretch into the outbox as messages; how many.

        While the link is down messages wait; when it is back the newest goes first and the backlog follows.
        """
        packets = list(self._packets(stretch, readings))
        for packet in packets:
            if any(start <= packet.true_ms[-1] < end for start, end in self.fitout.outages):
                self._held_back.append(packet)
                continue
            self.outbox.add(packet)
            for late in self._held_back:
                self.outbox.add(late)
            self._held_back.clear()
        return len(packets)

    def _packets(self, stretch: Stretch, readings: int) -> Iterator[Packet]:
        n = stretch.time_ms.size
        changes = np.diff(stretch.boot).astype(bool) | np.diff(stretch.has_clock)
        edges = [0, *(np.flatnonzero(changes) + 1).tolist(), n]
        for low, high in pairwise(edges):
            for a in range(low, high, readings):
                part = slice(a, min(a + readings, high))
                yield self._packet(stretch, part)

    def _packet(self, stretch: Stretch, part: slice) -> Packet:
        boot = int(stretch.boot[part.start])
        self.sequence = self.sequence + 1 if boot == self._message_boot else 1
        self._message_boot = boot
        return Packet(
            boot,
            self.sequence,
            stretch.time_ms[part].tolist(),
            stretch.stamp_s[part].tolist() if stretch.has_clock[part.start] else None,
            {name: values[part].tolist() for name, values in stretch.columns.items()},
        )

    def twice(self, packet: Packet) -> bool:
        """Whether a poor link makes the node send this message a second time."""
        key = np.array([packet.boot * 1_000_003 + packet.sequence], np.int64)
        return bool(noise.uniform(key, noise.salt(self.seed, "repeat"))[0] < self.fitout.repeats)


def _where(course: Course, on: npt.NDArray[np.bool_]) -> Course:
    return Course(
        course.time_ms[on],
        {name: values[on] for name, values in course.columns.items()},
        course.powered[on],
        course.level[on],
        course.capacity_ah[on],
        course.acceptance[on],
        course.in_ah[on],
        course.out_ah[on],
        course.overcharge_ah[on],
    )
