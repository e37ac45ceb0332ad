from cli.conftest import INVENTORY


def test_loading_shows_each_change_and_a_second_time_changes_nothing(packfold):
    path = packfold.write("inventory.toml", INVENTORY)
    first = packfold("inventory", "load", path).out
    assert "new node ridge-east" in first
    assert "new fitting R-07 on ridge-east from 2026-03-01T09:00:00Z" in first
    assert packfold("inventory", "load", path).out.strip() == "nothing to change"


def test_a_dry_run_changes_nothing(packfold):
    path = packfold.write("inventory.toml", INVENTORY)
    assert packfold("inventory", "load", path, "--dry-run", "--format", "json").document["changes"]
    assert packfold("inventory", "show", "--format", "json").document["nodes"] == []


def test_what_is_shown_can_be_loaded_again(packfold):
    shown = packfold.stocked()("inventory", "show").out
    path = packfold.write("again.toml", shown)
    assert packfold("inventory", "load", path).out.strip() == "nothing to change"


def test_a_wrong_row_is_named_and_nothing_of_the_file_is_loaded(packfold):
    path = packfold.write("inventory.toml", INVENTORY + '\n[[fitting]]\npack = "R-99"\nnode = "ridge-east"\n')
    ran = packfold("inventory", "load", path, code=1)
    assert "[[fitting]] number 2" in ran.err
    assert "start" in ran.err
    assert packfold("inventory", "show", "--format", "json").document["sites"] == []


def test_what_came_before_the_node_was_known_is_told_when_it_is_taken_in(packfold):
    from hub.store import aside, intake, schema
    from hub.store.engine import Database
    from hub.telemetry.message import Remark

    database = Database(packfold.data, checkpoints=True)
    schema.prepare(database)
    payload = b'[{"bt":1781085600,"n":"pack_voltage","u":"V","v":10.4}]'
    origin = aside.Origin("mqtt", "field/ridge-east/telemetry", None, "ridge-east", 1_781_085_601_000)
    with database.write() as connection:
        intake.take(connection, [intake.Incoming(origin, payload, None, Remark("unknown-node", "Enrol it."))])
    database.close()
    path = packfold.write("inventory.toml", INVENTORY)
    assert "taken in, from before ridge-east was known: 1 reading\n" in packfold("inventory", "load", path).out
