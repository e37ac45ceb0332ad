import json

import pytest
from conftest import EXAMPLE

from hub.errors import InventoryError
from hub.store import facts
from hub.store import inventory as store_inventory
from hub.store.inventory import Inventory
from hub.store.inventory_change import apply, differences, merged
from hub.store.inventory_file import parse

NOW = 1_780_000_000_000


def fitting(pack, node, start, end=None):
    return f'[[fitting]]\npack = "{pack}"\nnode = "{node}"\nstart = {start}\n' + (f"end = {end}\n" if end else "")


def change(connection, text, who="keeper", now_ms=NOW):
    return apply(connection, parse(text, "x"), who=who, now_ms=now_ms)


def audited(connection):
    return connection.exec_driver_sql("SELECT at_ms, who, action, subject, detail FROM audit ORDER BY id").fetchall()


def test_a_new_inventory_is_stored_and_noted_entry_by_entry(database):
    with database.write() as connection:
        changes = change(connection, EXAMPLE)
        assert [f"{c.kind} {c.key}" for c in changes] == [
            "site ridge",
            "site weir",
            "node ridge-east",
            "node ridge-west",
            "node weir-gauge",
            "pack R-07",
            "pack R-08",
            "fitting R-07 on ridge-east from 2026-05-01T09:00:00Z",
            "fitting R-07 on ridge-west from 2026-06-02T14:10:00Z",
        ]
        assert changes[0].sentence == "new site ridge"
        notes = audited(connection)
        assert [(n.at_ms, n.who, n.action) for n in notes] == [(NOW, "keeper", "added")] * 9
        assert json.loads(notes[0].detail)["after"]["altitude_m"] == 210
        assert facts.revision(connection) == 1


def test_loading_the_same_again_changes_nothing(database, inventory):
    with database.write() as connection:
        before, revision = len(audited(connection)), facts.revision(connection)
        assert change(connection, EXAMPLE) == []
        assert len(audited(connection)) == before
        assert facts.revision(connection) == revision
        assert store_inventory.load(connection) == inventory


def test_what_the_file_leaves_out_stays_as_it_is(database, inventory):
    with database.write() as connection:
        (found,) = change(
            connection, '[[node]]\nname = "ridge-east"\nsite = "ridge"\npanel_tilt_deg = 35\n', "someone", 7
        )
        assert found.sentence == "node ridge-east: panel_tilt_deg not stated → 35.0"
        node = store_inventory.load(connection).node("ridge-east")
        assert (node.interval_s, node.panel_power_w, node.panel_tilt_deg) == (10, 10, 35)
        note = audited(connection)[-1]
        assert (note.at_ms, note.who, note.action, note.subject) == (7, "someone", "changed", "node ridge-east")
        assert json.loads(note.detail) == {"before": {"panel_tilt_deg": None}, "after": {"panel_tilt_deg": 35.0}}


def test_a_node_may_move_to_another_site_and_a_site_may_be_corrected(database, inventory):
    with database.write() as connection:
        change(
            connection,
            '[[node]]\nname = "ridge-east"\nsite = "weir"\n[[site]]\nname = "weir"\nlatitude = 1\nlongitude = 2\n',
        )
        found = store_inventory.load(connection)
        assert found.site_of(found.node("ridge-east")).latitude == 1


def test_an_open_fitting_ends_where_the_next_of_its_pack_or_node_begins(database, inventory):
    with database.write() as connection:
        found = change(connection, fitting("R-08", "ridge-west", "2026-07-01T00:00:00Z"))
        assert [c.sentence for c in found] == [
            "fitting R-07 on ridge-west from 2026-06-02T14:10:00Z: end_ms not stated → 1782864000000",
            "new fitting R-08 on ridge-west from 2026-07-01T00:00:00Z",
        ]
        west = store_inventory.load(connection).fitted("ridge-west")
        assert west[0].end_ms == west[1].start_ms
        # An earlier one that is told late ends where the known one begins.
        change(connection, fitting("R-08", "ridge-east", "2026-04-01T00:00:00Z"))
        east = store_inventory.load(connection).fitted("ridge-east")
        assert east[0].end_ms == east[1].start_ms


@pytest.mark.parametrize(
    ("pack", "node", "start", "end"),
    [
        ("R-07", "weir-gauge", "2026-05-10T00:00:00Z", "2026-05-11T00:00:00Z"),  # the pack is in another node
        ("R-08", "ridge-east", "2026-05-10T00:00:00Z", "2026-05-11T00:00:00Z"),  # the node has another pack
        ("R-08", "ridge-east", "2026-04-01T00:00:00Z", "2026-05-02T00:00:00Z"),  # its end runs into the next
        ("R-07", "weir-gauge", "2026-06-02T14:10:00Z", None),  # the pack goes to two nodes at once
    ],
)
def test_two_fittings_cannot_overlap(database, inventory, pack, node, start, end):
    with pytest.raises(InventoryError, match=r"overlaps another fitting .* Correct the start or the end") as caught:
        merged(inventory, parse(fitting(pack, node, start, end), "x"))
    assert "\n" not in str(caught.value)


def test_a_fitting_may_begin_the_moment_another_ends(database, inventory):
    found = merged(inventory, parse(fitting("R-08", "ridge-east", "2026-06-02T14:10:00Z"), "x"))
    assert len(found.fitted("ridge-east")) == 2


def test_two_packs_may_change_places(database, inventory):
    start = "2026-08-01T00:00:00Z"
    with database.write() as connection:
        change(connection, fitting("R-07", "ridge-east", start) + fitting("R-08", "weir-gauge", start))
        change(connection, fitting("R-08", "ridge-east", start) + fitting("R-07", "weir-gauge", start))
        found = store_inventory.load(connection)
        assert [found.fitted(node)[-1].pack for node in ("ridge-east", "weir-gauge")] == ["R-08", "R-07"]


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ('[[node]]\nname = "n"\nsite = "moon"', "Node n stands at “moon”, but there is no such site. Add a [[site]]."),
        (fitting("R-07", "n", "2026-01-01T00:00:00Z"), "A fitting names node “n”, but there is no such node. Add a [[node]]."),
        (fitting("X", "ridge-east", "2026-01-01T00:00:00Z"), "A fitting names pack “X”, but there is no such pack. Add a [[pack]]."),
        ('[[calibration]]\nnode = "n"\nquantity = "uptime"\nstart = 2026-01-01T00:00:00Z', "A calibration names node “n”, but there is no such node."),
    ],
)  # fmt: skip
def test_what_refers_to_nothing_is_refused_and_nothing_is_stored(database, inventory, text, sentence):
    with pytest.raises(InventoryError) as caught, database.write() as connection:
        change(connection, text)
    assert str(caught.value).startswith(sentence)
    with database.read() as connection:
        assert store_inventory.load(connection) == inventory


def test_a_calibration_is_told_apart_by_node_quantity_and_start(database, inventory):
    text = '[[calibration]]\nnode = "{}"\nquantity = "{}"\nstart = 2026-0{}-01T00:00:00Z\ngain = {}\n'
    with database.write() as connection:
        change(connection, text.format("ridge-east", "pack_current", 3, 2.0))
        change(connection, text.format("ridge-east", "pack_current", 4, 3.0))
        change(connection, text.format("ridge-west", "pack_current", 3, 4.0))
        (found,) = change(connection, text.format("ridge-east", "pack_current", 3, 2.5))
        assert found.sentence == "calibration pack_current on ridge-east from 2026-03-01T00:00:00Z: gain 2.0 → 2.5"
        assert [c.gain for c in store_inventory.load(connection).calibrations] == [2.5, 3.0, 4.0]


def test_differences_are_the_changes_that_applying_makes(database, inventory):
    rows = parse(EXAMPLE.replace("2.4", "2.6").replace("interval_s = 10", "interval_s = 20"), "x")
    planned = differences(inventory, merged(inventory, rows))
    with database.write() as connection:
        assert apply(connection, rows, who="keeper", now_ms=NOW) == planned
    assert [c.sentence for c in planned] == [
        "node ridge-east: interval_s 10.0 → 20.0",
        "pack R-07: rated_capacity_ah 2.4 → 2.6",
    ]
    assert differences(Inventory(), Inventory()) == []
