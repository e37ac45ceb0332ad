"""Bringing figures up to date.

Figures are a fold over a node's windows: each is computed from its readings, the inventory that applies to it, and what
the window before hands on. The ledger keeps a digest of all of that for every window; a window whose digest is still
the same is not computed again, and neither is any after it unless what it hands on has changed. So the result does
not depend on the order in which readings came or on how the work was split, and a second run changes nothing.
"""

import bisect
import hashlib
import json
import time
from collections.abc import Callable
from dataclasses import asdict, dataclass

from hub.battery.day import METHOD_VERSION, Carried
from hub.jobs.compute import Subject, compute, subject_of
from hub.jobs.skies import Skies
from hub.jobs.windows import DayWindow, windows
from hub.store import figures, inventory, measured, readings
from hub.store.engine import Database
from hub.store.figures import Entry, Written
from hub.store.inventory import Inventory

# How far before and after a window its figures look; further back where a charge session was still open.
BEFORE_MS = readings.HOUR_MS
AFTER_MS = 15 * 60_000
# A transaction holds the write lock about this long at most, so that receiving never waits long.
LOCK_S = 0.5
# A UTC day is sealed once the node has sent readings this long after its end.
SEAL_AFTER_MS = 24 * readings.HOUR_MS
SEALED_AT_ONCE = 4


@dataclass(slots=True)
class Done:
    """What a run did: windows computed anew, windows that were up to date, UTC days sealed."""

    computed: int = 0
    unchanged: int = 0
    sealed: int = 0


def bring_up_to_date(
    database: Database,
    *,
    node: str | None = None,
    since: str | None = None,
    progress: Callable[[Done], None] | None = None,
) -> Done:
    """Compute what is not up to date.

    Parameters
    ----------
    node
        Only this node; all where ``None``.
    since
        Compute windows from this local date on even if they are up to date.
    progress
        Told how far the run is.

    Raises
    ------
    InventoryError
        There is no such node.
    """
    done = Done()
    with database.read() as connection:
        known = inventory.load(connection)
        ids = inventory.node_ids(connection)
    for name in [known.node(node).name] if node is not None else sorted(ids):
        _Fold(database, known, name, ids[name], since, done, progress).run()
        _seal(database, ids[name], done)
    return done


class _Fold:
    """One node's windows in order."""

    def __init__(
        self,
        database: Database,
        known: Inventory,
        name: str,
        node_id: int,
        since: str | None,
        done: Done,
        progress: Callable[[Done], None] | None,
    ) -> None:
        self._database = database
        self._known = known
        self._node = known.node(name)
        self._node_id = node_id
        self._since = since
        self._done = done
        self._progress = progress
        self._skies = Skies(database, node_id)
        self._pending: list[Written] = []
        self._pending_since = time.monotonic()

    def run(self) -> None:
        with self._database.read() as connection:
            hours, revisions = readings.changed_hours(connection, self._node_id)
            ledger = figures.entries(connection, self._node_id)
            packs = inventory.pack_ids(connection)
            ends = readings.bounds(connection, self._node_id)
        site = self._known.site_of(self._node)
        carried = Carried()
        kept: set[int] = set()
        newest_ms = ends[1] if ends is not None else 0
        for window in windows(hours, site.timezone, self._known.fitted(self._node.name)):
            subject = subject_of(self._known, self._node, window, newest_ms)
            inputs = _digest(subject, carried, _revision(hours, revisions, window, carried))
            entry = ledger.get(window.start_ms)
            kept.add(window.start_ms)
            forced = self._since is not None and window.date >= self._since
            if entry is not None and entry.inputs == inputs and not forced:
                self._done.unchanged += 1
                carried = Carried.from_json(entry.carried)
            else:
                carried = self._compute(subject, inputs, carried, packs)
                self._done.computed += 1
            if self._progress is not None:
                self._progress(self._done)
        self._write(gone=[entry for start, entry in ledger.items() if start not in kept])

    def _compute(self, subject: Subject, inputs: str, carried: Carried, packs: dict[str, int]) -> Carried:
        window = subject.window
        start, end = _reach(window, carried)
        with self._database.read() as connection:
            found = measured.read(
                connection,
                self._node_id,
                start,
                end,
                subject.calibrations,
                self._node.current_full_scale_a,
            )
        sky = self._skies.over(subject) if len(found.series.between(window.start_ms, subject.until_ms)) else None
        result = compute(found, subject, carried, sky)
        pack_id = None if window.pack is None else packs[window.pack]
        entry = Entry(window.start_ms, window.end_ms, window.date, inputs, result.carried.to_json(), result.newest_ms)
        day = None if result.day is None else {**result.day, "pack_id": pack_id}
        charges = [{**row, "pack_id": pack_id} for row in result.charges]
        self._pending.append(Written(entry, day, charges, result.findings))
        if time.monotonic() - self._pending_since > LOCK_S:
            self._write()
        return result.carried

    def _write(self, gone: list[Entry] | None = None) -> None:
        """Write what is pending, together with the ledger, in one transaction."""
        if self._pending or gone:
            with self._database.write() as connection:
                for entry in gone or ():
                    figures.clear(connection, self._node_id, entry.start_ms, entry.start_ms + 1)
                for written in self._pending:
                    figures.write(connection, self._node_id, written)
        self._pending.clear()
        self._pending_since = time.monotonic()


def _reach(window: DayWindow, carried: Carried) -> tuple[int, int]:
    """The stretch of readings that a window's figures are computed from."""
    start = window.start_ms - BEFORE_MS
    if carried.open_since_ms is not None:
        start = min(start, carried.open_since_ms - BEFORE_MS)
    return start, window.end_ms + AFTER_MS


def _revision(hours: list[int], revisions: list[int], window: DayWindow, carried: Carried) -> int:
    """The latest change to any reading that a window's figures, or their screening, look at."""
    start, end = _reach(window, carried)
    start, end = start - measured.SURROUNDINGS_MS, end + measured.SURROUNDINGS_MS
    first = bisect.bisect_left(hours, start // readings.HOUR_MS)
    last = bisect.bisect_right(hours, (end - 1) // readings.HOUR_MS)
    return max(revisions[first:last], default=0)


def _digest(subject: Subject, carried: Carried, revision: int) -> str:
    """A short name for everything that a window's figures depend on."""
    facts = [METHOD_VERSION, asdict(subject), carried.to_json(), revision]
    return hashlib.sha256(json.dumps(facts, sort_keys=True).encode()).hexdigest()[:32]


def _seal(database: Database, node_id: int, done: Done) -> None:
    """Seal the days that are complete, a few in each transaction."""
    with database.read() as connection:
        ends = readings.bounds(connection, node_id)
    if ends is None:
        return
    before = ends[1] - SEAL_AFTER_MS
    while True:
        with database.write() as connection:
            number = readings.seal(connection, node_id, before, most=SEALED_AT_ONCE)
        done.sealed += number
        if number < SEALED_AT_ONCE:
            return
