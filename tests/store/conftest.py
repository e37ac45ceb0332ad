"""A connection whose changes are taken back, so that one database serves many examples."""

import shutil
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager

import pytest
from sqlalchemy import Connection

from hub.store import inventory_change, inventory_file
from hub.store.engine import DATABASE_NAME, Database

Scratch = Callable[[], AbstractContextManager[Connection]]


@pytest.fixture(scope="session")
def scratch(tmp_path_factory, migrated_file) -> Iterator[Scratch]:
    """Opens a writing transaction on a database with the nodes 1 and 2 and the packs 1 and 2, and rolls it back."""
    data = tmp_path_factory.mktemp("scratch")
    shutil.copy(migrated_file, data / DATABASE_NAME)
    database = Database(data, checkpoints=True)
    rows = inventory_file.parse(
        "".join(
            f'[[site]]\nname="site-{n}"\nlatitude=51\nlongitude=0\n[[node]]\nname="node-{n}"\nsite="site-{n}"\n'
            f'[[pack]]\nlabel="P-{n}"\ncells_in_series=8\nrated_capacity_ah=2.4\n'
            for n in (1, 2)
        ),
        "scratch",
    )
    with database.write() as connection:
        inventory_change.apply(connection, rows, who="test", now_ms=0)

    @contextmanager
    def opened():
        with database.writer.connect() as connection:
            transaction = connection.begin()
            try:
                yield connection
            finally:
                transaction.rollback()

    yield opened
    database.close()
