"""The managed child: started, told, watched, and never left behind."""

import os
import signal
import socket
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

import pytest
from mqtt.nodes import SECRET, need_mosquitto, settings_for, wait_for
from msgspec.structs import replace

from hub.errors import BrokerError, StoreError
from hub.mqtt import mosquitto as module
from hub.mqtt.credentials import hash_secret
from hub.mqtt.logins import Logins
from hub.mqtt.mosquitto import Mosquitto, check_port, find_program
from hub.store import inventory, people

pytestmark = pytest.mark.broker


@pytest.fixture
def made(enrolled):
    """Makes managed brokers, not started yet, and ends them after the test."""
    brokers: list[Mosquitto] = []
    program = need_mosquitto()

    def make(program: Path = program, **settings: object) -> Mosquitto:
        base = settings_for("mosquitto").broker
        brokers.append(Mosquitto(program, replace(base, **settings), enrolled.data, Logins(enrolled)))
        return brokers[-1]

    yield make
    for broker in brokers:
        broker.stop()


def alive(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


def answers(port: int) -> bool:
    try:
        socket.create_connection(("127.0.0.1", port), 1).close()
    except OSError:
        return False
    return True


@pytest.fixture
def stand_in():
    """Makes a stand-in for the executable, where every user may run it."""
    with tempfile.TemporaryDirectory() as folder:
        Path(folder).chmod(0o755)

        def make(text: str) -> Path:
            path = Path(folder) / "stand-in"
            path.write_text(f"#!/bin/sh\n{text}\n")
            path.chmod(0o755)
            return path

        yield make


def test_it_is_found_where_debian_keeps_it(monkeypatch):
    assert find_program() is not None
    monkeypatch.setenv("PATH", "/nonexistent")
    assert find_program() is not None
    monkeypatch.setattr(module, "PLACES", ("/nonexistent",))
    assert find_program() is None


def test_it_starts_tells_and_ends(made):
    broker = made()
    broker.start()
    pid = broker.pid
    assert alive(pid)
    assert broker.sentence == f"Broker: mosquitto on 127.0.0.1, port {broker.port}."
    assert broker.poll() == ""
    broker.stop()
    assert not alive(pid)
    assert not answers(broker.port)
    assert "mosquitto version" in (broker._data / "broker" / "broker.log").read_text()


@pytest.mark.skipif(os.geteuid() != 0, reason="only the superuser hands over to another user")
def test_started_by_the_superuser_it_runs_as_an_ordinary_user(made):
    broker = made()
    broker.start()
    status = Path(f"/proc/{broker.pid}/status").read_text()
    assert "\nUid:\t0\t" not in status


def test_a_taken_port_is_a_sentence_before_anything_is_started(made, monkeypatch):
    monkeypatch.setattr(module, "PORT_PATIENCE_S", 0.2)
    with socket.create_server(("127.0.0.1", 0)) as other:
        port = other.getsockname()[1]
        broker = made(port=port)
        monkeypatch.setattr(module, "check_port", lambda *a: check_port(*a, patience_s=0.2))
        with pytest.raises(BrokerError) as caught:
            broker.start()
    said = str(caught.value)
    assert said.startswith(f"Port {port} on 127.0.0.1 is taken by another program")
    assert "choose another broker.port" in said
    assert broker.pid is None


def test_a_port_taken_in_the_last_moment_is_the_same_sentence(made, monkeypatch):
    with socket.create_server(("127.0.0.1", 0)) as other:
        port = other.getsockname()[1]
        broker = made(port=port)
        monkeypatch.setattr(module, "check_port", lambda *_: port)
        monkeypatch.setattr(module, "_takes_connections", lambda *_: False)
        with pytest.raises(BrokerError, match=rf"Port {port} on 127\.0\.0\.1 is taken by another program"):
            broker.start()


def test_a_port_that_becomes_free_soon_is_waited_for():
    other = socket.create_server(("127.0.0.1", 0))
    port = other.getsockname()[1]
    threading.Timer(0.3, other.close).start()
    assert check_port("127.0.0.1", port, threading.Event()) == port


@pytest.mark.parametrize("listen", ["203.0.113.7", "no.such.name.invalid"])
def test_an_address_of_another_machine_is_a_sentence(made, listen):
    with pytest.raises(BrokerError, match=r"is no address of this machine"):
        made(listen=listen, port=0).start()


def test_a_program_that_is_no_broker_is_a_sentence(made, stand_in):
    broker = made()
    broker._program = stand_in("echo 'no such option: -c'; exit 3")
    with pytest.raises(BrokerError, match=r"Mosquitto ends at once: “no such option: -c”\. See .*broker\.log"):
        broker.start()


def test_a_program_that_cannot_be_run_is_a_sentence(made):
    with pytest.raises(BrokerError, match=r"Mosquitto ends at once: “cannot run .*missing: No such file"):
        made(Path("/nonexistent/missing")).start()


def test_a_program_that_never_listens_is_given_up(made, stand_in, monkeypatch):
    monkeypatch.setattr(module, "START_LIMIT_S", 0.3)
    broker = made()
    broker._program = stand_in("exec sleep 60")
    began = time.monotonic()
    with pytest.raises(BrokerError, match="does not take connections within"):
        broker.start()
    assert time.monotonic() - began < 5
    assert broker.pid is None


def test_a_store_on_which_it_crashes_is_kept_aside(made, stand_in):
    broker = made()
    broker._folder.mkdir()
    (broker._folder / "mosquitto.db").write_bytes(b"poison")
    real = broker._program
    broker._program = stand_in(f'[ -e mosquitto.db ] && kill -SEGV $$\nexec {real} "$@"')
    broker.start()
    assert "mosquitto.db.unreadable-" in broker.sentence


def test_a_database_that_cannot_be_read_is_no_start(made, monkeypatch):
    broker = made()

    def away() -> dict[str, str]:
        raise StoreError("The database is away.")

    monkeypatch.setattr(broker._logins, "read", away)
    with pytest.raises(StoreError, match="The database is away"):
        broker.start()


def test_a_failure_nobody_foresaw_is_no_start_either(made, monkeypatch):
    broker = made()
    monkeypatch.setattr(broker._logins, "read", lambda: 1 / 0)
    with pytest.raises(BrokerError, match=r"cannot be started: division by zero"):
        broker.start()


def test_a_database_that_is_away_later_is_told_and_changes_nothing(made, node, monkeypatch):
    broker = made()
    broker.start()
    changed = broker._logins.changed
    monkeypatch.setattr(broker._logins, "changed", lambda: 1 / 0)
    wait_for(lambda: "A change of credentials cannot be passed on" in broker.poll())
    assert node(broker.port, "ridge-east").admitted
    monkeypatch.setattr(broker._logins, "changed", changed)
    wait_for(lambda: broker.poll() == "")


def test_a_program_that_will_not_end_is_killed(made, stand_in, monkeypatch):
    monkeypatch.setattr(module, "STOP_LIMIT_S", 0.3)
    monkeypatch.setattr(module, "_takes_connections", lambda *_: True)
    broker = made()
    broker._program = stand_in("trap '' TERM\nwhile true; do sleep 0.05; done")
    broker.start()
    pid = broker.pid
    time.sleep(0.2)
    broker.stop()
    assert not alive(pid)


@pytest.mark.parametrize("store", [b"\0" * 5000, b"torn"])
def test_a_store_that_cannot_be_read_is_kept_aside_and_the_broker_starts(made, store):
    """What a power cut leaves."""
    first = made()
    first.start()
    first.stop()
    (first._folder / "mosquitto.db").write_bytes(store)
    second = made()
    second.start()
    (kept,) = first._folder.glob("mosquitto.db.unreadable-*")
    assert kept.read_bytes() == store
    assert kept.name in second.sentence
    assert kept.name in second.poll()


def test_only_the_newest_unreadable_stores_are_kept(made):
    first = made()
    first.start()
    first.stop()
    for year in range(2020, 2026):
        (first._folder / f"mosquitto.db.unreadable-{year}").write_bytes(b"old")
    (first._folder / "mosquitto.db").write_bytes(b"torn")
    made().start()
    assert len(list(first._folder.glob("mosquitto.db.unreadable-*"))) == module.STORES_KEPT


def test_a_child_that_dies_is_started_again_and_that_is_told(made, node, monkeypatch):
    monkeypatch.setattr(module, "FIRST_WAIT_S", 0.2)
    broker = made()
    broker.start()
    first = broker.pid
    os.kill(first, signal.SIGKILL)
    wait_for(lambda: "stopped" in broker.poll())
    wait_for(lambda: broker.pid not in {None, first} and broker.poll() == "")
    assert answers(broker.port)
    assert node(broker.port, "ridge-east").admitted


def test_a_child_that_cannot_be_started_again_is_told_and_tried_on(made, stand_in, monkeypatch):
    monkeypatch.setattr(module, "FIRST_WAIT_S", 0.05)
    monkeypatch.setattr(module, "LONGEST_WAIT_S", 0.05)
    broker = made()
    broker.start()
    program = broker._program
    broker._program = stand_in("echo 'out of order'; exit 1")
    os.kill(broker.pid, signal.SIGKILL)
    wait_for(lambda: "out of order" in broker.poll())
    broker._program = program
    wait_for(lambda: broker.poll() == "" and answers(broker.port))


def test_credentials_given_and_taken_away_reach_the_running_broker(made, node, enrolled):
    broker = made()
    broker.start()
    pid = broker.pid
    client = node(broker.port, "ridge-east")
    assert client.admitted
    with enrolled.write() as connection:
        people.revoke_credential(connection, inventory.node_id(connection, "ridge-east"))
    wait_for(lambda: not client.connected)
    assert not node(broker.port, "ridge-east").admitted
    with enrolled.write() as connection:
        people.put_credential(connection, inventory.node_id(connection, "ridge-east"), hash_secret(SECRET), 0)
    wait_for(lambda: node(broker.port, "ridge-east").admitted)
    assert broker.pid == pid


HUB = """
import sys, time
from pathlib import Path
from hub.mqtt.logins import Logins
from hub.mqtt.mosquitto import Mosquitto, find_program
from hub.settings import Broker
from hub.store.engine import Database

data = Path(sys.argv[1])
broker = Mosquitto(find_program(), Broker(port=0), data, Logins(Database(data)))
broker.start()
print(broker.pid, broker.port, flush=True)
time.sleep(60)
"""


@pytest.mark.skipif(sys.platform != "linux", reason="the kernel's request is Linux's own")
def test_the_child_does_not_outlive_a_hub_that_is_killed(enrolled):
    with subprocess.Popen([sys.executable, "-c", HUB, str(enrolled.data)], stdout=subprocess.PIPE, text=True) as hub:
        pid, port = map(int, hub.stdout.readline().split())
        assert alive(pid)
        assert answers(port)
        hub.send_signal(signal.SIGKILL)
    wait_for(lambda: not alive(pid), 5)
    assert not answers(port)
