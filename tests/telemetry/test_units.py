"""Check values: RFC 8798, section 3 (scales and offsets of secondary units); RFC 8428, section 12.1."""

import pytest

from hub.quantities import BY_NAME, CATALOGUE
from hub.telemetry.units import HEADER, SENML, column_problem, conversion, misfit, shortened, split_column


@pytest.mark.parametrize(
    ("quantity", "unit", "value", "expected"),
    [
        ("pack_voltage", "V", 10.41, 10.41),
        ("pack_voltage", "mV", 10410, 10.41),
        ("panel_voltage", "kV", 0.0179, 17.9),
        ("pack_current", "mA", -482, -0.482),
        ("pack_temperature", "Cel", 23.6, 23.6),
        ("pack_temperature", "K", 273.15, 0.0),  # definition of the degree Celsius
        ("charge_in", "Ah", 1.2, 1.2),
        ("charge_in", "C", 4320, 1.2),  # RFC 8798: 1 Ah = 3600 C
        ("charge_out", "mAh", 1200, 1.2),
        ("uptime", "ms", 1500, 1.5),
        ("uptime", "min", 2, 120),
        ("uptime", "h", 2, 7200),
        ("charger_duty", "/", 0.85, 0.85),
        ("charger_duty", "%", 0.85, 0.85),  # the registry's "%" is the plain ratio
        ("charger_duty", "/100", 85, 0.85),
        ("signal", "dBm", -71, -71),
        ("signal", "dBW", -101, -71),  # RFC 8798: dBm = dBW - 30
        ("pack_voltage", None, 10.41, 10.41),
    ],
)
def test_a_value_comes_out_in_the_unit_of_the_catalogue(quantity, unit, value, expected):
    found = conversion(BY_NAME[quantity], unit)
    assert found is not None
    assert found(value) == pytest.approx(expected, rel=1e-15, abs=1e-12)


def test_millivolts_become_the_very_number_that_volts_are():
    to_volts = conversion(BY_NAME["pack_voltage"], "mV")
    assert to_volts is not None
    assert [to_volts(mv) for mv in range(20_000)] == [float(f"{mv / 1000:.3f}") for mv in range(20_000)]


def test_every_quantity_can_be_sent_in_its_own_senml_unit_unchanged():
    for quantity in CATALOGUE:
        found = conversion(quantity, quantity.senml_unit)
        assert found is not None
        assert found(1.5) == 1.5
    assert set(SENML) == set(HEADER) == {q.unit for q in CATALOGUE}


def test_a_unit_of_something_else_is_refused_with_what_to_send():
    assert conversion(BY_NAME["pack_temperature"], "V") is None
    assert misfit(BY_NAME["pack_temperature"], "V") == (
        "pack_temperature came in “V”, which is a unit of something else; send it in Cel or K."
    )


def test_a_slip_of_the_pen_is_told_from_a_unit_of_something_else():
    assert misfit(BY_NAME["pack_temperature"], "cel").endswith("is not a unit the hub knows; write Cel.")
    assert misfit(BY_NAME["pack_current"], "furlong").endswith("send it in A, mA or uA.")


@pytest.mark.parametrize(
    ("heading", "name", "value", "expected"),
    [
        ("pack_voltage_V", "pack_voltage", 10.4, 10.4),
        ("pack_voltage_mV", "pack_voltage", 10400, 10.4),
        ("pack_current_mA", "pack_current", -482, -0.482),
        ("pack_temperature_C", "pack_temperature", 23.6, 23.6),
        ("pack_temperature_Cel", "pack_temperature", 23.6, 23.6),
        ("air_temperature_K", "air_temperature", 273.15, 0.0),
        ("charge_in_Ah", "charge_in", 1.5, 1.5),
        ("charge_out_mAh", "charge_out", 1500, 1.5),
        ("charge_in_C", "charge_in", 3600, 1.0),
        ("uptime_s", "uptime", 7, 7),
        ("uptime_ms", "uptime", 7000, 7),
        ("charger_duty_percent", "charger_duty", 85, 0.85),
        ("charger_duty_ratio", "charger_duty", 0.85, 0.85),
        ("charger_duty", "charger_duty", 0.85, 0.85),
        ("signal_dBm", "signal", -71, -71),
    ],
)
def test_a_heading_names_quantity_and_unit(heading, name, value, expected):
    found = split_column(heading)
    assert found is not None
    assert found[0].name == name
    assert found[1](value) == pytest.approx(expected, abs=1e-12)


def test_the_column_name_of_every_quantity_is_read_back():
    for quantity in CATALOGUE:
        found = split_column(quantity.column)
        assert found is not None
        assert found[0] is quantity
        assert found[1](1.25) == 1.25


def test_a_heading_with_a_wrong_ending_is_told_from_an_unknown_one():
    assert split_column("pack_voltage_A") is None
    assert column_problem("pack_voltage_A").endswith("it may end in _V, _mV or _kV.")
    assert split_column("pack_volts") is None
    assert "the nearest name is pack_voltage" in column_problem("pack_volts")


def test_text_from_outside_is_bounded_and_printable_in_a_sentence():
    assert shortened("a\x00b\n") == "“a\ufffdb\ufffd”"
    assert len(shortened("x" * 10_000)) == 63
