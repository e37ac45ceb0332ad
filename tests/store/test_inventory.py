import pytest

from hub.errors import InventoryError
from hub.store import inventory as store_inventory
from hub.store.inventory import KEYS, Fitting, Inventory


def test_it_is_loaded_in_order_of_its_keys(database, inventory):
    with database.read() as connection:
        found = store_inventory.load(connection)
    assert found == inventory
    assert [site.name for site in found.sites] == ["ridge", "weir"]
    assert [node.name for node in found.nodes] == ["ridge-east", "ridge-west", "weir-gauge"]
    assert [pack.label for pack in found.packs] == ["R-07", "R-08"]
    assert [fitting.node for fitting in found.fittings] == ["ridge-east", "ridge-west"]
    for kind, names in KEYS.items():
        entries = getattr(found, f"{kind}s")
        assert [tuple(getattr(e, n) for n in names) for e in entries] == sorted(
            tuple(getattr(e, n) for n in names) for e in entries
        )


def test_an_empty_database_has_an_empty_inventory(database):
    with database.read() as connection:
        assert store_inventory.load(connection) == Inventory()
        assert store_inventory.node_ids(connection) == store_inventory.site_ids(connection) == {}
        with pytest.raises(InventoryError, match="none yet; load an inventory first"):
            store_inventory.node_id(connection, "ridge-east")


def test_keys_lead_to_the_names(database, inventory):
    with database.read() as connection:
        nodes = store_inventory.node_ids(connection)
        assert list(nodes) == [node.name for node in inventory.nodes]
        assert list(store_inventory.pack_ids(connection)) == [pack.label for pack in inventory.packs]
        assert list(store_inventory.site_ids(connection)) == [site.name for site in inventory.sites]
        assert store_inventory.node_id(connection, "ridge-west") == nodes["ridge-west"]
        with pytest.raises(InventoryError, match="Known nodes: ridge-east, ridge-west, weir-gauge"):
            store_inventory.node_id(connection, "ridge-north")


def test_things_are_found_by_name_or_the_known_names_are_told(inventory):
    assert inventory.node("weir-gauge").current_full_scale_a == 3.2
    assert inventory.site_of(inventory.node("weir-gauge")).timezone == "Australia/Sydney"
    assert inventory.pack("R-08").cells_in_series == 4
    with pytest.raises(InventoryError, match=r"no node “mast”. Known nodes: ridge-east, ridge-west"):
        inventory.node("mast")
    with pytest.raises(InventoryError, match=r"no pack “R-99”. Known packs: R-07, R-08"):
        inventory.pack("R-99")
    with pytest.raises(InventoryError, match="none yet"):
        Inventory().pack("R-07")


def test_fittings_of_a_node_in_order_of_time(inventory):
    assert inventory.fitted("ridge-west") == (Fitting("R-07", "ridge-west", 1_780_409_400_000),)
    assert inventory.fitted("weir-gauge") == ()
