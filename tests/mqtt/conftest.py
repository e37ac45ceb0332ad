"""Brokers on loopback, nodes at them, and collectors that are stopped after the test."""

import shutil
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from conftest import EXAMPLE
from mqtt.nodes import SECRET, NodeClient, OpenBroker, need_mosquitto, now_ms, settings_for, wait_for

from hub.mqtt import rights
from hub.mqtt.broker import start_broker
from hub.mqtt.collector import Collector
from hub.mqtt.credentials import hash_secret
from hub.store import inventory, inventory_change, inventory_file, people
from hub.store.engine import DATABASE_NAME, Database


@pytest.fixture(autouse=True)
def _look_often(monkeypatch):
    """Credentials are looked at ten times as often as they need be."""
    monkeypatch.setattr(rights, "LOOK_S", 0.1)


@pytest.fixture
def node() -> Iterator[Callable[..., NodeClient]]:
    """Makes nodes, and ends them after the test."""
    made: list[NodeClient] = []

    def make(*arguments, **options) -> NodeClient:
        made.append(NodeClient(*arguments, **options))
        return made[-1]

    yield make
    for client in made:
        client.close()


@pytest.fixture(scope="session")
def enrolled_file(tmp_path_factory: pytest.TempPathFactory, migrated_file: Path) -> Path:
    """A database with the example's nodes, each with a credential: to be copied, not opened."""
    data = tmp_path_factory.mktemp("enrolled")
    shutil.copy(migrated_file, data / DATABASE_NAME)
    database = Database(data, checkpoints=True)
    rows = inventory_file.parse(EXAMPLE, "example")
    with database.write() as connection:
        inventory_change.apply(connection, rows, who="test", now_ms=0)
        for node_id in inventory.node_ids(connection).values():
            people.put_credential(connection, node_id, hash_secret(SECRET), 0)
    database.close()
    return database.file


@pytest.fixture
def enrolled(tmp_path: Path, enrolled_file: Path) -> Iterator[Database]:
    """Such a database in a data folder of its own."""
    data = tmp_path / "data"
    data.mkdir()
    shutil.copy(enrolled_file, data / DATABASE_NAME)
    found = Database(data, checkpoints=True)
    yield found
    found.close()


@pytest.fixture(params=[pytest.param("mosquitto", marks=pytest.mark.broker), "trial"])
def either(request, enrolled):
    """Each kind of broker in turn, running; with its settings."""
    if request.param == "mosquitto":
        need_mosquitto()
    settings = settings_for(request.param)
    broker = start_broker(settings.broker, enrolled.data, enrolled)
    yield broker, settings
    broker.stop()


@pytest.fixture
def mosquitto(enrolled):
    """A running mosquitto of the hub's, with its settings."""
    need_mosquitto()
    settings = settings_for("mosquitto")
    broker = start_broker(settings.broker, enrolled.data, enrolled)
    yield broker, settings
    broker.stop()


@pytest.fixture
def collecting(enrolled) -> Iterator[Callable[..., Collector]]:
    """Starts collectors and waits until they are connected; stops them after the test."""
    made: list[Collector] = []

    def make(broker, settings, *, wait: bool = True, **options) -> Collector:
        collector = Collector(enrolled, broker, settings, now_ms=now_ms, **options)
        made.append(collector)
        collector.start()
        if wait:
            wait_for(lambda: collector.status().connected, what="for the collector's connection")
        return collector

    yield make
    for collector in made:
        collector.stop(5)


@pytest.fixture
def open_broker(tmp_path) -> Iterator[Callable[..., OpenBroker]]:
    """Starts brokers that nobody manages; lets anybody in unless told otherwise."""
    made: list[OpenBroker] = []

    def make(*lines: str) -> OpenBroker:
        folder = tmp_path / f"open-{len(made)}"
        folder.mkdir()
        made.append(OpenBroker(folder, *(lines or ("allow_anonymous true",))))
        return made[-1]

    yield make
    for broker in made:
        broker.stop()
