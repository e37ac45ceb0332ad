"""The lasting link: what happens between one connection and the next."""

import time

import pytest
from mqtt.nodes import NodeClient, now_ms, settings_for, wait_for

from hub.mqtt import connection as connection_module
from hub.mqtt import link as module
from hub.mqtt.access import Access
from hub.mqtt.broker import start_broker
from hub.mqtt.link import Link
from hub.mqtt.tray import Tray

pytestmark = pytest.mark.broker


@pytest.fixture
def linked():
    made: list[Link] = []

    def make(access: Access, tray: Tray | None = None, *, wait: bool = True) -> Link:
        made.append(Link(access, "field", Tray() if tray is None else tray, now_ms, first_wait_s=0.02))
        made[-1].start()
        if wait:
            wait_for(lambda: made[-1].state().connected, what="for the link")
        return made[-1]

    yield make
    for link in made:
        link.close(5)


def test_it_connects_and_says_since_when(open_broker, linked):
    link = linked(open_broker().access())
    state = link.state()
    assert state.connected
    assert (state.generation, state.reconnects, state.ends_last_minute) == (1, 0, 0)
    assert abs(state.since_ms - now_ms()) < 60_000
    assert state.problems == ()


def test_it_keeps_trying_until_the_broker_is_there(linked, open_broker, monkeypatch):
    monkeypatch.setattr(module, "LONGEST_WAIT_S", 0.05)
    first = open_broker()
    access = first.access()
    first.stop()
    link = linked(access, wait=False)
    wait_for(lambda: "cannot be reached" in "".join(link.state().problems))
    assert not link.state().connected
    assert link.state().since_ms is None
    first.start_again()
    wait_for(lambda: link.state().connected)
    assert link.state().problems == ()
    assert "cannot be reached" in link.state().last_error
    assert link.state().reconnects == 0


def test_after_a_broker_without_memory_came_back_messages_arrive_again(open_broker, linked, node):
    """Its session and its subscriptions are lost with it."""
    broker = open_broker("allow_anonymous true", "persistence false")
    tray = Tray()
    link = linked(broker.access(), tray)
    broker.stop()
    wait_for(lambda: not link.state().connected)
    broker.start_again()
    wait_for(lambda: link.state().connected)
    node(broker.port, "ridge-east", None).publish(b"after")
    wait_for(lambda: len(tray))
    (letter,) = tray.take(0)
    assert (letter.payload, letter.generation) == (b"after", link.state().generation)
    assert link.state().reconnects == 1


def test_an_acknowledgement_of_an_earlier_connection_is_dropped(open_broker, linked, node):
    """Packet identifiers begin again with each session: the late one would take another message away."""
    broker = open_broker("allow_anonymous true", "persistence false")
    tray = Tray()
    link = linked(broker.access(), tray)
    node(broker.port, "ridge-east", None).publish(b"old")
    wait_for(lambda: len(tray))
    (old,) = tray.take(0)
    broker.stop()
    broker.start_again()
    wait_for(lambda: link.state().connected and link.state().generation > old.generation)
    node(broker.port, "ridge-west", None).publish(b"new")
    wait_for(lambda: len(tray))
    (new,) = tray.take(0)
    assert new.mid == old.mid, "the case this is about did not come up"
    link.acknowledge(old.generation, [old.mid])
    wait_for(lambda: link.stale == 1)
    assert link.state().unacknowledged == 1
    link.renew("the test asks for it")
    wait_for(lambda: len(tray))
    assert tray.take(0)[0].payload == b"new"


def test_a_full_tray_stops_the_reading_and_an_emptied_one_resumes_it(open_broker, linked, node):
    broker = open_broker("allow_anonymous true", "max_inflight_messages 1000")
    tray = Tray(most_letters=20)
    link = linked(broker.access(), tray)
    sender = node(broker.port, "ridge-east", None)
    sender.publish(b"0")
    for number in range(1, 600):
        sender.post(b"%d" % number)
    wait_for(lambda: tray.full)
    time.sleep(0.3)
    held = len(tray)
    time.sleep(0.2)
    assert len(tray) == held <= 20 + connection_module.READS_A_TURN
    got: list[bytes] = []

    def emptied() -> bool:
        letters = tray.take(0, idle_s=0.01)
        got.extend(letter.payload for letter in letters)
        link.acknowledge(1, [letter.mid for letter in letters])
        return len(got) >= 600

    wait_for(emptied)
    assert got == [b"%d" % number for number in range(600)]


def test_a_later_message_takes_the_place_of_an_earlier_one_that_could_not_go_out_yet(open_broker, linked, node):
    broker = open_broker()
    listener = node(broker.port, "gate", None)
    listener.listen("field/gate/receipt")
    access = broker.access()
    link = Link(access, "field", Tray(), now_ms)
    for number in range(3):
        link.publish("gate, boot 1", "field/gate/receipt", b"%d" % number)
    link.publish("gate, boot 2", "field/gate/receipt", b"other")
    link.start()
    wait_for(lambda: len(listener.heard) == 2)
    link.close(5)
    assert sorted(payload for _, payload in listener.heard) == [b"2", b"other"]


def test_many_messages_all_go_out(open_broker, linked, node):
    broker = open_broker("allow_anonymous true", "max_queued_messages 20000", "max_inflight_messages 0")
    listener = node(broker.port, "gate", None)
    listener.listen("field/+/receipt")
    link = linked(broker.access())
    for number in range(4500):
        link.publish(number, f"field/n{number}/receipt", b"")
    wait_for(lambda: len(listener.heard) == 4500)


def test_what_was_stored_last_is_still_acknowledged_when_it_ends(open_broker, linked, node):
    broker = open_broker()
    tray = Tray()
    link = linked(broker.access(), tray)
    node(broker.port, "ridge-east", None).publish(b"one")
    wait_for(lambda: len(tray))
    link.stop_reading()
    link.acknowledge(1, [letter.mid for letter in tray.take(0)])
    link.close(5)
    again = Tray()
    linked(broker.access(), again)
    time.sleep(0.3)
    assert len(again) == 0


def test_a_second_hub_of_the_same_name_is_found_out(open_broker, linked):
    broker = open_broker()
    first = linked(broker.access("twin"))
    second = linked(broker.access("twin"), wait=False)

    def told() -> bool:
        return any("give each hub its own broker.client_id" in p for p in first.state().problems)

    wait_for(told)
    assert first.state().ends_last_minute > 3
    second.close(5)
    wait_for(lambda: first.state().connected)


def test_two_hubs_of_different_names_leave_each_other_alone(open_broker, linked):
    broker = open_broker()
    links = [linked(broker.access(name)) for name in ("one", "two")]
    time.sleep(0.3)
    assert all(link.state().problems == () and link.state().ends_last_minute == 0 for link in links)


def test_a_subscription_that_is_refused_is_told(enrolled, linked):
    broker = start_broker(settings_for("trial", root="other").broker, enrolled.data, enrolled)
    link = linked(broker.access, wait=False)
    wait_for(lambda: "refuses to give the hub field/+/telemetry" in "".join(link.state().problems))
    broker.stop()


def test_a_broker_that_delivers_nothing_is_told(open_broker, linked, monkeypatch, tmp_path):
    monkeypatch.setattr(connection_module, "TEST_LIMIT_S", 0.2)
    (tmp_path / "rights").write_text("topic write field/#\n")
    link = linked(open_broker("allow_anonymous true", f"acl_file {tmp_path / 'rights'}").access())
    wait_for(lambda: "The broker does not deliver to the hub" in "".join(link.state().problems))


def test_messages_the_broker_drops_are_told(open_broker, linked, node):
    broker = open_broker("allow_anonymous true", "sys_interval 1", "max_inflight_messages 1", "max_queued_messages 5")
    tray = Tray()
    link = linked(broker.access(), tray)
    wait_for(lambda: link._dropped_last is not None)
    sender: NodeClient = node(broker.port, "ridge-east", None)
    for number in range(50):
        sender.publish(b"%d" % number)
    wait_for(lambda: link.state().broker_dropped >= 40)
    assert "raise broker.queue_limit" in "".join(link.state().problems)


@pytest.mark.parametrize(("counts", "dropped"), [([5, 5, 9], 4), ([0, 3, 0, 2], 5), ([None, 7], 0), ([2, 1, 4], 4)])
def test_a_broker_that_counts_anew_is_added_up(counts, dropped):
    link = Link(Access("h", 1, "x"), "field", Tray(), now_ms)
    for count in counts:
        link._note_dropped(count)
    assert link.state().broker_dropped == dropped
    link.close(1)


# A fault that no code of ours should have, to see that even then it goes on.
@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_a_network_thread_that_ended_is_started_again(open_broker, linked, node, monkeypatch):
    broker = open_broker()
    tray = Tray()
    link = linked(broker.access(), tray)
    put = tray.put

    def poison(_letter: object) -> None:
        monkeypatch.setattr(tray, "put", put)
        link._connection._deliver = put
        raise SystemExit

    link._connection._deliver = poison
    node(broker.port, "ridge-east", None).publish(b"kept")
    wait_for(lambda: not link._thread.is_alive())
    link.ensure_alive()
    wait_for(lambda: len(tray))
    assert tray.take(0)[0].payload == b"kept"
    assert link.faults == 1
    assert "started again" in link.state().last_error


def test_an_ordinary_fault_while_receiving_is_survived_and_counted(open_broker, linked, node):
    broker = open_broker()
    tray = Tray()
    link = linked(broker.access(), tray)

    def broken(_letter: object) -> None:
        raise ValueError("no room")

    link._connection._deliver = broken
    node(broker.port, "ridge-east", None).publish(b"kept")
    wait_for(lambda: len(tray))
    assert tray.take(0)[0].payload == b"kept"
    assert link.faults == 1
    assert "ValueError: no room" in link.state().last_error
    assert link.state().ends_last_minute == 0


def test_a_thread_that_hangs_is_told(open_broker, linked, monkeypatch):
    link = linked(open_broker().access())
    monkeypatch.setattr(module, "HANGS_S", -1)
    assert "hangs" in "".join(link.state().problems)


def test_closing_is_bounded_and_may_come_twice_or_before_the_start():
    link = Link(Access("h", 1, "x"), "field", Tray(), now_ms)
    began = time.monotonic()
    link.close(1)
    link.close(1)
    link.acknowledge(1, [1])
    assert time.monotonic() - began < 1
