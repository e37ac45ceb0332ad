"""The composition root: settings to broker, collector, schedule and pages. The only place that knows all of them."""

import threading
from collections.abc import Callable, Sequence
from contextlib import ExitStack
from dataclasses import asdict
from pathlib import Path
from typing import Any, Final

from hub.settings import Settings
from hub.store import inventory, people, readings, schema
from hub.store.engine import Database, FolderLock

PARTS: Final = ("collect", "analyse", "web")

# No reading of this program is older than the program; and a node's clock may lead the hub's by some time.
PROGRAM_MS: Final = 1_767_225_600_000  # 2026-01-01T00:00:00Z
LEAD_MS: Final = 24 * 3_600_000
CLOCK_LOOK_S: Final = 1.0
CLOCK_BEHIND: Final = (
    "This machine's clock is behind the newest reading. Receiving waits until it is set; the broker keeps what comes "
    "meanwhile. Set the clock, or let it follow a time server."
)


def earliest_now_ms(database: Database) -> int:
    """The earliest that it can be now: a day before the newest reading, and not before this program was made."""
    with database.read() as connection:
        ends = [readings.bounds(connection, node_id) for node_id in inventory.node_ids(connection).values()]
    return max([PROGRAM_MS, *(end[1] - LEAD_MS for end in ends if end is not None)])


class Hub:
    """A hub, or some parts of one, in this process.

    Parameters
    ----------
    settings, settings_path
        The settings, and the file they came from (handed on to the process that computes).
    data
        The data folder.
    parts
        Which of ``PARTS`` this process does.
    say
        Told what a person should know while the hub starts and runs.
    now_ms
        The clock.
    """

    def __init__(
        self,
        settings: Settings,
        data: Path,
        *,
        settings_path: Path | None = None,
        parts: Sequence[str] = PARTS,
        say: Callable[[str], None],
        now_ms: Callable[[], int],
    ) -> None:
        self.settings = settings
        self.data = data
        self.parts = tuple(parts)
        self._settings_path = settings_path
        self._say = say
        self._now_ms = now_ms
        self._open = ExitStack()
        self._status: dict[str, Callable[[], Any]] = {}
        self.database: Database | None = None
        self.port: int | None = None

    def start(self) -> None:
        """Start the parts, each only once what it needs is there.

        Raises
        ------
        PackfoldError
            Something needed is missing or taken; what had started is stopped again.
        """
        try:
            self._start()
        except BaseException:
            self.stop()
            raise

    def _start(self) -> None:
        for part in self.parts:
            lock = FolderLock(self.data, part)
            lock.take()
            self._open.callback(lock.release)
        collects = "collect" in self.parts
        database = Database(self.data, self.settings.database.url, checkpoints=collects)
        self.database = database
        self._open.callback(database.close)
        schema.prepare(database)
        if collects:
            self._start_collector(database)
        if "analyse" in self.parts:
            self._start_schedule(database)
        if "web" in self.parts:
            self._start_pages(database)

    def _start_collector(self, database: Database) -> None:
        from hub.mqtt.broker import start_broker
        from hub.mqtt.collector import Collector

        broker = start_broker(self.settings.broker, self.data, database)
        self._open.callback(broker.stop)
        self.port = broker.port
        self._say(broker.sentence)
        collector = Collector(database, broker, self.settings, now_ms=self._now_ms)
        self._open.callback(collector.stop)
        self._once_the_clock_is_right(database, collector.start)
        self._status["collector"] = lambda: asdict(collector.status())

    def _once_the_clock_is_right(self, database: Database, begin: Callable[[], None]) -> None:
        """Begin now, or as soon as this machine's clock is not behind what was received before.

        A board without a battery clock starts in the past until it has heard from a time server. Readings would then
        seem to come from the future and be set aside; the broker keeps them until the clock is right.
        """
        floor_ms = earliest_now_ms(database)
        if self._now_ms() >= floor_ms:
            begin()
            return
        self._say(CLOCK_BEHIND)
        stop = threading.Event()

        def wait() -> None:
            while not stop.wait(CLOCK_LOOK_S):
                if self._now_ms() >= floor_ms:
                    self._say("The clock is right now: receiving begins.")
                    begin()
                    return

        thread = threading.Thread(target=wait, name="clock", daemon=True)
        self._open.callback(thread.join)
        self._open.callback(stop.set)
        self._status["clock"] = lambda: {"problem": CLOCK_BEHIND if thread.is_alive() else ""}
        thread.start()

    def _start_schedule(self, database: Database) -> None:
        from hub.jobs.schedule import Schedule

        schedule = Schedule(database, self.data, self.settings, self._settings_path, self._now_ms)
        self._open.callback(schedule.stop)
        schedule.start()
        self._status["analysis"] = schedule.status

    def _start_pages(self, database: Database) -> None:
        from hub.web.factory import create_app
        from hub.web.server import Pages

        app = create_app(database, self.settings, clock=self._now_ms, status=self.status)
        pages = Pages(app, self.settings.web)
        self._open.callback(pages.stop)
        pages.start()
        self._say(f"Pages: {self.settings.web.url}")
        with database.read() as connection:
            if not people.accounts(connection):
                self._say("Nobody can log in yet. Add yourself with: packfold user add NAME")

    def status(self) -> dict[str, Any]:
        """What each part says about itself."""
        return {name: ask() for name, ask in self._status.items()}

    def stop(self) -> None:
        """Stop the parts in the reverse order; what was received is stored before this returns."""
        self._open.close()

    def run_until(self, stop: threading.Event) -> None:
        """Start, wait for ``stop``, and stop."""
        self.start()
        try:
            stop.wait()
        finally:
            self._say("Stopping: storing what was received.")
            self.stop()
