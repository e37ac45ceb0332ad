"""Mosquitto as a child of the hub: started with files of our own, watched, started again, and never left behind."""

import errno
import os
import shutil
import signal
import socket
import subprocess
import sys
import threading
import time
from pathlib import Path
from typing import Final

from hub.errors import BrokerError, PackfoldError
from hub.mqtt import mosquitto_config as config
from hub.mqtt import rights, tether
from hub.mqtt.access import Access
from hub.mqtt.bounded_log import BoundedLog
from hub.mqtt.logins import Logins, folder, leave_for_selfcheck
from hub.mqtt.rights import HUB_USER
from hub.settings import Broker

PLACES: Final = ("/usr/sbin", "/usr/local/sbin", "/sbin")

# A broker of a hub that was killed saves what it holds before it gives the port back.
PORT_PATIENCE_S: Final = 5.0
# Reading and writing what it holds takes its time on a slow card.
START_LIMIT_S: Final = 60.0
STOP_LIMIT_S: Final = 30.0
TURN_S: Final = 0.1
FIRST_WAIT_S: Final = 0.5
LONGEST_WAIT_S: Final = 30.0
# A child that ran this long was sound; the next failure begins with the short wait again.
SOUND_S: Final = 60.0
STORES_KEPT: Final = 3
CRASHED: Final = "it crashed"
_CRASHES: Final = {-signal.SIGSEGV, -signal.SIGBUS, -signal.SIGABRT}
# How long it is told that the broker lost what it had stored.
NOTE_S: Final = 24 * 3600.0


def find_program() -> Path | None:
    """Mosquitto's executable. Debian keeps it where an ordinary user's search path does not look."""
    found = shutil.which("mosquitto") or shutil.which("mosquitto", path=os.pathsep.join(PLACES))
    return Path(found) if found else None


class Mosquitto:
    """A running mosquitto.

    Parameters
    ----------
    program
        The executable.
    settings, data, logins
        Where it listens, the hub's data folder, and who may log in.
    """

    def __init__(self, program: Path, settings: Broker, data: Path, logins: Logins) -> None:
        self._program = program
        self._settings = settings
        self._data = data
        self._logins = logins
        self._folder = folder(data) / "mosquitto"
        self._log = BoundedLog(folder(data) / "broker.log")
        self._child: subprocess.Popen[bytes] | None = None
        self._reader: threading.Thread | None = None
        self._thread = threading.Thread(target=self._run, name="broker", daemon=True)
        self._settled = threading.Event()
        self._stopping = threading.Event()
        self._failure: PackfoldError | None = None
        self._trouble = ""
        self._credentials_trouble = ""
        self._note = ""
        self._note_until = 0.0
        self.access = Access(_near(settings.listen), settings.port, HUB_USER, HUB_USER, logins.secret)

    @property
    def port(self) -> int:
        """Where it listens."""
        return self.access.port

    @property
    def sentence(self) -> str:
        """What it is, for a person."""
        return f"Broker: mosquitto on {self._settings.listen}, port {self.port}.{self._note and ' ' + self._note}"

    @property
    def pid(self) -> int | None:
        """The child's process id while there is one."""
        return self._child.pid if self._child is not None else None

    def start(self) -> None:
        """Start it and wait until it takes connections.

        Raises
        ------
        BrokerError
            The port is taken, or mosquitto ends at once; the text says what to do.
        """
        self._thread.start()
        self._settled.wait(2 * START_LIMIT_S + PORT_PATIENCE_S)
        if self._failure is not None:
            self._thread.join(STOP_LIMIT_S + 5)
            raise self._failure
        if not self._settled.is_set():
            self.stop()
            raise BrokerError(f"Mosquitto does not start within {START_LIMIT_S:.0f} s. See {self._log_place}.")

    def poll(self) -> str:
        """What is wrong with it now; empty when nothing is."""
        if self._settled.is_set() and not self._thread.is_alive() and not self._stopping.is_set():
            return "The broker has ended. Start the hub again."
        note = self._note if time.monotonic() < self._note_until else ""
        return self._trouble or self._credentials_trouble or note

    def stop(self) -> None:
        """End it; what it still holds it saves."""
        self._stopping.set()
        if self._thread.is_alive():
            self._thread.join(STOP_LIMIT_S + 5)

    # The thread that owns the child. It must live as long as the child: see ``tether``. ------------------------------

    def _run(self) -> None:
        try:
            try:
                self._begin()
            except PackfoldError as error:
                self._failure = error
                return
            except Exception as error:  # noqa: BLE001 - ``start`` must not take it for a success
                self._failure = BrokerError(f"Mosquitto cannot be started: {error}. See to the data folder's rights.")
                return
            finally:
                self._settled.set()
            self._watch()
        finally:
            self._end()

    def _begin(self) -> None:
        port = check_port(self._settings.listen, self._settings.port, self._stopping)
        self.access = Access(self.access.host, port, HUB_USER, HUB_USER, self._logins.secret)
        config.write_all(self._folder, self._settings, port, self._logins.read())
        leave_for_selfcheck(self._data, self.access)
        self._start_child()

    def _start_child(self) -> None:
        """Start the child; if it cannot read what it had stored, put that aside and start it once more."""
        problem = self._try_child()
        if problem is not None and self._is_about_the_store(problem):
            self._move_store_aside()
            problem = self._try_child()
        if problem is not None:
            raise BrokerError(self._explain(problem))

    def _try_child(self) -> str | None:
        """Start the child; what it said when it ended instead of taking connections."""
        self._end()
        self._log.forget()
        uid, gid = config.owner() or (-1, -1)
        command = [sys.executable, "-I", "-S", tether.__file__, str(os.getpid()), str(uid), str(gid)]
        child = subprocess.Popen(
            [*command, str(self._program), "-c", config.CONFIGURATION],
            cwd=self._folder,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            env={**os.environ, "LC_ALL": "C"},
            # Ctrl-C on a terminal is for the hub, which then ends the broker when it needs it no longer.
            start_new_session=True,
        )
        self._child = child
        assert child.stdout is not None
        self._reader = threading.Thread(target=self._log.follow, args=(child.stdout,), name="broker log", daemon=True)
        self._reader.start()
        deadline = time.monotonic() + START_LIMIT_S
        while time.monotonic() < deadline and not self._stopping.is_set():
            if child.poll() is not None:
                self._reader.join(1)
                said = "\n".join(self._log.last_lines())
                return f"{said}\n{CRASHED}" if child.returncode in _CRASHES else said or f"exit code {child.returncode}"
            if _takes_connections(self.access.host, self.access.port):
                return None
            time.sleep(0.02)
        return f"it does not take connections within {START_LIMIT_S:.0f} s"

    def _watch(self) -> None:
        wait, started = FIRST_WAIT_S, time.monotonic()
        looked = started
        while not self._stopping.wait(TURN_S):
            now = time.monotonic()
            child = self._child
            if child is not None and child.poll() is None:
                self._trouble = ""
                if now - looked >= rights.LOOK_S:
                    looked = now
                    self._follow_credentials(child)
                continue
            if not self._trouble:
                code = "" if child is None else f" (exit code {child.returncode})"
                self._trouble = f"The broker stopped{code} and is started again. If it goes on, see {self._log_place}."
            if now - started > SOUND_S:
                wait = FIRST_WAIT_S
            if self._stopping.wait(wait):
                return
            wait = min(2 * wait, LONGEST_WAIT_S)
            started = time.monotonic()
            try:
                self._start_child()
            except Exception as error:  # noqa: BLE001 - whatever it is, the next attempt may do
                self._trouble = f"The broker cannot be started again: {error}"

    def _follow_credentials(self, child: subprocess.Popen[bytes]) -> None:
        try:
            if self._logins.changed():
                config.write_passwords(self._folder, self._logins.read())
                child.send_signal(signal.SIGHUP)
            self._credentials_trouble = ""
        except Exception as error:  # noqa: BLE001 - the broker goes on with the credentials it knows
            self._credentials_trouble = f"A change of credentials cannot be passed on to the broker yet: {error}"

    def _end(self) -> None:
        child = self._child
        if child is None:
            return
        if child.poll() is None:
            child.terminate()
            try:
                child.wait(STOP_LIMIT_S)
            except subprocess.TimeoutExpired:
                child.kill()
                child.wait()
        if self._reader is not None:
            self._reader.join(1)
        if child.stdout is not None and not (self._reader is not None and self._reader.is_alive()):
            child.stdout.close()
        self._child = None

    # What went wrong, in words ---------------------------------------------------------------------------------------

    @property
    def _log_place(self) -> Path:
        return self._data / "broker" / "broker.log"

    def _is_about_the_store(self, said: str) -> bool:
        return ("database" in said or CRASHED in said) and (self._folder / config.STORE).exists()

    def _move_store_aside(self) -> None:
        store = self._folder / config.STORE
        kept = store.with_name(f"{store.name}.unreadable-{time.strftime('%Y%m%dT%H%M%SZ', time.gmtime())}")
        store.replace(kept)
        for old in sorted(self._folder.glob(f"{store.name}.unreadable-*"))[:-STORES_KEPT]:
            old.unlink()
        self._note_until = time.monotonic() + NOTE_S
        self._note = (
            f"The broker could not read what it had stored and began anew; the old file is kept as {kept.name}. What "
            "it held comes again from nodes that keep their readings until the receipt."
        )

    def _explain(self, said: str) -> str:
        place = f"port {self.access.port} on {self._settings.listen}"
        if "Address already in use" in said:
            return _taken(place)
        if "assign requested address" in said:
            return _foreign(self._settings.listen)
        if "Error: Permission denied" in said:
            return f"Mosquitto may not use {place}. Choose a broker.port above 1023."
        last = said.strip().splitlines()[-1]
        return f"Mosquitto ends at once: “{last}”. See {self._log_place}."


def check_port(listen: str, port: int, give_up: threading.Event, patience_s: float = PORT_PATIENCE_S) -> int:
    """Make sure that a port can be listened on; port 0 picks a free one.

    Waits a little for the broker of a hub that has just ended.

    Raises
    ------
    BrokerError
        It is taken, or the address is not this machine's.
    """
    deadline = time.monotonic() + patience_s
    while True:
        try:
            return _bind_once(listen, port)
        except PermissionError:
            raise BrokerError(f"The hub may not listen on port {port}. Choose a broker.port above 1023.") from None
        except OSError as error:
            if isinstance(error, socket.gaierror) or error.errno == errno.EADDRNOTAVAIL:
                raise BrokerError(_foreign(listen)) from None
            if time.monotonic() >= deadline or give_up.wait(0.1):
                raise BrokerError(_taken(f"port {port} on {listen}")) from None


def _bind_once(listen: str, port: int) -> int:
    family, kind, protocol, _, address = socket.getaddrinfo(listen, port, type=socket.SOCK_STREAM)[0]
    with socket.socket(family, kind, protocol) as probe:
        probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        probe.bind(address)
        probe.listen(1)
        return int(probe.getsockname()[1])


def _taken(place: str) -> str:
    return (
        f"{place[0].upper()}{place[1:]} is taken by another program, perhaps a broker that the system starts by "
        "itself (“systemctl status mosquitto”). Stop that one, choose another broker.port, or use it with "
        "broker.embedded = false."
    )


def _foreign(listen: str) -> str:
    return (
        f"broker.listen is {listen}, which is no address of this machine. Set it to 127.0.0.1 for this machine "
        "alone, to 0.0.0.0 for every network, or to one of its addresses."
    )


def _near(listen: str) -> str:
    """The address at which this machine reaches a listener."""
    return {"0.0.0.0": "127.0.0.1", "::": "::1"}.get(listen, listen)  # noqa: S104 - compared, not bound


def _takes_connections(host: str, port: int) -> bool:
    try:
        with socket.create_connection((host, port), timeout=1):
            return True
    except OSError:
        return False
