"""When figures are brought up to date.

The computing runs in a process of its own that ends after the work: the libraries it needs take a hundred megabytes and
a second of start, and neither belongs into the process that receives. It is ``packfold analyse``, so that the
schedule and a person run the same code.

The pause between runs is a pause, not a time of day: a clock that jumps by decades, as on a board without a battery
clock, neither delays the next run nor calls for all the missed ones.
"""

import json
import subprocess
import sys
import threading
from collections.abc import Callable
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from hub.settings import Settings
from hub.store import facts
from hub.store.engine import Database

# A run that takes longer than this hangs; it is ended and tried again at the next turn.
LONGEST_RUN_S = 3600.0
STOP_WAIT_S = 10.0


@dataclass(slots=True)
class JobStatus:
    """How the analysis fares: instants in UTC milliseconds, and the last complaint if the last run failed."""

    last_started_ms: int | None = None
    last_finished_ms: int | None = None
    last_computed: int | None = None
    failures_in_a_row: int = 0
    last_error: str = ""


class Schedule:
    """Runs the analysis once at the start and then at the pace of the settings, whenever there is something new."""

    def __init__(
        self,
        database: Database,
        data: Path,
        settings: Settings,
        settings_path: Path | None,
        now_ms: Callable[[], int],
    ) -> None:
        self._database = database
        self._command = [sys.executable, "-m", "hub", "--data", str(data)]
        if settings_path is not None:
            self._command += ["--settings", str(settings_path)]
        self._command += ["analyse", "--format", "json"]
        self._now_ms = now_ms
        self._status = JobStatus()
        self._seen_revision = -1
        self._child: subprocess.Popen[str] | None = None
        self._starting = threading.Lock()
        self._stopping = threading.Event()
        self._every_s = settings.analysis.every_s
        self._thread = threading.Thread(target=self._turns, name="analysis", daemon=True)

    def start(self) -> None:
        """Begin; the first run starts at once."""
        self._thread.start()

    def stop(self) -> None:
        """End the schedule and a run that is under way; what it had not written yet the next start computes."""
        self._stopping.set()
        with self._starting:
            child = self._child
        if child is not None and child.poll() is None:
            child.terminate()
        if self._thread.is_alive():
            self._thread.join(STOP_WAIT_S)

    def _turns(self) -> None:
        while not self._stopping.is_set():
            try:
                self.run_once()
            except Exception as error:  # noqa: BLE001 - the schedule must go on, and says what happened
                self._fail(f"The analysis could not be started: {error}")
            self._stopping.wait(self._every_s)

    def status(self) -> dict[str, Any]:
        """The state as plain values."""
        return asdict(self._status)

    def run_once(self) -> None:
        """Compute if something changed since the last run that succeeded."""
        if self._stopping.is_set():
            return
        with self._database.read() as connection:
            revision = facts.revision(connection)
        if revision == self._seen_revision:
            return
        self._status.last_started_ms = self._now_ms()
        error, document = self._run_child()
        self._status.last_finished_ms = self._now_ms()
        if error:
            self._fail(error)
        else:
            self._status.failures_in_a_row = 0
            self._status.last_error = ""
            self._status.last_computed = document.get("computed")
            self._seen_revision = revision

    def _fail(self, error: str) -> None:
        self._status.failures_in_a_row += 1
        self._status.last_error = error

    def _run_child(self) -> tuple[str, dict[str, Any]]:
        with self._starting:
            if self._stopping.is_set():
                return "The hub was stopped.", {}
            self._child = subprocess.Popen(self._command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
        try:
            out, complaint = self._child.communicate(timeout=LONGEST_RUN_S)
        except subprocess.TimeoutExpired:
            self._child.kill()
            self._child.communicate()
            return f"The analysis took longer than {LONGEST_RUN_S:.0f} s and was ended.", {}
        if self._stopping.is_set():
            return "The hub was stopped.", {}
        if self._child.returncode != 0:
            last = complaint.strip().splitlines()[-1:] or [f"exit code {self._child.returncode}"]
            return last[0], {}
        return "", json.loads(out)
