"""One connection, against real brokers of several dispositions."""

import gc
import select
import shutil
import socket
import subprocess
import threading
import time

import pytest
from mqtt.nodes import LIMIT_S, NodeClient, now_ms

from hub.mqtt import connection as module
from hub.mqtt.access import Access
from hub.mqtt.connection import Connection, ConnectionLostError
from hub.mqtt.tray import Letter

pytestmark = pytest.mark.broker


class Served:
    """A connection and what came over it; ``until`` takes turns until something is so."""

    def __init__(self, access: Access, *, generation: int = 1, root: str = "field", asks_dropped: bool = True) -> None:
        self.letters: list[Letter] = []
        self._pipe = socket.socketpair()
        self.connection = Connection(access, root, generation, self.letters.append, now_ms, asks_dropped=asks_dropped)

    def open(self) -> "Served":
        self.connection.open(self._pipe[0].fileno())
        return self

    def until(self, happened, limit_s: float = LIMIT_S, *, read: bool = True) -> None:
        end = time.monotonic() + limit_s
        while not happened():
            assert time.monotonic() < end, "waited in vain"
            self.connection.turn(0.05, read=read)

    def rest(self, seconds: float, *, read: bool = True) -> None:
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            self.connection.turn(0.05, read=read)

    def close(self, *, orderly: bool = True) -> None:
        self.connection.close(orderly=orderly)
        for end in self._pipe:
            end.close()


@pytest.fixture
def served():
    made: list[Served] = []

    def make(*arguments, **options) -> Served:
        made.append(Served(*arguments, **options))
        return made[-1]

    yield make
    for one in made:
        one.close()


@pytest.fixture
def outside_node(node):
    def make(broker, name: str = "ridge-east") -> NodeClient:
        return node(broker.port, name, None)

    return make


def test_it_subscribes_and_its_own_test_message_comes_back(open_broker, served):
    one = served(open_broker().access()).open()
    one.until(lambda: one.connection.delivers)
    assert one.connection.ready
    assert one.connection.accepted
    assert not one.connection.session_kept
    assert one.letters == []


def test_letters_carry_everything_and_wait_for_their_acknowledgement(open_broker, served, outside_node):
    broker = open_broker()
    one = served(broker.access(), generation=7).open()
    one.until(lambda: one.connection.ready)
    node = outside_node(broker)
    node.publish(b"reading")
    node.publish(b"online", "presence", retain=True)
    one.until(lambda: len(one.letters) == 2)
    first, second = one.letters
    assert (first.topic, first.payload, first.qos, first.generation) == ("field/ridge-east/telemetry", b"reading", 1, 7)
    assert (second.topic, second.payload, second.retained) == ("field/ridge-east/presence", b"online", False)
    assert abs(first.received_ms - now_ms()) < 60_000
    assert (one.connection.received, one.connection.acknowledged) == (2, 0)
    one.connection.acknowledge([x.mid for x in one.letters])
    one.connection.write()
    assert one.connection.acknowledged == 2


def test_what_was_not_acknowledged_comes_again_and_what_was_does_not(open_broker, served, outside_node):
    broker = open_broker()
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)
    node = outside_node(broker)
    for number in range(5):
        node.publish(b"%d" % number)
    one.until(lambda: len(one.letters) == 5)
    one.connection.acknowledge([x.mid for x in one.letters[:3]])
    one.close()
    two = served(broker.access(), generation=2).open()
    two.until(lambda: len(two.letters) == 2)
    two.rest(0.3)
    assert two.connection.session_kept
    assert [x.payload for x in two.letters] == [b"3", b"4"]


def test_the_last_acknowledgements_are_not_lost_in_an_orderly_end(open_broker, served, outside_node):
    """The broker's own answers to what was published lie unread when the hub closes; that must not cost anything."""
    broker = open_broker("allow_anonymous true", "max_inflight_messages 2000")
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)
    node = outside_node(broker)
    for number in range(300):
        node.post(b"%d" % number)
    one.until(lambda: len(one.letters) == 300)
    for number in range(50):
        one.connection.publish(f"field/n{number}/receipt", b"{}")
    one.connection.acknowledge([x.mid for x in one.letters])
    one.close()
    two = served(broker.access(), generation=2).open()
    two.until(lambda: two.connection.delivers)
    two.rest(0.3)
    assert two.letters == []


def test_a_pause_leaves_messages_with_the_broker(open_broker, served, outside_node):
    broker = open_broker()
    one = served(broker.access()).open()
    one.until(lambda: one.connection.delivers)
    node = outside_node(broker)
    node.publish(b"waiting")
    one.rest(0.3, read=False)
    assert one.letters == []
    one.until(lambda: one.letters)


def test_a_large_message_comes_whole(open_broker, served, outside_node):
    broker = open_broker()
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)
    payload = bytes(range(256)) * 4000
    outside_node(broker).publish(payload)
    one.until(lambda: one.letters)
    assert one.letters[0].payload == payload


def test_messages_go_out(open_broker, served, node):
    broker = open_broker()
    listener = node(broker.port, "gate", None)
    listener.listen("field/gate/receipt")
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)
    assert one.connection.publish("field/gate/receipt", b'{"boot": 1, "sequence": 2}')
    one.until(lambda: listener.heard)
    assert listener.receipts() == [{"boot": 1, "sequence": 2}]


def test_a_wake_ends_the_waiting(open_broker, served):
    one = served(open_broker().access()).open()
    one.until(lambda: one.connection.delivers)
    one.rest(0.2)
    later = threading.Timer(0.1, lambda: one._pipe[1].send(b"\0"))
    later.start()
    began = time.monotonic()
    one.connection.turn(20, read=True)
    assert time.monotonic() - began < 5
    later.join(5)


def test_a_broker_that_grants_and_does_not_deliver_is_found_out(open_broker, served, monkeypatch, tmp_path):
    monkeypatch.setattr(module, "TEST_LIMIT_S", 0.3)
    (tmp_path / "rights").write_text("topic write field/#\n")
    one = served(open_broker("allow_anonymous true", f"acl_file {tmp_path / 'rights'}").access()).open()
    one.until(lambda: one.connection.delivers is False)
    assert one.connection.ready


def test_a_broker_that_refuses_the_login_is_a_sentence(open_broker, served):
    one = served(open_broker("allow_anonymous false").access()).open()
    with pytest.raises(ConnectionLostError, match="refuses the hub"):
        one.rest(5)
    assert not one.connection.accepted


def test_something_that_is_no_broker_is_a_sentence(served, monkeypatch):
    monkeypatch.setattr(module, "ANSWER_LIMIT_S", 0.3)
    with socket.create_server(("127.0.0.1", 0)) as silent:
        one = served(Access("127.0.0.1", silent.getsockname()[1], "hub")).open()
        with pytest.raises(ConnectionLostError, match="takes the connection and never answers"):
            one.rest(5)


def test_something_that_talks_nonsense_is_a_sentence(served):
    with socket.create_server(("127.0.0.1", 0)) as server:

        def talk() -> None:
            peer, _ = server.accept()
            with peer:
                peer.sendall(b"HTTP/1.1 400 Bad Request\r\n\r\n")
                select.select([peer], [], [], 2)

        thread = threading.Thread(target=talk)
        thread.start()
        one = served(Access("127.0.0.1", server.getsockname()[1], "hub")).open()
        with pytest.raises(ConnectionLostError, match="was lost"):
            one.rest(5)
        one.close(orderly=False)
        thread.join(5)


def test_nobody_at_home_is_a_sentence(served):
    with socket.socket() as unused:
        unused.bind(("127.0.0.1", 0))
        one = served(Access("127.0.0.1", unused.getsockname()[1], "hub"))
        with pytest.raises(ConnectionLostError, match=r"cannot be reached: .*refused"):
            one.open()


def test_a_broker_that_goes_away_is_noticed(open_broker, served):
    broker = open_broker()
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)
    broker.stop()
    with pytest.raises(ConnectionLostError, match="was lost"):
        one.rest(5)


def test_a_receiver_that_fails_ends_the_connection_so_that_the_message_comes_again(open_broker, served, outside_node):
    broker = open_broker()
    one = served(broker.access()).open()
    one.until(lambda: one.connection.ready)

    def broken(_letter: Letter) -> None:
        raise MemoryError

    one.connection._deliver = broken
    outside_node(broker).publish(b"kept")
    with pytest.raises(MemoryError):
        one.rest(5)
    one.close(orderly=False)
    two = served(broker.access(), generation=2).open()
    two.until(lambda: two.letters)
    assert two.letters[0].payload == b"kept"


def test_another_hubs_test_message_is_not_taken_for_a_reading(open_broker, served):
    broker = open_broker()
    one = served(broker.access("hub-one")).open()
    one.until(lambda: one.connection.delivers)
    two = served(broker.access("hub-two")).open()
    two.until(lambda: two.connection.delivers)
    one.rest(0.2)
    assert (one.letters, two.letters) == ([], [])


def test_a_client_name_that_is_no_topic_level_still_has_a_test_topic(open_broker, served):
    one = served(open_broker().access("hub/+/#")).open()
    assert one.connection.test_topic == "field/hub.hub____/telemetry"
    one.until(lambda: one.connection.delivers)


def test_the_brokers_count_of_dropped_messages_is_heard(open_broker, served):
    one = served(open_broker("allow_anonymous true", "sys_interval 1").access()).open()
    one.until(lambda: one.connection.dropped is not None)
    assert one.connection.dropped == 0
    assert one.connection.asks_dropped


def test_it_is_not_asked_where_it_was_not_answered(open_broker, served):
    one = served(open_broker("allow_anonymous true", "sys_interval 1").access(), asks_dropped=False).open()
    one.until(lambda: one.connection.delivers)
    one.rest(0.3)
    assert one.connection.dropped is None


# The library leaves a socket to the garbage collector when the handshake fails.
@pytest.mark.filterwarnings("ignore:unclosed:ResourceWarning")
def test_over_tls(open_broker, served, tmp_path):
    if shutil.which("openssl") is None:
        pytest.skip("needs openssl to make a certificate")
    key, certificate = tmp_path / "key.pem", tmp_path / "certificate.pem"
    subprocess.run(
        [
            *("openssl", "req", "-x509", "-newkey", "rsa:2048", "-nodes", "-days", "2", "-subj", "/CN=localhost"),
            *("-addext", "subjectAltName=IP:127.0.0.1", "-keyout", key, "-out", certificate),
        ],
        check=True,
        capture_output=True,
        timeout=30,
    )
    broker = open_broker("allow_anonymous true", f"certfile {certificate}", f"keyfile {key}")
    access = Access("127.0.0.1", broker.port, "hub", tls=True, ca_file=str(certificate))
    one = served(access).open()
    one.until(lambda: one.connection.delivers)
    other = served(Access("127.0.0.1", broker.port, "other", tls=True, ca_file=str(certificate))).open()
    other.until(lambda: other.connection.ready)
    for number in range(300):
        other.connection.publish("field/ridge-east/telemetry", b"%d " % number * 200)
    end = time.monotonic() + LIMIT_S
    while len(one.letters) < 300 and time.monotonic() < end:
        other.connection.turn(0.01, read=True)
        one.connection.turn(0.01, read=True)
        fresh = one.letters[one.connection.acknowledged :]
        one.connection.acknowledge([x.mid for x in fresh])
        other.connection.acknowledge([x.mid for x in other.letters[other.connection.acknowledged :]])
    assert [int(x.payload.split()[0]) for x in one.letters] == list(range(300))
    stranger = served(Access("127.0.0.1", broker.port, "x", tls=True))
    with pytest.raises(ConnectionLostError, match=r"certificate .* is not trusted: .*broker\.ca_file"):
        stranger.open()
    plain = served(Access("127.0.0.1", broker.port, "y")).open()
    with pytest.raises(ConnectionLostError):
        plain.rest(8)
    gc.collect()
