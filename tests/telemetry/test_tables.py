import msgspec
import pytest

from hub.errors import SettingsError
from hub.telemetry.tables import to_struct


class Thing(msgspec.Struct):
    width_m: float
    label: str = "x"


def test_a_table_becomes_a_structure():
    assert to_struct({"width_m": 2}, Thing, "The thing", SettingsError) == Thing(2.0)


@pytest.mark.parametrize(
    ("table", "sentence"),
    [
        ({"width_mm": 2}, "The thing has the unknown key “width_mm”; the nearest name is width_m."),
        ({"width_m": "wide"}, "The thing cannot be read at width_m: expected `float`, got `str`."),
        ({}, "The thing cannot be read: object missing required field `width_m`."),
    ],
)
def test_what_does_not_fit_is_said_in_one_sentence(table, sentence):
    with pytest.raises(SettingsError) as problem:
        to_struct(table, Thing, "The thing", SettingsError)
    assert str(problem.value) == sentence
