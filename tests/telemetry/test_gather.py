from math import inf, nan

import pytest

from hub.quantities import CATALOGUE
from hub.telemetry.gather import LARGEST, add_count, add_unknown, add_value, set_times_aside, time_problem
from hub.telemetry.message import EARLIEST_MS, FUTURE_LIMIT_MS, Message

NOW = 1_780_000_000_000


def test_the_largest_value_fits_a_signed_64_bit_integer_at_every_resolution():
    assert max(LARGEST * quantity.scale for quantity in CATALOGUE) < 2**63


def test_a_value_beyond_the_plausible_range_is_kept_for_raw_is_raw():
    message, values = Message(), {}
    assert add_value(message, values, NOW, "pack_temperature", -127.0)
    assert values == {"pack_temperature": -127.0}
    assert message.remarks == []


@pytest.mark.parametrize(
    ("value", "reason"), [(nan, "not-finite"), (inf, "not-finite"), (-inf, "not-finite"), (1.1e12, "out-of-range")]
)
def test_a_value_that_cannot_be_stored_becomes_a_remark(value, reason):
    message, values = Message(), {}
    assert not add_value(message, values, NOW, "pack_voltage", value, line=7)
    assert values == {}
    assert [(r.reason, r.time_ms, r.quantity, r.line) for r in message.remarks] == [(reason, NOW, "pack_voltage", 7)]


def test_the_same_value_twice_is_one_reading_and_another_value_a_contradiction():
    message, values = Message(), {"pack_voltage": 10.41}
    assert add_value(message, values, NOW, "pack_voltage", 10.41)
    assert add_value(message, values, NOW, "pack_voltage", 10.410000001)  # the same at the stored resolution
    assert not add_value(message, values, NOW, "pack_voltage", 10.42)
    assert values == {"pack_voltage": 10.41}
    assert [(r.reason, r.value) for r in message.remarks] == [("contradiction", 10.42)]


def test_counts_are_whole_and_one_message_has_one_boot():
    message = Message()
    assert add_count(message, "boot", 17.0)
    assert add_count(message, "boot", 17.0)
    assert not add_count(message, "boot", 18.0)
    assert not add_count(message, "sequence", 1.5)
    assert not add_count(message, "oldest", -1.0)
    assert not add_count(message, "oldest", nan)
    assert not add_count(message, "oldest", 1e19)
    assert (message.boot, message.sequence, message.oldest) == (17, None, None)
    assert [r.reason for r in message.remarks] == ["contradiction", "malformed", "malformed", "malformed", "malformed"]


def test_five_minutes_ahead_is_good_and_a_millisecond_more_is_not():
    assert time_problem(NOW + FUTURE_LIMIT_MS, NOW) is None
    assert (time_problem(NOW + FUTURE_LIMIT_MS + 1, NOW) or "")[0] == "future"
    assert time_problem(EARLIEST_MS, NOW) is None
    assert (time_problem(EARLIEST_MS - 1, NOW) or "")[0] == "too-old"


def test_readings_at_impossible_times_move_to_the_remarks_with_their_values():
    good, ahead, old = {"pack_voltage": 1.0}, {"pack_voltage": 2.0}, {"pack_voltage": 3.0}
    message = Message({NOW: good, NOW + 3_600_000: ahead, 946_684_800_000: old, NOW + 1: {}})
    set_times_aside(message, NOW)
    assert message.readings == {NOW: good}
    assert [(r.reason, r.time_ms, r.values) for r in message.remarks] == [
        ("future", NOW + 3_600_000, ahead),
        ("too-old", 946_684_800_000, old),
    ]


def test_thousands_of_unknown_names_do_not_fill_a_page():
    message = Message()
    for i in range(1000):
        add_unknown(message, f"name-{i}")
    add_unknown(message, "name-1")
    add_unknown(message, "x" * 1000)
    assert len(message.unknown) == 101
    assert message.unknown["name-1"] == 2
    assert message.unknown["(others)"] == 901
    assert sum(message.unknown.values()) == 1002
