"""A node that speaks through a thread of its own as a real one might, and brokers that nobody manages."""

import json
import socket
import subprocess
import threading
import time
from collections.abc import Callable
from pathlib import Path

import paho.mqtt.client as paho
import pytest
from msgspec.structs import replace
from paho.mqtt.enums import CallbackAPIVersion

from hub.mqtt.access import Access
from hub.mqtt.mosquitto import find_program
from hub.settings import Broker, Database, Settings
from hub.store import inventory as store_inventory
from hub.store import readings

SECRET = "k7fm-2xqa-h3st-wgn8-p5dy-c9ur"
LIMIT_S = 10.0
# Instants of the made-up readings: one a second, ending now.
EPOCH_S = int(time.time()) - 1_000_000


def now_ms() -> int:
    return time.time_ns() // 1_000_000


def wait_for(happened: Callable[[], object], limit_s: float = LIMIT_S, what: str = "") -> None:
    """Wait until something is so; fail when it does not become so."""
    end = time.monotonic() + limit_s
    while not happened():
        assert time.monotonic() < end, f"waited {limit_s} s in vain {what}"
        time.sleep(0.01)


def pack(sequence: int, boot: int | None = 1, **more: float) -> bytes:
    """A message of one reading, as a node would write it."""
    records = [{"bt": EPOCH_S + sequence, "n": "pack_voltage", "u": "V", "v": 10 + sequence % 100 / 100}]
    records += [{"n": name, "v": value} for name, value in more.items()]
    if boot is not None:
        records += [{"n": "boot", "v": boot}, {"n": "sequence", "v": sequence}]
    return json.dumps(records).encode()


class NodeClient:
    """A node at a broker. ``heard`` has what it was sent, ``code`` the answer to its login."""

    def __init__(
        self,
        port: int,
        name: str,
        secret: str | None = SECRET,
        *,
        client_id: str | None = None,
        will: bool = False,
        root: str = "field",
    ) -> None:
        self.name = name
        self.root = root
        self.heard: list[tuple[str, bytes]] = []
        self.code = None
        self._answered = threading.Event()
        self._subscribed = threading.Event()
        self._client = paho.Client(
            CallbackAPIVersion.VERSION2, client_id or name, protocol=paho.MQTTv311, reconnect_on_failure=False
        )
        if secret is not None:
            self._client.username_pw_set(name, secret)
        if will:
            self._client.will_set(f"{root}/{name}/presence", b"offline", 1, retain=True)
        self._client.on_connect = self._on_connect
        self._client.on_subscribe = lambda *_: self._subscribed.set()
        self._client.on_message = lambda _c, _d, message: self.heard.append((message.topic, bytes(message.payload)))
        self._client.on_disconnect = lambda *_: self._answered.set()
        self._client.connect("127.0.0.1", port, 30)
        self._client.loop_start()
        assert self._answered.wait(LIMIT_S), "the broker never answered"

    def _on_connect(self, _client, _data, _flags, reason, _properties):
        self.code = reason
        self._answered.set()

    @property
    def admitted(self) -> bool:
        return self.code is not None and not self.code.is_failure

    @property
    def connected(self) -> bool:
        return self._client.is_connected()

    def publish(self, payload: bytes, kind: str = "telemetry", node: str | None = None, *, retain=False) -> None:
        """Publish at QoS 1 and wait for the broker's word."""
        info = self._client.publish(f"{self.root}/{node or self.name}/{kind}", payload, 1, retain=retain)
        info.wait_for_publish(LIMIT_S)

    def post(self, payload: bytes) -> None:
        """Publish at QoS 1 without waiting."""
        self._client.publish(f"{self.root}/{self.name}/telemetry", payload, 1)

    def listen(self, topic_filter: str) -> None:
        self._subscribed.clear()
        self._client.subscribe(topic_filter, 1)
        assert self._subscribed.wait(LIMIT_S)

    def receipts(self) -> list[dict]:
        return [json.loads(payload) for topic, payload in self.heard if topic.endswith("/receipt")]

    def vanish(self) -> None:
        """Be gone without a word, as when the power fails."""
        self._client.socket().shutdown(socket.SHUT_RDWR)

    def close(self) -> None:
        self._client.disconnect()
        self._client.loop_stop()


def settings_for(kind: str, **more: object) -> Settings:
    return Settings(
        database=Database(commit_every_s=0.05),
        broker=Broker(kind=kind, port=0, **more),  # type: ignore[arg-type]
    )


def need_mosquitto() -> Path:
    program = find_program()
    if program is None:
        pytest.skip("needs the mosquitto broker on this machine")
    return program


class OpenBroker:
    """A mosquitto that somebody else runs."""

    def __init__(self, folder: Path, *lines: str) -> None:
        with socket.socket() as free:
            free.bind(("127.0.0.1", 0))
            self.port = free.getsockname()[1]
        text = f"listener {self.port} 127.0.0.1\n" + "".join(f"{line}\n" for line in lines)
        (folder / "open.conf").write_text(text + "user root\n")
        self._folder = folder
        self.start_again()

    def start_again(self) -> None:
        self._child = subprocess.Popen(
            [need_mosquitto(), "-c", "open.conf"],
            cwd=self._folder,
            stderr=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
        )
        wait_for(self._answers, what="for a broker")

    def _answers(self) -> bool:
        try:
            socket.create_connection(("127.0.0.1", self.port), 1).close()
        except OSError:
            assert self._child.poll() is None, "the broker ended"
            return False
        return True

    def access(self, client_id: str = "packfold-collector") -> Access:
        return Access("127.0.0.1", self.port, client_id)

    def stop(self) -> None:
        self._child.terminate()
        self._child.wait(LIMIT_S)


def outside(port: int, **more: object) -> Settings:
    """Settings for a broker that is there already."""
    base = settings_for("auto", embedded=False, **more)
    return replace(base, broker=replace(base.broker, port=port))


def stored_count(database, name: str) -> int:
    with database.read() as connection:
        return readings.count(connection, store_inventory.node_id(connection, name))
