"""The rights in our own words. That both brokers keep to them is tested in test_broker."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.mqtt import rights
from hub.mqtt.rights import CHECK_USER, HUB_USER, as_mosquitto_file, may_publish, may_read, may_subscribe
from hub.telemetry.topics import node_problem

names = st.from_regex(r"[a-z0-9-]{1,12}", fullmatch=True)
topics = st.lists(
    st.sampled_from(["field", "ridge-east", "gate", "telemetry", "presence", "receipt", "+", "#", ""])
).map("/".join)


@given(names, topics)
def test_a_node_has_three_topics_and_no_more(name, topic):
    own = {f"field/{name}/{kind}" for kind in ("telemetry", "presence", "receipt")}
    for may in (may_publish, may_read, may_subscribe):
        assert not may(name, topic, "field") or topic in own


def test_what_a_node_may():
    assert may_publish("gate", "field/gate/telemetry", "field")
    assert may_publish("gate", "field/gate/presence", "field")
    assert not may_publish("gate", "field/gate/receipt", "field")
    assert may_read("gate", "field/gate/receipt", "field")
    assert may_subscribe("gate", "field/gate/receipt", "field")
    assert not may_subscribe("gate", "field/+/receipt", "field")
    assert not may_publish("gate", "other/gate/telemetry", "field")


def test_the_hub_has_everything_below_the_root():
    assert may_publish(HUB_USER, "a/b/gate/receipt", "a/b")
    assert may_subscribe(HUB_USER, "a/b/+/telemetry", "a/b")
    assert may_read(HUB_USER, "a/b/gate/telemetry", "a/b")
    assert not may_read(HUB_USER, "a/c/gate/telemetry", "a/b")


@pytest.mark.parametrize("kind", ["telemetry", "presence", "receipt"])
def test_the_selfcheck_may_nothing_but_log_in(kind):
    topic = f"field/{CHECK_USER}/{kind}"
    assert not any(may(CHECK_USER, topic, "field") for may in (may_publish, may_read, may_subscribe))


def test_the_hubs_own_users_cannot_be_nodes():
    assert node_problem(HUB_USER)
    assert node_problem(CHECK_USER)


def test_mosquittos_file_never_trusts_the_clients_own_name_and_has_no_pattern_for_everybody():
    text = as_mosquitto_file("field")
    assert "%c" not in text
    for line in text.splitlines():
        assert not line.startswith("pattern") or line.split()[-1].startswith("field/%u/")
    # A topic line above the first user would be for everybody.
    assert text.startswith(f"user {rights.HUB_USER}\n")
