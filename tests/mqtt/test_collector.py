"""Receiving from end to end: real brokers, a real database, nodes that speak through a library of their own."""

import json
import os
import random
import signal
import sqlite3
import subprocess
import sys
import threading
import time
from contextlib import ExitStack
from dataclasses import asdict

import pytest
from mqtt.nodes import EPOCH_S, LIMIT_S, now_ms, outside, pack, stored_count, wait_for
from msgspec.structs import replace

from hub.errors import StoreError
from hub.mqtt import committing
from hub.mqtt.broker import OutsideBroker
from hub.mqtt.collector import Collector, CollectorStatus
from hub.mqtt.rights import HUB_USER
from hub.mqtt.trial import TrialBroker
from hub.store import aside, intake, inventory, inventory_change, inventory_file, readings

# With either broker ---------------------------------------------------------------------------------------------------


def test_readings_are_stored_and_receipted(either, collecting, node, enrolled):
    collector = collecting(*either)
    east = node(either[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    for sequence in range(1, 31):
        east.publish(pack(sequence))
    wait_for(lambda: east.receipts() and east.receipts()[-1] == {"boot": 1, "sequence": 30})
    assert stored_count(enrolled, "ridge-east") == 30
    status = collector.status()
    assert (status.received, status.stored, status.repeated, status.set_aside) == (30, 30, 0, 0)
    wait_for(lambda: collector.status().unacknowledged == 0)
    assert status.problems == ()
    assert status.last_error == ""
    assert status.last_message_ms <= status.last_commit_ms <= now_ms()
    with enrolled.read() as connection:
        series = readings.read(
            connection,
            inventory.node_id(connection, "ridge-east"),
            EPOCH_S * 1000,
            (EPOCH_S + 100) * 1000,
        )
    assert series.time_ms.tolist() == [(EPOCH_S + s) * 1000 for s in range(1, 31)]
    assert series.get("pack_voltage").tolist() == [10 + s / 100 for s in range(1, 31)]


def test_no_receipt_beyond_what_is_missing_and_one_when_it_has_come(either, collecting, node):
    collecting(*either)
    east = node(either[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    for sequence in (1, 2, 4, 5):
        east.publish(pack(sequence))
    wait_for(lambda: east.receipts() and east.receipts()[-1]["sequence"] == 2)
    east.publish(pack(3))
    wait_for(lambda: east.receipts()[-1]["sequence"] == 5)
    assert all(receipt["sequence"] in {1, 2, 5} for receipt in east.receipts())


def test_a_node_that_counts_nothing_is_read_and_gets_no_receipt(either, collecting, node, enrolled):
    collecting(*either)
    east = node(either[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    east.publish(pack(1, boot=None))
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)
    time.sleep(0.2)
    assert east.receipts() == []


def test_a_bad_message_is_set_aside_and_the_stream_goes_on(either, collecting, node, enrolled):
    collector = collecting(*either)
    east = node(either[0].port, "ridge-east")
    for sequence, payload in enumerate((pack(1), b"junk", b"\xff\x00", pack(2), b"", pack(3))):
        del sequence
        east.publish(payload)
    wait_for(lambda: collector.status().stored == 3)
    wait_for(lambda: collector.status().unacknowledged == 0)
    assert collector.status().set_aside == 3
    assert collector.status().faults == 0
    with enrolled.read() as connection:
        kept = aside.newest(connection, inventory.node_id(connection, "ridge-east"))
    assert [item.reason for item in kept] == ["malformed"] * 3
    assert {item.origin for item in kept} == {"field/ridge-east/telemetry"}


def test_the_same_message_again_is_a_repeat_and_receipted_again(either, collecting, node, enrolled):
    collector = collecting(*either)
    east = node(either[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    east.publish(pack(1))
    wait_for(lambda: len(east.receipts()) == 1)
    east.publish(pack(1))
    wait_for(lambda: len(east.receipts()) == 2)
    assert (collector.status().stored, collector.status().repeated) == (1, 1)
    assert stored_count(enrolled, "ridge-east") == 1


def test_presence_is_noted_and_a_node_that_vanishes_is_offline(either, collecting, node, enrolled):
    collecting(*either)
    east = node(either[0].port, "ridge-east", will=True)
    east.publish(b"online", "presence", retain=True)

    def state() -> str | None:
        with enrolled.read() as connection:
            found = intake.presence_of(connection).get(inventory.node_id(connection, "ridge-east"))
        return found and found[0]

    wait_for(lambda: state() == "online")
    east.vanish()
    wait_for(lambda: state() == "offline")


def test_a_database_that_is_locked_for_a_while_loses_nothing(either, collecting, node, enrolled):
    collector = collecting(*either)
    east = node(either[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    blocker = sqlite3.connect(enrolled.file, isolation_level=None)
    blocker.execute("BEGIN IMMEDIATE")
    for sequence in range(1, 101):
        east.publish(pack(sequence))
    time.sleep(0.5)
    assert collector.status().connected
    assert collector.status().stored == 0
    assert east.receipts() == []
    blocker.execute("COMMIT")
    blocker.close()
    wait_for(lambda: east.receipts() and east.receipts()[-1]["sequence"] == 100)
    assert stored_count(enrolled, "ridge-east") == 100
    wait_for(lambda: collector.status().unacknowledged == 0)


def test_what_was_received_is_stored_before_it_ends(either, collecting, node, enrolled):
    collector = collecting(*either)
    east = node(either[0].port, "ridge-east")
    for sequence in range(1, 301):
        east.post(pack(sequence))
    wait_for(lambda: collector.status().received >= 100)
    collector.stop()
    status = collector.status()
    assert status.stored == status.received == stored_count(enrolled, "ridge-east")
    if isinstance(either[0], TrialBroker):
        return  # it forgets what it had sent and nobody acknowledged
    again = collecting(*either)
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 300)
    assert again.status().repeated == 0


# With a broker that keeps what was not acknowledged -------------------------------------------------------------------


@pytest.mark.broker
def test_a_connection_that_breaks_between_storing_and_acknowledging_stores_once(
    mosquitto, collecting, node, enrolled, monkeypatch
):
    collector = collecting(*mosquitto)
    link = collector._link
    acknowledge = link.acknowledge
    stored_at_break: list[int] = []

    def broken(generation: int, mids: list[int]) -> None:
        if not stored_at_break:
            stored_at_break.append(stored_count(enrolled, "ridge-east"))
            link.renew("the test breaks the connection")
            wait_for(lambda: link.state().generation > generation and link.state().connected)
        acknowledge(generation, mids)

    monkeypatch.setattr(link, "acknowledge", broken)
    east = node(mosquitto[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")
    for sequence in range(1, 6):
        east.publish(pack(sequence))
    wait_for(lambda: stored_at_break and stored_count(enrolled, "ridge-east") == 5)
    assert stored_at_break[0] > 0, "it was acknowledged before it was stored"
    wait_for(lambda: collector.status().unacknowledged == 0 and collector.status().repeated > 0)
    assert link.stale >= 1
    assert collector.status().stored == 5
    wait_for(lambda: east.receipts() and east.receipts()[-1]["sequence"] == 5)


@pytest.mark.broker
def test_after_the_broker_was_killed_it_is_heard_again(mosquitto, collecting, node, enrolled):
    broker, _ = mosquitto
    collector = collecting(*mosquitto)
    node(broker.port, "ridge-east").publish(pack(1))
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)
    signal_child(broker)
    wait_for(lambda: not collector.status().connected)
    wait_for(lambda: "The broker stopped" in " ".join(collector.status().problems))
    wait_for(lambda: collector.status().connected)
    node(broker.port, "ridge-west").publish(pack(2))
    wait_for(lambda: stored_count(enrolled, "ridge-west") == 1)
    assert collector.status().reconnects == 1
    wait_for(lambda: collector.status().problems == ())


def signal_child(broker) -> None:
    os.kill(broker.pid, signal.SIGKILL)


@pytest.mark.broker
def test_a_broker_with_a_small_window_is_not_kept_waiting(open_broker, collecting, node, enrolled):
    """With 20 messages ahead and a commit every five seconds, waiting it out would take four messages a second."""
    broker = open_broker("allow_anonymous true", "max_inflight_messages 20")
    settings = outside(broker.port)
    settings = replace(settings, database=replace(settings.database, commit_every_s=5.0))
    collecting(OutsideBroker(settings.broker), settings)
    east = node(broker.port, "ridge-east", None)
    began = time.monotonic()
    for sequence in range(1, 401):
        east.post(pack(sequence))
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 400)
    assert time.monotonic() - began < 8


@pytest.mark.broker
def test_a_stranger_is_set_aside_and_found_once_it_is_enrolled(open_broker, collecting, node, enrolled):
    broker = open_broker()
    settings = outside(broker.port)
    collector = collecting(OutsideBroker(settings.broker), settings)
    node(broker.port, "stranger", None).publish(pack(1))
    node(broker.port, "Not_A_Name", None).publish(pack(1))
    wait_for(lambda: collector.status().set_aside == 2)
    with enrolled.read() as connection:
        kept = aside.newest(connection)
    assert {(item.node, item.reason) for item in kept} == {("stranger", "unknown-node"), (None, "unknown-node")}
    assert any("No node is enrolled as “stranger”" in item.detail for item in kept)
    wait_for(lambda: collector.status().unacknowledged == 0)
    rows = inventory_file.parse('[[node]]\nname="stranger"\nsite="ridge"\n', "test")
    with enrolled.write() as connection:
        inventory_change.apply(connection, rows, who="test", now_ms=0)
    node(broker.port, "stranger", None).publish(pack(2))
    wait_for(lambda: stored_count(enrolled, "stranger") == 1)


@pytest.mark.broker
def test_messages_at_qos_0_are_taken_too(open_broker, collecting, node, enrolled):
    broker = open_broker()
    settings = outside(broker.port)
    collector = collecting(OutsideBroker(settings.broker), settings)
    east = node(broker.port, "ridge-east", None)
    east._client.publish("field/ridge-east/telemetry", pack(1), 0)
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)
    assert collector.status().unacknowledged == 0


@pytest.mark.broker
def test_a_poisonous_message_is_set_aside_acknowledged_and_does_not_come_again(
    mosquitto, collecting, node, enrolled, monkeypatch
):
    take = intake.take

    def failing(connection, incoming):
        if any(item.message is not None and item.message.sequence == 2 for item in incoming):
            raise OverflowError("the store cannot take this")
        return take(connection, incoming)

    monkeypatch.setattr(committing.intake, "take", failing)
    collector = collecting(*mosquitto)
    east = node(mosquitto[0].port, "ridge-east")
    for sequence in (1, 2, 3):
        east.publish(pack(sequence))
    wait_for(lambda: collector.status().stored == 2)
    wait_for(lambda: collector.status().unacknowledged == 0)
    assert collector.status().faults >= 1
    assert "OverflowError" in collector.status().last_error
    collector.stop()
    again = collecting(*mosquitto)
    time.sleep(0.2)
    assert again.status().received == 0


@pytest.mark.broker
def test_a_fault_before_storing_asks_the_broker_again(mosquitto, collecting, node, enrolled, monkeypatch):
    collector = collecting(*mosquitto)
    commit = collector._committer.commit
    faults: list[int] = []

    def broken(batch):
        if not faults:
            faults.append(1)
            raise LookupError("a fault of the hub")
        return commit(batch)

    monkeypatch.setattr(collector._committer, "commit", broken)
    node(mosquitto[0].port, "ridge-east").publish(pack(1))
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)
    assert collector.status().faults == 1
    assert "LookupError: a fault of the hub" in collector.status().last_error


@pytest.mark.broker
def test_whoever_is_told_may_fail_without_harm(mosquitto, collecting, node, enrolled):
    told: list[int] = []

    def listener(taken) -> None:
        told.append(taken.new)
        raise RuntimeError("the listener fails")

    collector = collecting(*mosquitto, on_taken=listener)
    east = node(mosquitto[0].port, "ridge-east")
    for sequence in (1, 2):
        east.publish(pack(sequence))
        wait_for(lambda s=sequence: stored_count(enrolled, "ridge-east") == s)
    wait_for(lambda: sum(told) == 2)
    assert collector.status().faults >= 1
    assert "the listener fails" in collector.status().last_error


@pytest.mark.broker
def test_it_ends_in_time_even_when_nothing_can_be_stored(mosquitto, collecting, node, enrolled, monkeypatch):
    def busy(*_):
        raise StoreError("The database is busy.")

    collector = collecting(*mosquitto)
    monkeypatch.setattr(collector._committer, "_once", busy)
    east = node(mosquitto[0].port, "ridge-east")
    east.publish(pack(1))
    wait_for(lambda: "The database is busy." in collector.status().problems)
    assert collector.status().unacknowledged == 1
    began = time.monotonic()
    collector.stop(0.5)
    assert time.monotonic() - began < 4
    monkeypatch.undo()
    collecting(*mosquitto)
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)


@pytest.mark.broker
def test_a_hub_that_starts_before_its_broker_waits_for_it(open_broker, collecting, node, enrolled):
    broker = open_broker()
    broker.stop()
    settings = outside(broker.port)
    collector = collecting(OutsideBroker(settings.broker), settings, wait=False)
    wait_for(lambda: "cannot be reached" in " ".join(collector.status().problems))
    broker.start_again()
    wait_for(lambda: collector.status().connected)
    node(broker.port, "ridge-east", None).publish(pack(1))
    wait_for(lambda: stored_count(enrolled, "ridge-east") == 1)


def test_it_may_be_stopped_without_a_start(enrolled):
    settings = outside(1)
    collector = Collector(enrolled, OutsideBroker(settings.broker), settings, now_ms=now_ms)
    began = time.monotonic()
    collector.stop()
    assert time.monotonic() - began < 2


def test_the_status_is_plain_values(enrolled):
    settings = outside(1)
    collector = Collector(enrolled, OutsideBroker(settings.broker), settings, now_ms=now_ms)
    status = collector.status()
    assert isinstance(status, CollectorStatus)
    assert json.loads(json.dumps(asdict(status)))["connected"] is False
    collector.stop()


# A hub that is killed under load --------------------------------------------------------------------------------------

HUB = """
import sys, time
from pathlib import Path
from hub.mqtt.broker import OutsideBroker
from hub.mqtt.collector import Collector
from hub.settings import Broker, Database, Settings
from hub.store import engine

data, port, user, secret = Path(sys.argv[1]), int(sys.argv[2]), sys.argv[3], sys.argv[4]
settings = Settings(
    database=Database(commit_every_s=0.05),
    broker=Broker(embedded=False, port=port, username=user, password_file=secret, client_id=user),
)
database = engine.Database(data, checkpoints=True)
collector = Collector(
    database, OutsideBroker(settings.broker), settings, now_ms=lambda: time.time_ns() // 1_000_000
)
collector.start()
while not collector.status().connected:
    time.sleep(0.01)
print("started", flush=True)
sys.stdin.read()
collector.stop()
"""


@pytest.fixture
def hubs(mosquitto, enrolled, tmp_path):
    """Starts hubs as processes of their own, and ends them after the test."""
    broker, _ = mosquitto
    secret = tmp_path / "secret"
    secret.write_text(broker.access.password)
    command = [sys.executable, "-c", HUB, str(enrolled.data), str(broker.port), HUB_USER, str(secret)]
    with ExitStack() as running:

        def make() -> subprocess.Popen:
            hub = running.enter_context(subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE))
            running.callback(hub.kill)
            assert hub.stdout.readline() == b"started\n"
            return hub

        yield make


@pytest.mark.broker
def test_a_hub_that_is_killed_under_load_loses_nothing_that_was_published(mosquitto, hubs, node, enrolled):
    """And nothing is receipted that is not stored."""
    dice = random.Random(7)
    sent = 0
    enough = threading.Event()
    hub = hubs()
    east = node(mosquitto[0].port, "ridge-east")
    east.listen("field/ridge-east/receipt")

    def publish() -> None:
        nonlocal sent
        while not enough.is_set() and sent < 10_000:
            for _ in range(10):
                sent += 1
                east.post(pack(sent))
            time.sleep(0.02)

    sender = threading.Thread(target=publish)
    sender.start()
    for _ in range(2):
        before = stored_count(enrolled, "ridge-east")
        wait_for(lambda b=before: stored_count(enrolled, "ridge-east") > b)
        time.sleep(dice.uniform(0, 0.15))
        hub.kill()
        hub.wait(LIMIT_S)
        receipted = max((receipt["sequence"] for receipt in east.receipts()), default=0)
        assert receipted <= stored_count(enrolled, "ridge-east")
        hub = hubs()
    enough.set()
    sender.join(LIMIT_S)
    wait_for(lambda: stored_count(enrolled, "ridge-east") == sent, 30)
    wait_for(lambda: east.receipts() and east.receipts()[-1]["sequence"] == sent)
    hub.stdin.close()
    assert hub.wait(LIMIT_S) == 0
    with enrolled.read() as connection:
        assert enrolled.integrity_fault(connection) == ""
