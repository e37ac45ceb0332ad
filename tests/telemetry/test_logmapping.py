import tomllib

import pytest

from hub.errors import UsageError
from hub.telemetry.logmapping import EXAMPLE, ColumnMapping, mapping_from

WHOLE = """
header = true
delimiter = ";"
decimal = ","
skip_until = "Datum"
time = {column = ["Datum", "Zeit"], format = "%d.%m.%Y %H:%M:%S", timezone = "Europe/Berlin", rule = "order"}
columns = [
    {name = "U", quantity = "pack_voltage", unit = "mV"},
    {name = "I", quantity = "pack_current", scale = -0.001, offset = 0.002},
]
"""


def test_a_whole_mapping():
    mapping = mapping_from(tomllib.loads(WHOLE))
    assert mapping.time.column == ["Datum", "Zeit"]
    assert mapping.columns[1] == ColumnMapping("pack_current", name="I", scale=-0.001, offset=0.002)
    assert mapping.columns[0].conversion(10_400) == 10.4


def test_a_log_without_times_has_a_start_as_text_or_as_a_date_of_toml():
    for start in ('"2026-06-01T10:00:00Z"', "2026-06-01T10:00:00Z"):
        table = tomllib.loads(
            f'header = false\ntime = {{start = {start}, step_s = 1.3125}}\ncolumns = [{{number = 1, quantity = "pack_voltage"}}]'
        )
        assert mapping_from(table).time.step_s == 1.3125


def test_the_example_in_our_own_sentences_is_a_mapping():
    mapping_from(tomllib.loads(EXAMPLE.replace(" and ", "\n")))


COLUMNS = [{"number": 1, "quantity": "pack_voltage"}]
TIME = {"column": 2, "format": "unix"}


@pytest.mark.parametrize(
    ("table", "sentence"),
    [
        ({}, "needs time as a table"),
        ({"time": TIME}, "needs columns"),
        ({"time": TIME, "columns": []}, "needs columns"),
        ({"time": TIME, "columns": [3]}, "needs columns as a table"),
        (
            {"time": TIME, "columns": COLUMNS, "delimeter": ";"},
            "unknown key “delimeter”; the nearest name is delimiter",
        ),
        ({"time": {**TIME, "zone": "x"}, "columns": COLUMNS}, "The time of the log mapping has the unknown key “zone”"),
        (
            {"time": TIME, "columns": [{**COLUMNS[0], "units": "V"}]},
            "Column 1 of the log mapping has the unknown key “units”; the nearest name is unit",
        ),
        ({"time": TIME, "columns": COLUMNS, "header": "yes"}, "cannot be read at header"),
        ({"time": TIME, "columns": COLUMNS, "delimiter": "::"}, "none of comma"),
        ({"time": TIME, "columns": COLUMNS, "decimal": ","}, "both a comma"),
        ({"time": TIME, "columns": COLUMNS, "skip_until": ""}, "skip_until needs"),
        ({"time": TIME, "columns": COLUMNS, "skip_until_last": True}, "skip_until needs"),
        ({"time": {}, "columns": COLUMNS}, "either column"),
        ({"time": {"column": []}, "columns": COLUMNS}, "either column"),
        ({"time": {**TIME, "step_s": 1.0}, "columns": COLUMNS}, "either column"),
        ({"time": {**TIME, "start": "2026-06-01T10:00:00Z"}, "columns": COLUMNS}, "either column"),
        ({"time": {"start": "2026-06-01T10:00:00Z"}, "columns": COLUMNS}, "step_s"),
        ({"time": {"start": "2026-06-01T10:00:00Z", "step_s": 0.0}, "columns": COLUMNS}, "step_s"),
        ({"time": {"start": "2026-06-01T10:00:00Z", "step_s": float("nan")}, "columns": COLUMNS}, "step_s"),
        ({"time": {"start": "2026-06-01", "step_s": 1.0}, "columns": COLUMNS}, "not guessed"),
        ({"time": {"column": 2, "format": "%d.%m.%Y %H:%M"}, "columns": COLUMNS}, "exactly one of"),
        ({"time": {"column": 0}, "columns": COLUMNS}, "counted from 1"),
        ({"time": TIME, "columns": [{"number": 0, "quantity": "pack_voltage"}]}, "counted from 1"),
        ({"time": {"column": "t"}, "columns": COLUMNS, "header": False}, "no column named “t”"),
        ({"time": TIME, "columns": [{"quantity": "pack_voltage"}]}, "either number or name"),
        ({"time": TIME, "columns": [{"number": 1, "name": "U", "quantity": "pack_voltage"}]}, "either number or name"),
        ({"time": TIME, "columns": [{"number": 1, "quantity": "pack_volts"}]}, "nearest name is pack_voltage"),
        ({"time": TIME, "columns": [{"number": 1, "quantity": "pack_voltage", "unit": "A"}]}, "send it in V, mV or kV"),
        ({"time": TIME, "columns": [{**COLUMNS[0], "scale": 0.0}]}, "other than 0"),
        ({"time": TIME, "columns": [{**COLUMNS[0], "scale": float("nan")}]}, "other than 0"),
        ({"time": TIME, "columns": [{**COLUMNS[0], "offset": float("inf")}]}, "offset finite"),
        ({"time": TIME, "columns": COLUMNS * 2}, "twice"),
    ],
)
def test_what_does_not_fit_is_said_in_one_sentence(table, sentence):
    with pytest.raises(UsageError, match=sentence) as problem:
        mapping_from(table)
    assert str(problem.value).endswith(".")
