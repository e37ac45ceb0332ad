"""The strip book: a glance at every node, gathered now and then and shown in between.

Gathering reads the database for each node; showing does not. A book that is a few seconds old is shown while a new one
is gathered beside it, so that nobody waits, and the pages say as of when it is.
"""

import logging
import threading
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from markupsafe import Markup

from hub.errors import PackfoldError
from hub.store import aside, intake, inventory
from hub.store.engine import Database
from hub.store.inventory import Inventory
from hub.web.gathering import SPAN_MS, glance_of, subject
from hub.web.glance import Glance
from hub.web.strip import strip
from hub.web.traces import STEP_MS, Traces

FRESH_MS = 5_000
STALE_MS = 120_000
# Gathering must not take more than a small share of the machine: it rests a while after each time.
REST_TIMES = 10
# A book of more strips has wider columns, so that the page stays light.
FINE_STRIPS = 12


@dataclass(frozen=True, slots=True)
class Snapshot:
    """The book as of an instant.

    Attributes
    ----------
    glances
        By site and node.
    strips
        Drawing of each node.
    strangers
        How much of late came from nodes nobody knows, by the name they gave; empty where they gave none.
    """

    made_ms: int
    inventory: Inventory
    glances: tuple[Glance, ...]
    strips: Mapping[str, Markup]
    strangers: Mapping[str, int]


class Book:
    """Gathers snapshots and keeps the last one."""

    def __init__(self, database: Database, clock: Callable[[], int]) -> None:
        self._database = database
        self._clock = clock
        self._last: Snapshot | None = None
        self._took_ms = 0
        self._made = 0
        self._changes = 0
        self._gathering = threading.Lock()
        self.traces = Traces()

    def read(self) -> Snapshot:
        """The book: as it is if fresh, an older one while the next is gathered, a new one if it is too old."""
        last = self._last
        age = self._clock() - last.made_ms if last is not None else -1
        if last is None or not 0 <= age <= STALE_MS:
            return self.refresh()
        if age > max(FRESH_MS, REST_TIMES * self._took_ms) and not self._gathering.locked():
            threading.Thread(target=self.refresh_beside, name="strip book", daemon=True).start()
        return last

    def refresh(self) -> Snapshot:
        """Gather a new snapshot; whoever asks meanwhile waits for it."""
        seen = self._made
        with self._gathering:
            if self._last is not None and self._made != seen:
                return self._last
            changes = self._changes
            made = self._gather(self._clock())
            self._took_ms = max(0, self._clock() - made.made_ms)
            self._made += 1
            # What was changed meanwhile may be missing in it.
            self._last = made if self._changes == changes else None
            return made

    def refresh_beside(self) -> None:
        """Gather in a thread of its own; what cannot be read now is tried again when the book is asked for."""
        try:
            self.refresh()
        except PackfoldError as error:
            logging.getLogger(__name__).warning("The strip book could not be gathered: %s", error)

    def forget(self) -> None:
        """Gather anew at the next reading: something was changed here."""
        self._changes += 1
        self._last = None

    def set_aside_of(self, name: str, node_id: int, now_ms: int) -> Mapping[str, int]:
        """What of a node could not be used of late, by reason, as of now."""
        with self._database.read() as connection:
            return aside.since(connection, now_ms - SPAN_MS, node_id).get(name, {})

    def _gather(self, now_ms: int) -> Snapshot:
        with self._database.read() as connection:
            known = inventory.load(connection)
            ids = inventory.node_ids(connection)
            presence = intake.presence_of(connection)
            set_aside = aside.since(connection, now_ms - SPAN_MS)
        end_ms = -(-now_ms // STEP_MS) * STEP_MS
        glances = []
        for node in sorted(known.nodes, key=lambda node: (node.site, node.name)):
            state = presence.get(ids[node.name])
            glances.append(
                glance_of(
                    self._database,
                    self.traces,
                    known,
                    subject(known, node, ids[node.name]),
                    now_ms=now_ms,
                    end_ms=end_ms,
                    presence=state[0] if state else None,
                    set_aside=set_aside.get(node.name, {}),
                )
            )
        fold = 1 if len(glances) <= FINE_STRIPS else 2
        return Snapshot(
            now_ms,
            known,
            tuple(glances),
            {glance.node.name: strip(glance, end_ms - SPAN_MS, end_ms, now_ms, fold) for glance in glances},
            {name: sum(reasons.values()) for name, reasons in set_aside.items() if name not in ids},
        )
