"""What is peculiar to the trial broker; what it shares with mosquitto is in test_broker."""

import socket
import time

import pytest
from amqtt.contexts import Action
from mqtt.nodes import SECRET, settings_for, wait_for
from msgspec.structs import replace

from hub.errors import BrokerError, StoreError
from hub.mqtt.credentials import hash_secret
from hub.mqtt.logins import Logins
from hub.mqtt.trial import Gate, TrialBroker


@pytest.fixture
def gate():
    known = hash_secret(SECRET)
    return Gate("field", {"gate": known, "ridge": known})


def test_the_gate_wants_a_known_name_and_the_right_secret(gate):
    assert gate.admits("gate", SECRET, "gate")
    assert not gate.admits("gate", "wrong", "gate")
    assert not gate.admits("stranger", SECRET, "stranger")
    assert not gate.admits(None, None, "gate")
    assert not gate.admits("gate", None, "gate")
    assert gate.admits("gate", SECRET, None)


def test_a_client_name_stays_with_whom_it_belonged_to_first(gate):
    assert gate.admits("gate", SECRET, "name")
    assert gate.admits("gate", SECRET, "name")
    assert not gate.admits("ridge", SECRET, "name")
    # A wrong secret claims nothing.
    assert not gate.admits("ridge", "wrong", "other")
    assert gate.admits("gate", SECRET, "other")


def test_rights_end_with_the_credential(gate):
    assert gate.allows("gate", "field/gate/telemetry", Action.PUBLISH)
    assert not gate.allows("gate", "field/ridge/telemetry", Action.PUBLISH)
    assert gate.allows("gate", "field/gate/receipt", Action.SUBSCRIBE)
    assert gate.allows("gate", "field/gate/receipt", Action.RECEIVE)
    assert not gate.allows("gate", "field/gate/receipt", None)
    assert not gate.allows(None, "field/gate/receipt", Action.RECEIVE)
    assert not gate.allows("gate", None, Action.RECEIVE)
    gate.logins = {}
    assert not gate.allows("gate", "field/gate/telemetry", Action.PUBLISH)


@pytest.fixture
def trial(enrolled):
    broker = TrialBroker(settings_for("trial").broker, enrolled.data, Logins(enrolled))
    broker.start()
    yield broker
    broker.stop()


def test_it_listens_on_loopback_alone(trial):
    assert trial.access.host == "127.0.0.1"
    assert trial.port > 0
    assert "for this machine only" in trial.sentence
    assert trial.poll() == ""


def test_an_idle_connection_does_not_hold_up_the_end(trial):
    with socket.create_connection(("127.0.0.1", trial.port)):
        time.sleep(0.1)
        began = time.monotonic()
        trial.stop()
        assert time.monotonic() - began < 5
    with pytest.raises(OSError, match="refused"):
        socket.create_connection(("127.0.0.1", trial.port), 1)
    assert "has ended" in trial.poll()


def test_nonsense_does_not_hurt_it(trial, node):
    for nonsense in (b"", b"GET / HTTP/1.1\r\n\r\n", b"\x10\xff\xff\xff\x7f", b"\x10\x00", bytes(range(256))):
        with socket.create_connection(("127.0.0.1", trial.port), 2) as peer:
            peer.sendall(nonsense)
    assert node(trial.port, "ridge-east").admitted


def test_a_taken_port_is_a_sentence(enrolled):
    with socket.create_server(("127.0.0.1", 0)) as other:
        settings = settings_for("trial").broker
        broker = TrialBroker(replace(settings, port=other.getsockname()[1]), enrolled.data, Logins(enrolled))
        with pytest.raises(BrokerError, match=r"Port \d+ on 127\.0\.0\.1 is taken by another program"):
            broker.start()
        broker.stop()


def test_it_may_be_stopped_twice_and_without_a_start(enrolled):
    broker = TrialBroker(settings_for("trial").broker, enrolled.data, Logins(enrolled))
    broker.stop()
    assert broker.poll() == ""


def test_a_store_that_cannot_be_read_is_told_and_the_broker_goes_on(trial, node, monkeypatch):
    def away() -> bool:
        raise StoreError("The database is away.")

    changed = trial._logins.changed
    monkeypatch.setattr(trial._logins, "changed", away)
    wait_for(lambda: "The database is away." in trial.poll())
    assert node(trial.port, "ridge-east").admitted
    monkeypatch.setattr(trial._logins, "changed", changed)
    wait_for(lambda: trial.poll() == "")
