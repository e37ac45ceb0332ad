"""Check values: OASIS MQTT 3.1.1 and 5.0, section 4.7, and its examples of matches."""

import pytest

from hub.telemetry.topics import every_node, filter_problem, matches, name_problem, node_problem, parse_topic, topic


@pytest.mark.parametrize(
    ("topic_filter", "name", "expected"),
    [
        ("level1/#", "level1", True),
        ("level1/#", "level1/level2", True),
        ("level1/#", "level1/level2/level3", True),
        ("level1/#", "/level1a", False),
        ("level1/+/level3", "level1/level2/level3", True),
        ("level1/+/level3", "level1/level2", False),
        ("/+", "/level1a", True),
        ("1/2/#", "1/2/s", True),
        ("1/2/#", "1/2s/s", False),
        # 4.7.1.2 and 4.7.1.3
        ("sport/tennis/player1/#", "sport/tennis/player1", True),
        ("sport/tennis/player1/#", "sport/tennis/player1/ranking", True),
        ("sport/#", "sport", True),
        ("sport/tennis/+", "sport/tennis/player1", True),
        ("sport/tennis/+", "sport/tennis/player1/ranking", False),
        ("sport/+", "sport", False),
        ("sport/+", "sport/", True),
        ("+/+", "/finance", True),
        ("/+", "/finance", True),
        ("+", "/finance", False),
        # 4.7.2
        ("#", "$SYS/monitor/Clients", False),
        ("+/monitor/Clients", "$SYS/monitor/Clients", False),
        ("$SYS/#", "$SYS/monitor/Clients", True),
        ("#", "a/b", True),
        ("ACCOUNTS", "Accounts", False),  # 4.7.3: case matters
        ("a/b", "a/b/c", False),
        ("a/b/c", "a/b", False),
    ],
)
def test_filters_match_as_the_standard_says(topic_filter, name, expected):
    assert filter_problem(topic_filter) is None
    assert matches(topic_filter, name) is expected


@pytest.mark.parametrize(
    "text", ["level1/#/level3", "##/level2", "level1#", "sport+", "a/+b", "#/a", "", "a\0b", "\ud800"]
)
def test_invalid_filters(text):
    assert (filter_problem(text) or "").endswith(".")


@pytest.mark.parametrize("text", ["a/#", "a/+", "", "a\0b", "\udfff"])
def test_invalid_names(text):
    assert (name_problem(text) or "").endswith(".")


def test_length_is_counted_in_bytes():
    assert name_problem("é" * 32_767) is None
    assert name_problem("é" * 32_768) is not None
    assert filter_problem("/" * 65_536) is not None


@pytest.mark.parametrize("node", ["a", "ridge-east", "0" * 64, "-"])
def test_topics_of_a_node_are_read_back(node):
    assert node_problem(node) is None
    for kind in ("telemetry", "presence", "receipt"):
        for root in ("field", "a/b"):
            name = topic(root, node, kind)
            assert parse_topic(name, root) == (node, kind)
            assert matches(every_node(root, kind), name)


@pytest.mark.parametrize(
    "name",
    [
        "field/A/telemetry",
        "field//telemetry",
        "field/a/b/telemetry",
        "field/a/other",
        "fields/a/telemetry",
        "field",
        "field/" + "a" * 65 + "/telemetry",
        "field/a\n/telemetry",
        "field/a/telemetry/",
        "x/field/a/telemetry",
    ],
)
def test_other_topics_are_not_those_of_a_node(name):
    assert parse_topic(name, "field") is None


@pytest.mark.parametrize("node", ["", "A", "a_b", "a/b", "0" * 65, "é", "a\n"])
def test_names_that_are_no_node(node):
    assert node_problem(node) is not None
