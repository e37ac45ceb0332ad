"""What ``packfold demo`` does: a hub on loopback with invented nodes that speak to it as real ones would."""

import shutil
import socket
import subprocess
import sys
import threading
from pathlib import Path

import msgspec
import platformdirs

from hub.app import Hub
from hub.cli.common import Context, now_ms, progress, say
from hub.cli.running import DEMONSTRATION_MARK, stop_signal
from hub.demo import scenario
from hub.demo.__main__ import Order, moment
from hub.errors import PackfoldError, UsageError
from hub.jobs.analysis import bring_up_to_date
from hub.mqtt.credentials import hash_secret, new_secret
from hub.settings import Analysis, Broker, Settings, Web
from hub.store import inventory, inventory_change, inventory_file, people
from hub.store.engine import Database
from hub.web.passwords import hash_password

LOOPBACK = "127.0.0.1"
PREFERRED_WEB_PORT = 8740
# Live readings come every ten seconds; figures that follow within a quarter of a minute feel alive.
ANALYSIS_S = 15.0
SETTLE_S = 120.0


def demonstrate(
    context: Context, days: int, data: Path | None, listen: str | None, broker_port: int | None, *, history_only: bool
) -> None:
    """Run the demonstration until it is stopped, or until its history is in the figures.

    Raises
    ------
    PackfoldError
        The folder holds something else, or a port that was asked for is taken.
    """
    folder = data or context.given_data or platformdirs.user_data_path("packfold-demonstration")
    _fresh_folder(folder)
    settings = _settings(listen, broker_port)
    demo_context = Context(None, folder)
    demo_context.settings = settings
    now = now_ms()
    with demo_context.database() as database:
        logins, link = _prepare(database, days, now)
    say(f"Data of the demonstration: {folder}")
    hub = Hub(settings, folder, say=say, now_ms=now_ms)
    with stop_signal() as stop:
        hub.start()
        try:
            say(f"Open the pages with this link, once: {settings.web.url}/enter/{link}")
            assert hub.port is not None
            nodes = _Nodes(Order(hub.port, settings.broker.root, logins, days, now, live=not history_only))
            try:
                nodes.play(stop)
                if history_only:
                    assert hub.database is not None
                    done = bring_up_to_date(hub.database)
                    say(f"History is in the figures: {done.computed + done.unchanged} days.")
                else:
                    say("The history is in; now the nodes send a reading every ten seconds. Stop with Ctrl-C.")
                    nodes.wait(stop)
            finally:
                nodes.stop()
        finally:
            hub.stop()


def _fresh_folder(folder: Path) -> None:
    """An empty folder with our mark; whatever an earlier demonstration left is removed, nothing else ever."""
    if folder.exists():
        if any(folder.iterdir()) and not (folder / DEMONSTRATION_MARK).exists():
            raise UsageError(
                f"The folder {folder} holds something that is not a demonstration. Name an empty one with --data."
            )
        # A hub that still works on the folder would lose it under its feet: its lock is asked first.
        with Context(None, folder).database():
            pass
        shutil.rmtree(folder)
    folder.mkdir(parents=True)
    (folder / DEMONSTRATION_MARK).write_text(
        "Invented nodes, packs and weather. This folder is emptied by each demonstration.\n"
    )


def _settings(listen: str | None, broker_port: int | None) -> Settings:
    if listen is None:
        port = PREFERRED_WEB_PORT if _free(PREFERRED_WEB_PORT) else _any_free_port()
        listen = f"{LOOPBACK}:{port}"
    web = msgspec.convert({"listen": listen}, Web)
    if web.address[0] not in {LOOPBACK, "localhost", "::1"}:
        raise UsageError("The demonstration serves this machine only: use --web 127.0.0.1:PORT.")
    return Settings(
        broker=Broker(listen=LOOPBACK, host=LOOPBACK, port=broker_port or _any_free_port()),
        web=web,
        analysis=Analysis(every_s=ANALYSIS_S),
    )


def _free(port: int) -> bool:
    with socket.socket() as probe:
        probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            probe.bind((LOOPBACK, port))
        except OSError:
            return False
    return True


def _any_free_port() -> int:
    with socket.socket() as probe:
        probe.bind((LOOPBACK, 0))
        port: int = probe.getsockname()[1]
        return port


def _prepare(database: Database, days: int, now: int) -> tuple[dict[str, tuple[str, str]], str]:
    """Load the scenario's inventory; logins for its nodes, and a one-use link to the pages."""
    rows = inventory_file.parse(scenario.inventory_toml(moment(now), days), "the scenario")
    logins: dict[str, tuple[str, str]] = {}
    with database.write() as connection:
        inventory_change.apply(connection, rows, who="demonstration", now_ms=now)
        for name, node_id in inventory.node_ids(connection).items():
            secret = new_secret()
            people.put_credential(connection, node_id, hash_secret(secret), now)
            logins[name] = (name, secret)
        people.put_account(connection, "keeper", hash_password(new_secret()), "keeper", now)
        keeper = people.account(connection, "keeper")
        assert keeper is not None
        link = people.grant(connection, keeper.id, "link", now)
    return logins, link


class _Nodes:
    """The simulated nodes, in a process of their own: they reach the hub through the broker alone."""

    def __init__(self, order: Order) -> None:
        self._order = order
        self._child = subprocess.Popen(
            [sys.executable, "-m", "hub.demo"], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
        )

    def play(self, stop: threading.Event) -> None:
        """Until the history is sent, with a progress bar."""
        assert self._child.stdin is not None
        assert self._child.stdout is not None
        self._child.stdin.write(msgspec.json.encode(self._order).decode())
        self._child.stdin.close()
        with progress("History, readings", None) as told:
            for line in self._child.stdout:
                if stop.is_set():
                    return
                said = msgspec.json.decode(line)
                if "error" in said:
                    raise PackfoldError(said["error"])
                if "history" in said:
                    break
                told(said["readings"])
        if not self._order.live and self._child.wait(timeout=SETTLE_S) != 0:
            raise PackfoldError("The simulated nodes stopped early. Start the demonstration again.")

    def wait(self, stop: threading.Event) -> None:
        """Until somebody stops the demonstration, or the nodes end by themselves."""
        while not stop.wait(1.0):
            if self._child.poll() is not None:
                raise PackfoldError("The simulated nodes stopped early. Start the demonstration again.")

    def stop(self) -> None:
        """End the nodes."""
        if self._child.poll() is None:
            self._child.terminate()
            try:
                self._child.wait(timeout=10)
            except subprocess.TimeoutExpired:
                self._child.kill()
        if self._child.stdout is not None:
            self._child.stdout.close()
