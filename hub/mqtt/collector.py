"""From the broker into the database: received, stored, and only then acknowledged.

One thread reads the network and only lays messages into a tray; one thread takes them out in batches, reads them,
stores a batch in one transaction, and then lets the broker forget them and tells the nodes by their receipts. Whatever
goes wrong in between (a busy or full disk, a crash, a broken connection), the broker still holds what was not
acknowledged and sends it again; stored again it is a repeat. One message that nobody can read is set aside and stops
nothing.
"""

import gc
import threading
import time
from collections import defaultdict
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

from hub.mqtt.broker import RunningBroker
from hub.mqtt.committing import Committer
from hub.mqtt.link import Link
from hub.mqtt.sorting import Sorted, Sorter
from hub.mqtt.tray import Letter, Tray
from hub.settings import Settings
from hub.store.engine import Database
from hub.store.intake import Taken
from hub.telemetry.topics import topic

STOP_LIMIT_S: Final = 10.0
GIVE_UP_S: Final = 1.0


@dataclass(frozen=True, slots=True)
class CollectorStatus:
    """How receiving fares. Instants are UTC milliseconds; counts are since the hub started.

    Attributes
    ----------
    connected, since_ms, generation
        Whether the hub is connected and subscribed, since when, and the number of this attempt to connect.
    received
        Messages that arrived, repeats included.
    stored, repeated, set_aside
        Readings stored for the first time, readings that were known already, and things set aside.
    unacknowledged, queued
        Messages the broker still holds as not acknowledged, and those of them that wait to be stored.
    last_message_ms, last_commit_ms
        When the last message arrived and when a batch was last stored.
    reconnects, ends_last_minute
        Connections after the first one, and how many ended within the last minute.
    broker_dropped
        Messages the broker says it dropped, where it tells.
    faults
        Failures of the hub's own that were survived.
    problems
        What is wrong now, each in a sentence that says what to do; empty when all is well.
    last_error
        The last thing that went wrong, even if all is well again.
    """

    connected: bool
    since_ms: int | None
    generation: int
    received: int
    stored: int
    repeated: int
    set_aside: int
    unacknowledged: int
    queued: int
    last_message_ms: int | None
    last_commit_ms: int | None
    reconnects: int
    ends_last_minute: int
    broker_dropped: int
    faults: int
    problems: tuple[str, ...]
    last_error: str


class Collector:
    """Receives what nodes send.

    Parameters
    ----------
    database
        Where it is stored.
    broker
        Where it comes from.
    settings
        The sections on broker and database are used.
    now_ms
        The clock.
    on_taken
        Told of each batch once it is stored, on the storing thread; should be quick.
    """

    def __init__(
        self,
        database: Database,
        broker: RunningBroker,
        settings: Settings,
        *,
        now_ms: Callable[[], int],
        on_taken: Callable[[Taken], None] | None = None,
    ) -> None:
        self._broker = broker
        self._root = settings.broker.root
        self._collect_s = settings.database.commit_every_s
        self._now_ms = now_ms
        self._on_taken = on_taken
        self._giving_up = threading.Event()
        self._ending = False
        self._tray = Tray()
        self._sorter = Sorter(database, self._root, settings.broker.message_limit_bytes)
        self._committer = Committer(database, self._giving_up)
        self._link = Link(broker.access, self._root, self._tray, now_ms)
        self._worker = threading.Thread(target=self._work, name="storing", daemon=True)
        self._stored = 0
        self._repeated = 0
        self._set_aside = 0
        self._faults = 0
        self._last_fault = ""
        self._last_commit_ms: int | None = None
        self._thresholds: tuple[int, int, int] | None = None

    def start(self) -> None:
        """Begin to receive. A broker that cannot be reached is no error: it is tried again until it can."""
        # What arrives is built and dropped a thousand times a second and has no cycles: looking for some after each 700
        # objects, as is the default, takes up to a fifth of the time of a message.
        self._thresholds = gc.get_threshold()
        gc.set_threshold(20_000, 20, 20)
        self._worker.start()
        self._link.start()

    def stop(self, timeout_s: float = STOP_LIMIT_S) -> None:
        """Take in nothing more, store what was received, acknowledge it, and end; within about ``timeout_s``.

        What could not be stored by then stays with the broker.
        """
        end = time.monotonic() + timeout_s
        if self._thresholds is not None:
            gc.set_threshold(*self._thresholds)
        self._link.stop_reading()
        self._ending = True
        self._tray.close()
        if self._worker.is_alive():
            self._worker.join(max(end - time.monotonic(), 0))
        self._giving_up.set()
        if self._worker.is_alive():
            self._worker.join(GIVE_UP_S)
        self._link.close(max(end - time.monotonic(), GIVE_UP_S))

    def status(self) -> CollectorStatus:
        """How receiving fares now."""
        link = self._link.state()
        problems = [self._broker.poll(), *link.problems, self._committer.trouble]
        if not self._worker.is_alive() and not self._ending:
            problems.append("Receiving has stopped. Restart the hub and report it.")
        return CollectorStatus(
            connected=link.connected,
            since_ms=link.since_ms,
            generation=link.generation,
            received=self._tray.received,
            stored=self._stored,
            repeated=self._repeated,
            set_aside=self._set_aside,
            unacknowledged=link.unacknowledged,
            queued=len(self._tray),
            last_message_ms=self._tray.last_ms,
            last_commit_ms=self._last_commit_ms,
            reconnects=link.reconnects,
            ends_last_minute=link.ends_last_minute,
            broker_dropped=link.broker_dropped,
            faults=self._faults + self._link.faults + self._committer.faults,
            problems=tuple(p for p in problems if p),
            last_error=self._last_fault or self._committer.last_fault or link.last_error,
        )

    # The thread that stores -------------------------------------------------------------------------------------------

    def _work(self) -> None:
        while True:
            letters = self._tray.take(self._collect_s)
            if letters:
                self._handle(letters)
            elif self._ending:
                return
            try:
                self._link.ensure_alive()
            except RuntimeError as error:  # no thread to be had just now; the next turn tries again
                self._note_fault(error)

    def _handle(self, letters: Sequence[Letter]) -> None:
        try:
            batch = self._committer.insist(lambda: self._sorter.sort(letters))
            taken = self._committer.commit(batch) if batch is not None else None
        except Exception as error:  # noqa: BLE001 - the broker still has these messages; ask for them again
            self._note_fault(error)
            self._link.renew(f"The connection is made anew after a fault of the hub ({error}); report it.")
            return
        if batch is None or taken is None:
            return
        try:
            self._acknowledge(letters)
            self._count(batch, taken)
            self._send_receipts(taken)
            if self._on_taken is not None:
                self._on_taken(taken)
        except Exception as error:  # noqa: BLE001 - the batch is stored; what hangs on it must not stop the next
            self._note_fault(error)

    def _acknowledge(self, letters: Sequence[Letter]) -> None:
        mids: defaultdict[int, list[int]] = defaultdict(list)
        for letter in letters:
            if letter.qos:
                mids[letter.generation].append(letter.mid)
        for generation, numbers in mids.items():
            self._link.acknowledge(generation, numbers)

    def _count(self, batch: Sorted, taken: Taken) -> None:
        for item, outcome in zip(batch.incoming, taken.outcomes, strict=True):
            if outcome is None:
                self._set_aside += 1
                continue
            assert item.message is not None
            self._stored += outcome.new
            self._repeated += outcome.repeated
            self._set_aside += len(item.message.remarks) + len(outcome.contradictions)
        self._last_commit_ms = self._now_ms()

    def _send_receipts(self, taken: Taken) -> None:
        for receipt in taken.receipts:
            self._link.publish(
                (receipt.node_id, receipt.boot),
                topic(self._root, self._sorter.name_of(receipt.node_id), "receipt"),
                f'{{"boot": {receipt.boot}, "sequence": {receipt.sequence}}}'.encode(),
            )

    def _note_fault(self, error: Exception) -> None:
        self._faults += 1
        self._last_fault = f"{type(error).__name__}: {error}"[:500]
