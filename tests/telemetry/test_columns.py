import pytest

from hub.telemetry import logtime
from hub.telemetry.columns import Cell, foreign, mapped_layout, native_layout
from hub.telemetry.logmapping import mapping_from
from hub.telemetry.units import SAME


def test_a_header_of_the_node_interface():
    layout = native_layout("pack_voltage_V, time ,boot,pack_current_mA,node,sequence,,pack_voltage_mV")
    assert layout is not None
    assert (layout.delimiter, layout.decimal, layout.width, layout.exact) == (",", ".", 8, True)
    assert (layout.times, layout.boot, layout.clock) == ([1], 2, logtime.native_ms)
    assert [(c.place, c.quantity, c.unit(500.0)) for c in layout.columns] == [
        (0, "pack_voltage", 500.0),
        (3, "pack_current", 0.5),
    ]
    assert layout.unknown == ["node", "pack_voltage_mV"]  # a second column of one quantity is not read


@pytest.mark.parametrize(
    ("header", "decimal"), [("time;uptime_s", ","), ("time\tuptime_s", "."), ('"time","uptime_s"', ".")]
)
def test_the_delimiter_is_the_one_that_sets_the_time_free(header, decimal):
    layout = native_layout(header)
    assert layout is not None
    assert (layout.decimal, layout.columns) == (decimal, [Cell(1, "uptime", 1.0, 0.0, SAME)])


@pytest.mark.parametrize(
    "text", ["1780000000,10.4", "timestamp,pack_voltage_V", "pack_voltage_V", '"time,pack_voltage_V', "uptime_s"]
)
def test_lines_that_are_no_header(text):
    assert native_layout(text) is None


def test_a_mapping_reads_by_name_or_by_number():
    table = {
        "delimiter": ";",
        "time": {"column": "t", "format": "unix"},
        "columns": [{"number": 3, "quantity": "pack_voltage"}, {"name": "I", "quantity": "pack_current", "scale": 2.0}],
    }
    layout = mapped_layout(mapping_from(table), "I; t ;U;x")
    assert (layout.times, layout.width, layout.exact) == ([1], 4, True)
    assert [(c.place, c.quantity, c.scale) for c in layout.columns] == [
        (2, "pack_voltage", 1.0),
        (0, "pack_current", 2.0),
    ]


def test_a_mapping_without_header_needs_only_the_columns_it_reads():
    table = {
        "header": False,
        "time": {"column": 1, "format": "unix"},
        "columns": [{"number": 3, "quantity": "pack_voltage"}],
    }
    layout = mapped_layout(mapping_from(table), "1780000000,x,10.4,y")
    assert (layout.width, layout.exact) == (3, False)


def test_a_foreign_header_is_named_with_its_unknown_columns():
    assert "(unknown: “a”, “b”)" in str(foreign("a;b;pack_voltage_V"))
    assert "nothing, but there is no time column" in str(foreign("pack_voltage_V,pack_current_A"))
    assert "“h”, and more" not in str(foreign(",".join("abcdefgh")))
    assert "“h” and more" in str(foreign(",".join("abcdefghi")))
    assert len(str(foreign("x" * 100_000))) < 600
