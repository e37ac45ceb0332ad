from zoneinfo import ZoneInfo

from hub.store.inventory import Node
from hub.web.daytable import COLUMNS, NO_PACK, headings, reason, table

LONDON = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000
NODE = Node("ridge-east", "ridge", panel_power_w=10.0)
DAY = {
    "date": "2026-05-31",
    "pack": "R-07",
    "end_ms": 1_780_268_400_000,
    "coverage": 0.994,
    "full_at_ms": 1_780_230_000_000,
    "charge_ah": 0.742,
    "charge_uncertainty_ah": 0.0148,
    "discharge_ah": 0.69,
    "discharge_uncertainty_ah": None,
    "charge_wh": 8.0,
    "discharge_wh": 7.1,
    "load_wh": None,
    "panel_wh": 23.04,
    "clear_sky_wh": None,
    "harvest_ratio": 0.504,
    "pack_temperature_max_c": -0.04,
    "cell_voltage_min_v": 1.2384,
    "cell_voltage_max_v": 1.419,
}


def cells(day, node=NODE):
    found = table([day], node, LONDON, NOW)
    return {cell.name: (cell.text.replace("\u00a0", " "), cell.note) for cell in found.rows[0].cells}, found.notes


def test_every_figure_has_its_unit_in_its_heading_and_its_uncertainty():
    told, _ = cells(DAY)
    assert told["Charge in, Ah"] == ("0.74 ± 0.01", "")
    assert told["Charge out, Ah"] == ("0.69", "")
    assert told["Of clear sky, %"] == ("50", "")
    assert told["Seen, %"] == ("99", "")
    assert told["Warmest, °C"] == ("0.0", "")
    assert told["Full"] == ("13:20 BST", "")
    assert list(told) == list(headings())


def test_what_is_not_known_has_its_reason_as_a_note():
    told, notes = cells(DAY)
    assert told["Load, Wh"] == ("not known", "a")
    assert told["Clear sky, Wh"] == ("not known", "b")
    assert notes == {
        "a": "The node sent no load current that day, and no load is stated for it in the inventory.",
        "b": "The panel's tilt and azimuth are not in the inventory.",
    }


def test_the_same_reason_is_noted_once():
    found = table([DAY, DAY | {"date": "2026-06-01"}], NODE, LONDON, NOW)
    assert len(found.notes) == 2
    assert [row.date for row in found.rows] == ["2026-06-01", "2026-05-31"]


def test_a_day_that_was_seen_and_had_no_full_charge_did_not_fill():
    assert cells(DAY | {"full_at_ms": None})[0]["Full"] == ("did not fill", "")


def test_a_day_that_is_not_over_may_still_fill():
    assert cells(DAY | {"full_at_ms": None, "end_ms": NOW + 1, "coverage": 0.3})[0]["Full"] == ("not yet", "")


def test_a_day_that_was_hardly_seen_is_not_judged():
    told, notes = cells(DAY | {"full_at_ms": None, "coverage": 0.3})
    assert told["Full"] == ("not known", "a")
    assert "Too little of the day was seen" in notes["a"]


def test_a_day_without_a_pack_says_so():
    told, notes = cells(DAY | {"pack": None, "full_at_ms": None, "cell_voltage_min_v": None})
    assert told["Pack"] == ("none fitted", "")
    assert told["Full"][1] == told["Lowest cell, V"][1]
    assert notes[told["Full"][1]] == NO_PACK


def test_every_column_has_a_reason_when_it_is_not_known():
    for node in (
        NODE,
        Node("n", "s", current_sensing="charge-only"),
        Node("n", "s", 60, panel_power_w=1, panel_tilt_deg=1, panel_azimuth_deg=1),
    ):
        for column in COLUMNS:
            text = reason(column.key, DAY, node)
            assert text.endswith(".")
            assert len(text) > 20


def test_a_sensor_that_does_not_see_the_load_is_named():
    node = Node("n", "s", current_sensing="charge-only")
    assert "standing_load_a" in reason("discharge_ah", DAY, node)
    assert "standing_load_a" not in reason("charge_ah", DAY, node)
