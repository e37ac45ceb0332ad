"""A node on a real broker: presence, will, receipts, refusal."""

import datetime as dt
import json
import socket
import threading
import time
from collections.abc import Callable, Iterator

import pytest
from paho.mqtt.client import Client
from paho.mqtt.enums import CallbackAPIVersion

from hub.demo import scenario
from hub.demo.link import UNACKNOWLEDGED, UNRECEIPTED, Link
from hub.demo.play import history

pytestmark = pytest.mark.broker
NOW = dt.datetime(2026, 12, 1, 9, 37, 21, tzinfo=dt.UTC)


class Hub:
    """The other end: it remembers what came, and gives receipts when told to."""

    def __init__(self, port: int) -> None:
        self.got: list[tuple[str, bytes, bool]] = []
        self.ready = threading.Event()
        self.client = Client(CallbackAPIVersion.VERSION2, client_id="hub")
        self.client.on_message = lambda _c, _u, m: self.got.append((m.topic, bytes(m.payload), m.retain))
        self.client.on_subscribe = lambda *_: self.ready.set()
        self.client.on_connect = lambda c, *_: c.subscribe("field/#", 1)
        self.client.connect("127.0.0.1", port)
        self.client.loop_start()
        assert self.ready.wait(5.0)

    def telemetry(self) -> list[bytes]:
        return [payload for topic, payload, _ in self.got if topic.endswith("/telemetry")]

    def presence(self) -> list[bytes]:
        return [payload for topic, payload, _ in self.got if topic.endswith("/presence")]

    def close(self) -> None:
        self.client.disconnect()
        self.client.loop_stop()


@pytest.fixture
def hub(broker: int) -> Iterator[Hub]:
    other = Hub(broker)
    yield other
    other.close()


@pytest.fixture
def link(broker: int) -> Iterator[Link]:
    node = scenario.build("fen-logger", NOW)
    made = Link(node, "field", None, threading.Event())
    made.open("127.0.0.1", broker)
    until(lambda: made.connected)
    yield made
    made.close()


def until(done: Callable[[], object], seconds: float = 8.0) -> None:
    end = time.monotonic() + seconds
    while not done():
        assert time.monotonic() < end, "it did not come to pass"
        time.sleep(0.01)


def test_presence_is_online_retained_and_offline_at_the_end(broker: int, hub: Hub, link: Link) -> None:
    until(lambda: b"online" in hub.presence())
    late = Client(CallbackAPIVersion.VERSION2, client_id="late")
    seen: list[tuple[bytes, bool]] = []
    late.on_message = lambda _c, _u, m: seen.append((bytes(m.payload), m.retain))
    late.connect("127.0.0.1", broker)
    late.subscribe("field/fen-logger/presence", 1)
    late.loop_start()
    until(lambda: seen)
    assert seen[0] == (b"online", True)
    link.close()
    until(lambda: (b"offline", False) in seen)
    late.disconnect()
    late.loop_stop()


def test_a_lost_connection_leaves_the_will(hub: Hub, link: Link) -> None:
    until(lambda: b"online" in hub.presence())
    link._client.socket().shutdown(socket.SHUT_RDWR)
    until(lambda: b"offline" in hub.presence())
    # And it comes back by itself, subscribed as before.
    until(lambda: link.connected and hub.presence()[-1] == b"online")
    hub.client.publish("field/fen-logger/receipt", b'{"boot": 1, "sequence": 1}', qos=1)
    until(lambda: link._receipts)


def test_receipts_empty_the_outbox(hub: Hub, link: Link) -> None:
    link.node.post(next(history(link.node, 1)))
    messages = len(link.node.outbox)

    def all_out() -> bool:
        link.pump(0)
        return len(hub.telemetry()) == messages

    until(all_out)
    assert len(link.node.outbox) == messages
    hub.client.publish("field/fen-logger/receipt", json.dumps({"boot": 1, "sequence": messages}), qos=1)
    until(lambda: link.pump(0) == 0 and len(link.node.outbox) == 0)
    assert link.failures == []
    assert link.sent == messages


def test_flow_is_held_by_acknowledgements_and_receipts(hub: Hub, link: Link) -> None:
    for stretch in history(link.node, 7):
        link.node.post(stretch)
    most = 0

    def settled() -> bool:
        nonlocal most
        link.pump(0)
        most = max(most, link._unacknowledged)
        return len(hub.telemetry()) >= UNRECEIPTED

    until(settled)
    time.sleep(0.2)
    link.pump(0)
    assert most <= UNACKNOWLEDGED
    assert link.node.outbox.unreceipted == UNRECEIPTED
    assert link.node.outbox.waiting > 0


def test_a_refused_login_is_told(closed_broker: int) -> None:
    refused = Link(scenario.build("fen-logger", NOW), "field", ("fen-logger", "wrong"), threading.Event())
    refused.open("127.0.0.1", closed_broker)
    until(lambda: refused.refused)
    assert "authori" in str(refused.refused).lower()
    assert not refused.connected
    refused.close()


def test_connections_lost_in_the_middle_lose_nothing(hub: Hub, link: Link) -> None:
    for stretch in history(link.node, 3):
        link.node.post(stretch)
    messages = len(link.node.outbox)
    cuts = [5, 20, 45]

    def arrived() -> bool:
        if cuts and len(hub.telemetry()) >= cuts[0] and link.connected:
            cuts.pop(0)
            link._client.socket().shutdown(socket.SHUT_RDWR)
        link.pump(0)
        return len(set(hub.telemetry())) == messages

    until(arrived, 20.0)
    assert cuts == []
    until(lambda: link.connected and link._unacknowledged == 0)
