"""Databases and readings for the tests of the jobs."""

import datetime as dt
import io
import itertools
import math

import pytest

from hub.demo import play, scenario
from hub.store import export, inventory, inventory_change, inventory_file, readings, schema
from hub.store.engine import Database

NOW = dt.datetime(2026, 6, 14, 12, 0, tzinfo=dt.UTC)


@pytest.fixture
def new_database(tmp_path):
    """Makes migrated databases, each in a folder of its own, and closes them."""
    opened = []
    numbers = itertools.count()

    def make(inventory_text: str | None = None) -> Database:
        database = Database(tmp_path / f"data-{next(numbers)}", checkpoints=True)
        opened.append(database)
        schema.prepare(database)
        if inventory_text is not None:
            load(database, inventory_text)
        return database

    yield make
    for database in opened:
        database.close()


def load(database, text):
    with database.write() as connection:
        inventory_change.apply(connection, inventory_file.parse(text, "test"), who="test", now_ms=0)


def simulated(name, days, every=5):
    """Readings of a node of the scenario by instant: every fifth of its minutes, as it would send them."""
    node = scenario.build(name, NOW, days)
    found = {}
    for stretch in play.history(node, days):
        names = list(stretch.columns)
        for i in range(0, stretch.time_ms.size, every):
            values = {n: float(stretch.columns[n][i]) for n in names}
            found[int(stretch.stamp_s[i] * 1000)] = {n: v for n, v in values.items() if not math.isnan(v)}
    return found


def send(database, name, offered, received_ms=0):
    with database.write() as connection:
        node_id = inventory.node_id(connection, name)
        return readings.append(connection, [readings.Arrival(node_id, received_ms, offered)])[0]


def exports(database):
    """Every export table as the bytes of its CSV."""
    found = {}
    with database.read() as connection:
        for table in export.TABLES:
            stream = io.BytesIO()
            export.write(connection, table, export.Selection(), "csv", stream)
            found[table] = stream.getvalue()
    return found
