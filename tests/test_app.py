"""The whole hub in one process, spoken to as nodes and people do."""

import json
import os
import signal
import subprocess
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

import msgspec
import paho.mqtt.client as paho
import pytest
from cli.conftest import INVENTORY

from hub.app import Hub
from hub.errors import AlreadyRunningError, PackfoldError
from hub.mqtt.credentials import hash_secret, new_secret
from hub.settings import Analysis, Broker, Settings, Web
from hub.store import figures, inventory, inventory_change, inventory_file, people, readings, schema
from hub.store.engine import Database

START_MS = 1_781_085_600_000
LIMIT_S = 60


def prepare(data: Path) -> str:
    """A database with one node; its secret."""
    database = Database(data, checkpoints=True)
    schema.prepare(database)
    secret = new_secret()
    with database.write() as connection:
        inventory_change.apply(connection, inventory_file.parse(INVENTORY, "test"), who="test", now_ms=0)
        node_id = inventory.node_id(connection, "ridge-east")
        people.put_credential(connection, node_id, hash_secret(secret), 0)
    database.close()
    return secret


def settings(kind="auto"):
    return Settings(broker=Broker(port=0, kind=kind), web=Web(listen="127.0.0.1:0"), analysis=Analysis(every_s=0.5))


def now_ms():
    return time.time_ns() // 1_000_000


def wait_for(what):
    end = time.monotonic() + LIMIT_S
    while time.monotonic() < end:
        found = what()
        if found:
            return found
        time.sleep(0.1)
    return pytest.fail("it did not happen in time")


def telemetry(sequence, minutes=60):
    begin = START_MS / 1000 + (sequence - 1) * minutes * 60
    records = [{"bn": "urn:dev:test:", "n": "boot", "v": 1, "bt": begin}, {"n": "sequence", "v": sequence}]
    for minute in range(minutes):
        for name, unit, value in (("pack_voltage", "V", 10.4), ("pack_current", "A", 0.24)):
            records.append({"t": minute * 60, "n": name, "u": unit, "v": value})
    return msgspec.json.encode(records)


class Node:
    """A node with its login; remembers receipts."""

    def __init__(self, port, secret):
        self.receipts = []
        self.client = paho.Client(paho.CallbackAPIVersion.VERSION2, client_id="ridge-east")
        self.client.username_pw_set("ridge-east", secret)
        self.client.on_connect = lambda client, *_: client.subscribe("field/ridge-east/receipt", 1)
        self.client.on_message = lambda _c, _d, message: self.receipts.append(json.loads(message.payload))
        self.client.connect("127.0.0.1", port)
        self.client.loop_start()

    def send(self, payload):
        self.client.publish("field/ridge-east/telemetry", payload, qos=1).wait_for_publish(LIMIT_S)

    def close(self):
        self.client.disconnect()
        self.client.loop_stop()


@pytest.mark.broker
@pytest.mark.parametrize("kind", ["auto", "trial"])
def test_from_a_nodes_message_to_figures_and_a_receipt(tmp_path, kind):
    secret = prepare(tmp_path)
    said = []
    hub = Hub(settings(kind), tmp_path, say=said.append, now_ms=now_ms)
    hub.start()
    try:
        node = Node(hub.port, secret)
        for sequence in (1, 2, 3):
            node.send(telemetry(sequence))
        wait_for(lambda: {"boot": 1, "sequence": 3} in node.receipts)
        node.send(b"\xff\x00 nonsense")
        node.send(telemetry(4))
        wait_for(lambda: {"boot": 1, "sequence": 4} in node.receipts)
        day = wait_for(lambda: _days(hub.database) and _days(hub.database)[-1])
        wait_for(lambda: (_days(hub.database)[-1]["charge_ah"] or 0) > 0.9)
        node.close()
        with hub.database.read() as connection:
            assert readings.count(connection, inventory.node_id(connection, "ridge-east")) == 240
        # 0.24 A over the 239 minutes between the first and the last reading.
        assert _days(hub.database)[-1]["charge_ah"] == pytest.approx(0.24 * 239 / 60, rel=1e-6)
        assert day["date"] == "2026-06-10"
        assert hub.status()["collector"]["set_aside"] == 1
        assert any("Pages:" in line for line in said)
        assert any("user add" in line for line in said)
    finally:
        hub.stop()


@pytest.mark.broker
def test_a_clock_that_starts_in_the_past_delays_receiving_and_loses_nothing(tmp_path):
    secret = prepare(tmp_path)
    clock = {"now": 60_000}
    said = []
    hub = Hub(settings(), tmp_path, parts=("collect",), say=said.append, now_ms=lambda: clock["now"])
    hub.start()
    try:
        assert any("clock is behind" in line for line in said)
        node = Node(hub.port, secret)
        node.send(telemetry(1))
        time.sleep(2)
        assert not node.receipts
        clock["now"] = now_ms()
        # What the node sent while nobody was subscribed it sends again, as it has no receipt.
        wait_for(lambda: any("clock is right" in line for line in said))
        wait_for(lambda: hub.status()["collector"]["connected"])
        node.send(telemetry(1))
        wait_for(lambda: {"boot": 1, "sequence": 1} in node.receipts)
        node.close()
        assert hub.status()["collector"]["set_aside"] == 0
    finally:
        hub.stop()


def test_a_hub_that_waits_for_its_clock_can_be_stopped(tmp_path):
    prepare(tmp_path)
    hub = Hub(settings("trial"), tmp_path, parts=("collect",), say=lambda _: None, now_ms=lambda: 60_000)
    hub.start()
    begun = time.monotonic()
    hub.stop()
    assert time.monotonic() - begun < 15


def _days(database):
    with database.read() as connection:
        return figures.days(connection, inventory.node_id(connection, "ridge-east"))


def test_a_second_hub_on_the_same_folder_is_refused_and_the_first_goes_on(tmp_path):
    first = Hub(settings("trial"), tmp_path, parts=("web",), say=lambda _: None, now_ms=now_ms)
    first.start()
    try:
        second = Hub(settings("trial"), tmp_path, parts=("web",), say=lambda _: None, now_ms=now_ms)
        with pytest.raises(AlreadyRunningError, match="--data"):
            second.start()
    finally:
        first.stop()
    third = Hub(settings("trial"), tmp_path, parts=("web",), say=lambda _: None, now_ms=now_ms)
    third.start()
    third.stop()


def test_a_taken_port_is_one_sentence_and_leaves_nothing_running(tmp_path):
    import socket

    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]
        hub = Hub(
            Settings(web=Web(listen=f"127.0.0.1:{port}")), tmp_path, parts=("web",), say=lambda _: None, now_ms=now_ms
        )
        with pytest.raises(PackfoldError, match=f"{port}"):
            hub.start()
    again = Hub(settings(), tmp_path, parts=("web",), say=lambda _: None, now_ms=now_ms)
    again.start()
    again.stop()


def _running(data, port):
    """``packfold run`` as a process; returns it once its pages answer."""
    environment = {
        **os.environ,
        "PYTHONPATH": str(Path(__file__).parents[1]),
        "PACKFOLD_BROKER_PORT": "0",
        "PACKFOLD_WEB_LISTEN": f"127.0.0.1:{port}",
    }
    process = subprocess.Popen(
        [sys.executable, "-m", "hub", "--data", str(data), "run"], env=environment, stderr=subprocess.PIPE, text=True
    )

    def answers():
        assert process.poll() is None, process.stderr.read()
        try:
            with urllib.request.urlopen(f"http://127.0.0.1:{port}/healthz", timeout=2) as answer:
                return answer.status == 200
        except (urllib.error.URLError, OSError):
            return False

    wait_for(answers)
    return process


@pytest.mark.broker
@pytest.mark.parametrize("name", [signal.SIGTERM, signal.SIGKILL])
def test_run_ends_cleanly_and_starts_again_after_a_kill(tmp_path, name):
    import socket

    prepare(tmp_path)
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    for _ in range(2):
        process = _running(tmp_path, port)
        process.send_signal(name)
        code = process.wait(30)
        process.stderr.close()
        assert code == (0 if name is signal.SIGTERM else -signal.SIGKILL)
    database = Database(tmp_path, checkpoints=True)
    with database.read() as connection:
        assert database.integrity_fault(connection) == ""
    database.close()
