import datetime as dt

import pytest
from conftest import EXAMPLE
from hypothesis import given
from hypothesis import strategies as st

from hub.errors import InventoryError
from hub.quantities import NAMES
from hub.store.inventory import Calibration, Fitting, Inventory, Node, Pack, Site
from hub.store.inventory_change import merged
from hub.store.inventory_file import instant_text, parse, read_file, write

SITE = '[[site]]\nname = "ridge"\nlatitude = 51.2\nlongitude = -1.9\n'
NODE = '[[node]]\nname = "ridge-east"\nsite = "ridge"\n'
PACK = '[[pack]]\nlabel = "R-07"\ncells_in_series = 8\nrated_capacity_ah = 2.4\n'
FITTING = '[[fitting]]\npack = "R-07"\nnode = "ridge-east"\nstart = 2026-03-01T09:00:00Z\n'
CALIBRATION = '[[calibration]]\nnode = "ridge-east"\nquantity = "pack_current"\nstart = 2026-03-01T09:00:00Z\n'


def refused(text):
    with pytest.raises(InventoryError) as caught:
        parse(text, "hub.toml")
    sentence = str(caught.value)
    assert sentence.startswith("hub.toml")
    assert "\n" not in sentence
    assert "`" not in sentence
    assert sentence.endswith((".", "?"))
    return sentence.removeprefix("hub.toml: ")


def test_only_what_is_stated_is_handed_on():
    rows = parse(SITE + NODE + PACK + FITTING + CALIBRATION, "x")
    assert rows == {
        "site": [{"name": "ridge", "latitude": 51.2, "longitude": -1.9}],
        "node": [{"name": "ridge-east", "site": "ridge"}],
        "pack": [{"label": "R-07", "cells_in_series": 8, "rated_capacity_ah": 2.4}],
        "fitting": [{"pack": "R-07", "node": "ridge-east", "start_ms": 1_772_355_600_000}],
        "calibration": [{"node": "ridge-east", "quantity": "pack_current", "start_ms": 1_772_355_600_000}],
    }
    assert parse("", "x") == {kind: [] for kind in rows}


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        # The row is named by its kind and its number, the key by its name, and it is said what it must be.
        (SITE.replace("51.2", "91"), "[[site]] number 1: latitude must be a number from -90 to 90, not 91."),
        (SITE.replace("51.2", "nan"), "[[site]] number 1: latitude must be a number from -90 to 90, not nan."),
        (SITE.replace("51.2", '"51.2"'), "[[site]] number 1: latitude must be a number from -90 to 90, not “51.2”."),
        (SITE.replace('"ridge"', '""'), "[[site]] number 1: name must be text in quotation marks of 1 to 64 characters, not “”."),
        ("[[site]]\nname = 'x'\nlatitude = 1\n", "[[site]] number 1: longitude is missing."),
        (SITE + SITE.replace("ridge", "weir") + "altitude = 5\n", "[[site]] number 2: unknown key “altitude”. Did you mean “altitude_m”?"),
        (SITE + 'timezone = "Europe/Lodnon"', "[[site]] number 1: there is no time zone “Europe/Lodnon”. Did you mean “Europe/London”?"),
        (SITE + 'timezone = "Europe"', "[[site]] number 1: there is no time zone “Europe”."),
        (SITE + 'timezone = "../etc/passwd"', "[[site]] number 1: there is no time zone “../etc/passwd”."),
        (SITE + 'timezone = ""', "[[site]] number 1: there is no time zone “”. Write it as in Europe/London."),
        (NODE.replace("ridge-east", "Ridge East"), "[[node]] number 1: name must be 1 to 64 of a-z, 0-9 and - in quotation marks, not “Ridge East”."),
        (NODE.replace('"ridge-east"', '"ridge\\n"'), "[[node]] number 1: name must be 1 to 64 of a-z, 0-9 and - in quotation marks, not “ridge”."),
        (NODE + 'current_sensing = "all"', "[[node]] number 1: current_sensing must be “net” or “charge-only”, not “all”."),
        (NODE + "interval_s = 0", "[[node]] number 1: interval_s must be a number above 0 and at most 86400, not 0."),
        (NODE + "panel_power_w = inf", "[[node]] number 1: panel_power_w must be a number above 0, not inf."),
        (NODE + "standing_load_a = -1", "[[node]] number 1: standing_load_a must be a number of at least 0, not -1."),
        (NODE + "standing_load_a = [1]", "[[node]] number 1: standing_load_a must be a number of at least 0, not a list."),
        (NODE + "panel_pwr_w = 10", "[[node]] number 1: unknown key “panel_pwr_w”. Did you mean “panel_power_w”?"),
        (PACK.replace("8", "1.5"), "[[pack]] number 1: cells_in_series must be a whole number from 1 to 100, not 1.5."),
        (PACK.replace("8", "true"), "[[pack]] number 1: cells_in_series must be a whole number from 1 to 100, not true."),
        (PACK + "commissioned = 2026-03-01T09:00:00Z", "[[pack]] number 1: commissioned must be a date, such as 2026-03-01, not 2026-03-01T09:00:00+00:00."),
        (FITTING.replace("T09:00:00Z", ""), "[[fitting]] number 1: start must be an instant with its zone, such as 2026-03-01T09:00:00Z, not 2026-03-01."),
        (FITTING.replace("00Z", "00"), "[[fitting]] number 1: start must be an instant with its zone, such as 2026-03-01T09:00:00Z, not 2026-03-01T09:00:00."),
        (FITTING.replace("2026", "0206"), "[[fitting]] number 1: its start is in the year 206. Correct the year."),
        (FITTING + "end = 2026-03-01T10:00:00+01:00", "[[fitting]] number 1: its end lies before its start."),
        (CALIBRATION.replace("pack_current", "pack_curent"), "[[calibration]] number 1: there is no quantity “pack_curent”. Did you mean “pack_current”?"),
        (CALIBRATION + "gain = 0", "[[calibration]] number 1: gain must be a number above 0, not 0."),
        (CALIBRATION + "offset = nan", "[[calibration]] number 1: offset must be a number, not nan."),
        # Two rows about one thing: a copied table whose name was forgotten.
        (NODE + NODE, "[[node]] number 2: it is about the same node as number 1. Correct or remove one of them."),
        (FITTING + FITTING, "[[fitting]] number 2: it is about the same fitting as number 1. Correct or remove one of them."),
        # The shape of the file.
        ("[[nodes]]\nname = 'x'", "there is no [[nodes]] in an inventory. Did you mean “node”?"),
        ("[node]\nname = 'x'", "write [[node]] with two brackets on each side: there may be several."),
        ("node = 5", "write [[node]] with two brackets on each side: there may be several."),
        ("node = [5]", "write [[node]] with two brackets on each side: there may be several."),
        ('node = ["name"]', "write [[node]] with two brackets on each side: there may be several."),
    ],
)  # fmt: skip
def test_every_complaint_is_one_sentence_that_names_the_row_and_what_to_write(text, sentence):
    assert refused(text).startswith(sentence)


def test_what_is_no_toml_is_told_with_the_line():
    assert "line 2" in refused("[[site]]\nname = ridge")
    assert refused("x = " + "[" * 5000).endswith("Correct that line and try again.")
    assert refused("x = 1" + "0" * 5000).endswith("Correct that line and try again.")


def either(text):
    """Rows, or the sentence that refuses them."""
    try:
        return parse(text, "x"), ""
    except InventoryError as error:
        return {}, str(error)


@given(st.text())
def test_any_text_is_rows_or_a_sentence(text):
    rows, sentence = either(text)
    assert sentence.startswith("x") or set(rows) == {"site", "node", "pack", "fitting", "calibration"}


words = st.sampled_from(["name", "site", "node", "label", "start", "end", "gain", "latitude", "timezone", "x", ""])
toml_values = st.one_of(
    st.text("ab\"\\\n'[]#=", max_size=6).map(lambda s: '"' + s.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n") + '"'),
    st.integers(-(2**70), 2**70).map(str),
    st.floats().map(repr),
    st.sampled_from(["true", "[1]", "{a = 1}", "2026-03-01", "09:00:00", "2026-03-01T09:00:00Z", "0001-01-01T00:00:00+23:59", "nan", "-inf"]),
)  # fmt: skip
toml_lines = st.one_of(
    st.sampled_from(["site", "node", "pack", "fitting", "calibration", "sites"]).map(lambda kind: f"[[{kind}]]"),
    st.tuples(words, toml_values).map(lambda pair: f'"{pair[0]}" = {pair[1]}'),
)


@given(st.lists(toml_lines, max_size=12).map("\n".join))
def test_any_toml_is_rows_or_a_sentence(text):
    rows, sentence = either(text)
    assert sentence.startswith("x") or set(rows) == {"site", "node", "pack", "fitting", "calibration"}


def test_a_file_that_cannot_be_read(tmp_path):
    with pytest.raises(InventoryError, match=r"cannot be read: No such file"):
        read_file(tmp_path / "none.toml")
    with pytest.raises(InventoryError, match=r"cannot be read: Is a directory"):
        read_file(tmp_path)
    (tmp_path / "latin.toml").write_bytes(b'x = "\xe9"')
    with pytest.raises(InventoryError, match="Save it as UTF-8"):
        read_file(tmp_path / "latin.toml")
    (tmp_path / "good.toml").write_text(EXAMPLE, encoding="utf-8")
    assert len(read_file(tmp_path / "good.toml")["node"]) == 3


labels = st.text(min_size=1, max_size=64).filter(lambda text: text.isprintable() or "\x7f" in text)
node_names = st.text("abcdefghijklmnopqrstuvwxyz0123456789-", min_size=1, max_size=64)
positive = st.floats(1e-9, 1e9)
instants = st.integers(946_684_800_000, 4_000_000_000_000)
inventories = st.builds(
    lambda site, node, pack, fitting, calibration: Inventory((site,), (node,), (pack,), (fitting,), (calibration,)),
    st.builds(Site, st.just("s"), st.floats(-90, 90), st.floats(-180, 180), st.floats(-500, 9000), st.sampled_from(["UTC", "Asia/Kolkata"]), st.text(max_size=20)),
    st.builds(Node, st.just("n"), st.just("s"), st.floats(0.1, 86400), st.sampled_from(["net", "charge-only"]), st.just(0.0) | positive, st.none() | positive),
    st.builds(Pack, st.just("P"), st.text(max_size=9), st.integers(1, 100), st.integers(1, 100), st.just(1.0) | positive, st.none() | st.dates(dt.date(2000, 1, 1)).map(str)),
    st.builds(Fitting, st.just("P"), st.just("n"), instants, st.none() | instants.map(lambda at: at + 3_200_000_000_000)),
    st.builds(Calibration, st.just("n"), st.sampled_from(NAMES), instants, positive, st.floats(-1e9, 1e9), st.text(max_size=9)),
)  # fmt: skip


@given(inventories)
def test_what_is_written_is_read_as_the_same_inventory(known):
    assert merged(Inventory(), parse(write(known), "x")) == known


@given(labels, node_names)
def test_any_name_that_is_allowed_survives(label, node):
    known = Inventory((Site(label, 1.0, 2.0),), (Node(node, label),), (Pack(label, "HR6", 8, 1, 2.0),))
    assert merged(Inventory(), parse(write(known), "x")) == known


def test_the_example_is_written_as_a_person_would(inventory):
    assert write(inventory).startswith(
        '[[site]]\nname = "ridge"\nlatitude = 51.2\nlongitude = -1.9\naltitude_m = 210.0\ntimezone = "Europe/London"\n\n'
    )
    assert 'pack = "R-07"\nnode = "ridge-west"\nstart = 2026-06-02T14:10:00Z\n' in write(inventory)
    assert write(Inventory()) == ""


@pytest.mark.parametrize(
    ("time_ms", "text"),
    [
        (0, "1970-01-01T00:00:00Z"),
        (1_772_355_600_000, "2026-03-01T09:00:00Z"),
        (1_772_355_600_007, "2026-03-01T09:00:00.007Z"),
        (4_102_444_799_999, "2099-12-31T23:59:59.999Z"),
    ],
)
def test_instants_have_milliseconds_only_where_there_are_some(time_ms, text):
    assert instant_text(time_ms) == text
