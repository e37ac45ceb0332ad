"""What every test may use."""

import os
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import settings

from hub.store import inventory as store_inventory
from hub.store import inventory_change, inventory_file, schema
from hub.store.engine import DATABASE_NAME, Database
from hub.store.inventory import Inventory

# A machine that is busy with something else must not fail a property.
settings.register_profile("unhurried", deadline=None)
settings.load_profile("unhurried")

MEASURED = (
    Path(os.environ["PACKFOLD_MEASURED"])
    if "PACKFOLD_MEASURED" in os.environ
    else Path(__file__).parents[2] / "shared" / "data"
)

# Invented places and packs: two nodes on a hill, one by a river; one pack moved on a Tuesday.
EXAMPLE = """
[[site]]
name = "ridge"
latitude = 51.2
longitude = -1.9
altitude_m = 210
timezone = "Europe/London"

[[site]]
name = "weir"
latitude = -33.4
longitude = 149.6
timezone = "Australia/Sydney"

[[node]]
name = "ridge-east"
site = "ridge"
interval_s = 10
panel_power_w = 10

[[node]]
name = "ridge-west"
site = "ridge"

[[node]]
name = "weir-gauge"
site = "weir"
current_full_scale_a = 3.2

[[pack]]
label = "R-07"
designation = "HR6"
cells_in_series = 8
rated_capacity_ah = 2.4

[[pack]]
label = "R-08"
cells_in_series = 4
rated_capacity_ah = 2.0

[[fitting]]
pack = "R-07"
node = "ridge-east"
start = 2026-05-01T09:00:00Z
end = 2026-06-02T14:10:00Z

[[fitting]]
pack = "R-07"
node = "ridge-west"
start = 2026-06-02T14:10:00Z
"""


@pytest.fixture(scope="session")
def measured() -> Path:
    """Folder of measured series that the project does not ship; each test names the origin it uses."""
    if not MEASURED.is_dir():
        pytest.skip("the measured series are not on this machine; set PACKFOLD_MEASURED to their folder")
    return MEASURED


@pytest.fixture(scope="session")
def migrated_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A database at the newest schema, empty and closed: to be copied, not opened."""
    database = Database(tmp_path_factory.mktemp("migrated"))
    schema.prepare(database)
    database.close()
    return database.file


@pytest.fixture
def database(tmp_path: Path, migrated_file: Path) -> Iterator[Database]:
    """An empty database at the newest schema, in a data folder of its own."""
    data = tmp_path / "data"
    data.mkdir()
    shutil.copy(migrated_file, data / DATABASE_NAME)
    found = Database(data, checkpoints=True)
    yield found
    found.close()


@pytest.fixture
def inventory(database: Database) -> Inventory:
    """The example inventory, loaded into ``database``."""
    rows = inventory_file.parse(EXAMPLE, "example")
    with database.write() as connection:
        inventory_change.apply(connection, rows, who="test", now_ms=1_780_000_000_000)
        return store_inventory.load(connection)
