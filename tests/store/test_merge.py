import pytest
from store.strategies import DAY, as_rows

from hub.store import readings
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.layout import DAY_MS

AT = DAY * DAY_MS + 1000


@pytest.fixture(params=[False, True], ids=["loose", "sealed"])
def stored(request, scratch):
    """A connection on which one reading is stored, as a row or in a block."""
    with scratch() as connection:
        append(connection, [Arrival(1, 1, {AT: {"pack_voltage": 10.4, "charge_in": 12345.678901}})])
        if request.param:
            assert readings.seal(connection, 1, AT + DAY_MS) == 1
        yield connection


def test_a_missing_value_fills_in(stored):
    outcome = append(stored, [Arrival(1, 2, {AT: {"pack_current": 0.1, "pack_voltage": 10.4}})])[0]
    assert (outcome.new, outcome.filled, outcome.repeated, outcome.contradictions) == (0, 1, 0, [])
    assert as_rows(readings.read(stored, 1, AT, AT + 1))[AT]["pack_current"] == 10_000


def test_a_value_within_half_a_step_is_the_same_value(stored):
    outcome = append(stored, [Arrival(1, 2, {AT: {"pack_voltage": 10.40004}})])[0]
    assert (outcome.repeated, outcome.contradictions) == (1, [])


def test_a_contradiction_keeps_the_first_and_says_both_in_full(stored):
    outcome = append(stored, [Arrival(1, 2, {AT: {"charge_in": 12345.678902, "pack_voltage": 10.4}})])[0]
    assert (outcome.new, outcome.filled, outcome.repeated) == (0, 0, 1)
    (remark,) = outcome.contradictions
    assert remark.detail == (
        "charge_in is already stored as 12345.678901 Ah for this instant; "
        "the later value 12345.678902 Ah is kept aside."
    )
    assert (remark.reason, remark.time_ms, remark.quantity, remark.value) == (
        "contradiction",
        AT,
        "charge_in",
        12345.678902,
    )
    assert as_rows(readings.read(stored, 1, AT, AT + 1))[AT]["charge_in"] == 12_345_678_901


def test_a_new_instant_of_the_same_day_is_new(stored):
    outcome = append(stored, [Arrival(1, 2, {AT + 1: {"pack_voltage": 10.0}})])[0]
    assert outcome.new == 1
    assert readings.count(stored, 1) == 2


def test_one_message_may_do_all_of_it(stored):
    message = {AT: {"pack_voltage": 11.0, "uptime": 5.0}, AT + 1: {"uptime": 6.0}}
    outcome = append(stored, [Arrival(1, 2, message)])[0]
    assert (outcome.new, outcome.filled, outcome.repeated, len(outcome.contradictions)) == (1, 1, 0, 1)


@pytest.mark.parametrize(
    ("name", "value", "shown"),
    [
        ("pack_voltage", 10.0, "10 V"),
        ("signal", -70.5, "-70.5 dBm"),
        ("charger_duty", 0.5, "0.5"),
        ("pack_temperature", -0.0625, "-0.0625 °C"),
        ("uptime", 100.0, "100 s"),
    ],
)
def test_values_are_shown_with_their_digits_and_their_unit(scratch, name, value, shown):
    with scratch() as connection:
        append(connection, [Arrival(1, 1, {AT: {name: value}})])
        outcome = append(connection, [Arrival(1, 1, {AT: {name: value + 0.25}})])[0]
        assert f"stored as {shown} for" in outcome.contradictions[0].detail
