"""The contract of a started broker, kept by both kinds; and the choice between them."""

import socket
import threading

import pytest
from mqtt.nodes import need_mosquitto, now_ms, outside, settings_for, wait_for

from hub.errors import BrokerError
from hub.mqtt import broker as module
from hub.mqtt.broker import OutsideBroker, start_broker, try_login
from hub.mqtt.link import Link
from hub.mqtt.logins import access_for_selfcheck
from hub.mqtt.mosquitto import Mosquitto, check_port
from hub.mqtt.tray import Tray
from hub.mqtt.trial import TrialBroker
from hub.store import inventory, people

# What both brokers do -------------------------------------------------------------------------------------------------


@pytest.fixture
def hub(either):
    """The hub's link at each broker in turn, with the tray it fills."""
    broker, settings = either
    tray = Tray()
    link = Link(broker.access, settings.broker.root, tray, now_ms, first_wait_s=0.05)
    link.start()
    wait_for(lambda: link.state().connected)
    yield broker, link, tray
    link.close(5)


def arrived(tray: Tray) -> list[tuple[str, bytes]]:
    return [(letter.topic, letter.payload) for letter in tray.take(0, idle_s=0.3)]


def test_only_the_right_secret_lets_a_node_in(either, node):
    broker, _ = either
    assert node(broker.port, "ridge-east").admitted
    assert not node(broker.port, "ridge-east", "wrong").admitted
    assert not node(broker.port, "stranger").admitted
    assert not node(broker.port, "ridge-east", None).admitted
    assert not node(broker.port, "hub.collector").admitted


def test_a_node_is_heard_below_its_own_name_and_nowhere_else(hub, node):
    broker, _, tray = hub
    east = node(broker.port, "ridge-east")
    for kind in ("telemetry", "presence"):
        east.publish(b"forged", kind, "ridge-west")
    east.publish(b"forged", "other")
    east.publish(b"mine")
    wait_for(lambda: len(tray))
    assert arrived(tray) == [("field/ridge-east/telemetry", b"mine")]


def test_a_receipt_reaches_its_node_alone(hub, node):
    broker, link, _ = hub
    east, west = node(broker.port, "ridge-east"), node(broker.port, "ridge-west")
    east.listen("field/ridge-east/receipt")
    for topic_filter in ("field/ridge-east/receipt", "field/+/receipt", "#", "field/#", "field/ridge-east/telemetry"):
        west.listen(topic_filter)
    west.listen("field/ridge-west/receipt")
    # A receipt is the hub's to give.
    west.publish(b'{"boot": 1, "sequence": 99}', "receipt", "ridge-east")
    west.publish(b'{"boot": 1, "sequence": 99}', "receipt")
    link.publish(1, "field/ridge-east/receipt", b'{"boot": 1, "sequence": 2}')
    link.publish(2, "field/ridge-west/receipt", b'{"boot": 1, "sequence": 3}')
    wait_for(lambda: east.heard and west.heard)
    assert east.receipts() == [{"boot": 1, "sequence": 2}]
    assert west.heard == [("field/ridge-west/receipt", b'{"boot": 1, "sequence": 3}')]


def test_a_node_that_calls_itself_the_hub_or_another_node_ends_nobodys_session(hub, node):
    broker, link, _ = hub
    west = node(broker.port, "ridge-west")
    node(broker.port, "ridge-east", client_id=broker.access.client_id)
    node(broker.port, "ridge-east", client_id="ridge-west")
    wait_for(lambda: link.state().ends_last_minute or link.state().connected)
    assert west.connected
    assert (link.state().connected, link.state().ends_last_minute) == (True, 0)


def test_messages_are_kept_while_the_hub_is_away(hub, node):
    broker, link, _ = hub
    link.close(5)
    node(broker.port, "ridge-east").publish(b"meanwhile")
    tray = Tray()
    again = Link(broker.access, "field", tray, lambda: 0)
    again.start()
    wait_for(lambda: len(tray))
    assert [(letter.topic, letter.payload) for letter in tray.take(0)] == [("field/ridge-east/telemetry", b"meanwhile")]
    again.close(5)


def test_presence_is_kept_and_the_will_speaks_for_a_node_that_vanishes(hub, node):
    broker, _, tray = hub
    east = node(broker.port, "ridge-east", will=True)
    east.publish(b"online", "presence", retain=True)
    wait_for(lambda: len(tray))
    assert arrived(tray) == [("field/ridge-east/presence", b"online")]
    east.vanish()
    wait_for(lambda: len(tray))
    assert arrived(tray) == [("field/ridge-east/presence", b"offline")]


def test_a_credential_that_is_taken_away_ends_a_nodes_rights(hub, node, enrolled):
    broker, _, tray = hub
    east = node(broker.port, "ridge-east")
    east.publish(b"before")
    wait_for(lambda: len(tray))
    arrived(tray)
    with enrolled.write() as connection:
        people.revoke_credential(connection, inventory.node_id(connection, "ridge-east"))
    wait_for(lambda: not node(broker.port, "ridge-east").admitted)
    if east.connected:
        east.post(b"after")
    node(broker.port, "ridge-west").publish(b"another")
    wait_for(lambda: len(tray))
    assert arrived(tray) == [("field/ridge-west/telemetry", b"another")]


def test_the_selfcheck_logs_in_beside_the_hub_and_may_nothing(hub, node, enrolled):
    broker, link, tray = hub
    assert try_login(settings_for("auto").broker, enrolled.data) == ""
    access = access_for_selfcheck(enrolled.data)
    assert access.port == broker.port
    check = node(broker.port, access.username, access.password)
    assert check.admitted
    check.publish(b"x")
    check.listen("field/#")
    node(broker.port, "ridge-east").publish(b"y")
    wait_for(lambda: len(tray))
    assert arrived(tray) == [("field/ridge-east/telemetry", b"y")]
    assert check.heard == []
    assert link.state().ends_last_minute == 0


def test_ending_gives_the_port_back(either):
    broker, _ = either
    broker.stop()
    assert check_port("127.0.0.1", broker.port, threading.Event(), patience_s=0) == broker.port


# Which broker it is ---------------------------------------------------------------------------------------------------


@pytest.mark.broker
def test_mosquitto_is_chosen_where_it_is_installed(enrolled):
    need_mosquitto()
    broker = start_broker(settings_for("auto").broker, enrolled.data, enrolled)
    assert isinstance(broker, Mosquitto)
    broker.stop()


def test_the_trial_broker_steps_in_where_it_is_not(enrolled, monkeypatch):
    monkeypatch.setattr(module, "find_program", lambda: None)
    broker = start_broker(settings_for("auto").broker, enrolled.data, enrolled)
    assert isinstance(broker, TrialBroker)
    broker.stop()


def test_without_mosquitto_nobody_is_let_in_from_outside(enrolled, monkeypatch):
    monkeypatch.setattr(module, "find_program", lambda: None)
    with pytest.raises(BrokerError, match="the trial broker serves this machine only"):
        start_broker(settings_for("auto", listen="0.0.0.0").broker, enrolled.data, enrolled)
    with pytest.raises(BrokerError, match=r"Mosquitto is not installed\. Install it"):
        start_broker(settings_for("mosquitto").broker, enrolled.data, enrolled)


@pytest.mark.broker
def test_on_every_network_the_hub_still_comes_by_loopback(enrolled, node):
    need_mosquitto()
    broker = start_broker(settings_for("mosquitto", listen="0.0.0.0").broker, enrolled.data, enrolled)
    try:
        assert broker.access.host == "127.0.0.1"
        assert "0.0.0.0" in broker.sentence
        assert node(broker.port, "ridge-east").admitted
    finally:
        broker.stop()


# A broker that is there already ---------------------------------------------------------------------------------------


def test_an_outside_broker_is_taken_as_it_is(enrolled, tmp_path):
    (tmp_path / "password").write_text("geheim\n")
    settings = outside(4711, username="keeper", password_file=str(tmp_path / "password"), client_id="my-hub")
    broker = start_broker(settings.broker, enrolled.data, enrolled)
    assert isinstance(broker, OutsideBroker)
    assert (broker.port, broker.access.username, broker.access.password) == (4711, "keeper", "geheim")
    assert broker.access.client_id == "my-hub"
    assert broker.sentence == "Broker: the one at 127.0.0.1, port 4711."
    assert broker.poll() == ""
    broker.stop()


@pytest.mark.parametrize(
    ("content", "said"), [(None, "cannot be read"), (b"", "is empty"), (b"\xff\xfe", "cannot be read")]
)
def test_a_password_file_that_holds_none_is_a_sentence(tmp_path, content, said):
    path = tmp_path / "password"
    if content is not None:
        path.write_bytes(content)
    settings = outside(1883, username="keeper", password_file=str(path)).broker
    with pytest.raises(BrokerError, match=said):
        OutsideBroker(settings)
    assert said in try_login(settings, tmp_path)


@pytest.mark.broker
def test_logging_in_at_an_outside_broker(open_broker, tmp_path):
    assert try_login(outside(open_broker().port).broker, tmp_path) == ""
    closed = open_broker("allow_anonymous false")
    assert "refuses the hub" in try_login(outside(closed.port).broker, tmp_path)
    closed.stop()
    assert "cannot be reached" in try_login(outside(closed.port).broker, tmp_path)


def test_a_broker_that_never_answers_is_told(tmp_path, monkeypatch):
    monkeypatch.setattr(module, "ANSWER_LIMIT_S", 0.2)
    with socket.create_server(("127.0.0.1", 0)) as silent:
        said = try_login(outside(silent.getsockname()[1]).broker, tmp_path)
    assert "takes the connection and does not answer" in said


def test_a_hub_that_never_ran_has_no_broker_to_log_in_at(tmp_path):
    assert "Start it: packfold run" in try_login(settings_for("auto").broker, tmp_path)
