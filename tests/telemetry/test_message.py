from datetime import UTC, datetime

from hub.telemetry.message import EARLIEST_MS, FUTURE_LIMIT_MS, Message


def test_the_limits_are_those_of_the_node_interface():
    assert datetime(2020, 1, 1, tzinfo=UTC).timestamp() * 1000 == EARLIEST_MS
    assert FUTURE_LIMIT_MS == 5 * 60 * 1000


def test_messages_share_nothing():
    first, second = Message(), Message()
    first.readings[1] = {"pack_voltage": 1.0}
    first.unknown["x"] = 1
    assert second == Message()
