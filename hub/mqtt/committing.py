"""A batch into the database: as often as it takes, and without the one message that the database cannot take."""

import threading
from collections.abc import Callable, Iterable, Sequence
from typing import Final, TypeVar

from hub.errors import StoreError
from hub.mqtt.sorting import Presence, Sorted, apart
from hub.store import intake
from hub.store.engine import Database
from hub.store.intake import Incoming, Taken
from hub.store.receipts import Receipt

Result = TypeVar("Result")

FIRST_WAIT_S: Final = 0.25
LONGEST_WAIT_S: Final = 10.0


class Committer:
    """Stores batches, each in one transaction.

    Parameters
    ----------
    database
        Where to.
    stopping
        Set when the hub ends: a batch that cannot be stored then is given up, and comes again from the broker.

    Attributes
    ----------
    trouble
        What stands in the way now; empty when nothing does.
    faults, last_fault
        How often something failed in a way that was not foreseen, and the last of these.
    """

    def __init__(self, database: Database, stopping: threading.Event) -> None:
        self._database = database
        self._stopping = stopping
        self.trouble = ""
        self.faults = 0
        self.last_fault = ""

    def commit(self, batch: Sorted) -> Taken | None:
        """Store a batch; ``None`` when it had to be given up because the hub ends.

        A failure that is not the database's is the fault of some message: the batch is halved until that one is
        found and set aside.
        """
        return self.insist(lambda: self._store(batch.incoming, batch.presence))

    def insist(self, work: Callable[[], Result]) -> Result | None:
        """Do something again and again while the database is busy, full or away; ``None`` when the hub ends."""
        wait = FIRST_WAIT_S
        while True:
            try:
                result = work()
            except StoreError as error:
                self.trouble = str(error)
                if self._stopping.wait(wait):
                    return None
                wait = min(2 * wait, LONGEST_WAIT_S)
            else:
                self.trouble = ""
                return result

    def _store(self, incoming: Sequence[Incoming], presence: Sequence[Presence]) -> Taken:
        try:
            return self._once(incoming, presence)
        except StoreError:
            raise
        except Exception as error:  # noqa: BLE001 - whatever it is, the other messages must be stored
            self._note_fault(error)
            taken = self._halved(incoming)
            for note in presence:
                self._note_alone(note)
            return taken

    def _note_fault(self, error: Exception) -> None:
        self.faults += 1
        self.last_fault = f"{type(error).__name__}: {error}"[:500]

    def _once(self, incoming: Sequence[Incoming], presence: Sequence[Presence]) -> Taken:
        with self._database.write() as connection:
            taken = intake.take(connection, incoming)
            for note in presence:
                intake.note_presence(connection, note.node_id, note.state, note.at_ms)
        return taken

    def _halved(self, incoming: Sequence[Incoming]) -> Taken:
        if len(incoming) <= 1:
            return self._alone(incoming)
        middle = len(incoming) // 2
        parts = []
        for half in (incoming[:middle], incoming[middle:]):
            try:
                parts.append(self._once(half, ()))
            except StoreError:
                raise
            except Exception:  # noqa: BLE001 - see _store
                parts.append(self._halved(half))
        return _joined(parts)

    def _alone(self, incoming: Sequence[Incoming]) -> Taken:
        """Store one message, or set it aside. If not even that goes, the fault is the database's."""
        try:
            return self._once(incoming, ())
        except StoreError:
            raise
        except Exception as error:  # noqa: BLE001 - see _store
            try:
                return self._once([apart(item, error) for item in incoming], ())
            except StoreError:
                raise
            except Exception as second:
                raise StoreError(
                    f"The database takes nothing ({type(second).__name__}: {second}). "
                    "Look at it with: packfold selfcheck."
                ) from second

    def _note_alone(self, note: Presence) -> None:
        try:
            self._once((), (note,))
        except StoreError:
            raise
        except Exception as error:  # noqa: BLE001 - a word about presence is said again; it must not stop readings
            self._note_fault(error)


def _joined(parts: Iterable[Taken]) -> Taken:
    """What several transactions stored, with the newest receipt of each node and boot."""
    outcomes, newest = [], dict[tuple[int, int], Receipt]()
    for part in parts:
        outcomes += part.outcomes
        for receipt in part.receipts:
            key = (receipt.node_id, receipt.boot)
            if key not in newest or newest[key].sequence < receipt.sequence:
                newest[key] = receipt
    return Taken(outcomes, list(newest.values()))
