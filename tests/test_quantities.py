import pytest

from hub.quantities import BY_NAME, CATALOGUE, COLUMN_SUFFIX, MESSAGE_FIELDS, NAMES


def test_names_are_the_ones_that_nodes_and_exports_were_promised():
    assert (
        *("pack_voltage", "pack_current", "pack_temperature", "air_temperature", "panel_voltage", "panel_current"),
        *("load_current", "charger_duty", "charge_target", "charge_in", "charge_out", "signal", "uptime"),
    ) == NAMES
    assert list(BY_NAME.values()) == list(CATALOGUE)
    assert not set(MESSAGE_FIELDS) & set(NAMES)


@pytest.mark.parametrize("quantity", CATALOGUE, ids=NAMES)
def test_every_quantity_fits_a_column_and_a_stored_integer(quantity):
    assert quantity.name.isidentifier()
    assert quantity.name.islower()
    assert quantity.low < quantity.high
    assert quantity.scale == 10**quantity.decimals
    assert max(abs(quantity.low), abs(quantity.high)) * quantity.scale < 2**53
    assert quantity.label[0].isupper()
    assert quantity.unit == "ratio" or quantity.unit in COLUMN_SUFFIX


@pytest.mark.parametrize(
    ("name", "step"),
    [
        # INA219 datasheet (SBOS448), bus voltage and shunt voltage registers: 4 mV, and 10 µV on 0.1 ohm.
        ("pack_voltage", 0.004),
        ("panel_voltage", 0.004),
        ("pack_current", 0.0001),
        ("panel_current", 0.0001),
        ("load_current", 0.0001),
        # DS18B20 datasheet, 12-bit resolution: 0.0625 °C.
        ("pack_temperature", 0.0625),
        ("air_temperature", 0.0625),
    ],
)
def test_every_step_of_the_common_parts_is_kept_exactly(name, step):
    scale = BY_NAME[name].scale
    assert round(step * scale) == pytest.approx(step * scale, abs=1e-9)
    assert all(round(n * step * scale) / scale == pytest.approx(n * step, abs=1e-12) for n in range(-3000, 3000, 7))


def test_the_thermometers_marker_for_no_sensor_lies_outside_and_its_range_inside():
    # DS18B20 datasheet: -55 to 125 °C; drivers report -127 °C where no sensor answers (common practice, no source).
    for name in ("pack_temperature", "air_temperature"):
        assert (BY_NAME[name].low, BY_NAME[name].high) == (-55.0, 125.0)


def test_columns_that_leave_the_hub_carry_their_unit():
    assert {q.column for q in CATALOGUE} >= {
        "pack_voltage_V",
        "pack_temperature_C",
        "charge_in_Ah",
        "uptime_s",
        "signal_dBm",
    }
    assert BY_NAME["charger_duty"].column == "charger_duty"


def test_units_are_those_of_the_registry_of_senml():
    # RFC 8428, section 12.1, and the secondary units of RFC 8798.
    registered = {"V", "A", "Cel", "/", "s", "Ah", "dBm"}
    assert {q.senml_unit for q in CATALOGUE} <= registered
