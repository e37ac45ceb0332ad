"""A broker of our own on loopback, and a small reader of SenML that owes nothing to the code under test."""

import json
import shutil
import socket
import subprocess
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import cbor2
import pytest

Resolved = list[tuple[str, str | None, float, float]]


@pytest.fixture
def broker(tmp_path: Path) -> Iterator[int]:
    """The port of a real broker that lets anybody in, on loopback only."""
    yield from _broker(tmp_path, "allow_anonymous true")


@pytest.fixture
def closed_broker(tmp_path: Path) -> Iterator[int]:
    """The port of a real broker that lets nobody in, on loopback only."""
    yield from _broker(tmp_path, "allow_anonymous false")


def _broker(tmp_path: Path, rule: str) -> Iterator[int]:
    program = shutil.which("mosquitto") or shutil.which("mosquitto", path="/usr/sbin:/usr/local/sbin")
    if program is None:
        pytest.skip("needs the mosquitto broker on this machine")
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    settings = tmp_path / "broker.conf"
    settings.write_text(f"listener {port} 127.0.0.1\n{rule}\npersistence false\n")
    with subprocess.Popen([program, "-c", str(settings)], stderr=subprocess.DEVNULL) as process:
        for _ in range(100):
            try:
                socket.create_connection(("127.0.0.1", port), timeout=1).close()
                break
            except OSError:
                time.sleep(0.05)
        yield port
        process.terminate()


@pytest.fixture(scope="session")
def resolve() -> Callable[[bytes], Resolved]:
    """Name (after the last colon), unit, time and value of every record, by the rules of RFC 8428 section 4.6."""
    labels = {-2: "bn", -3: "bt", -4: "bu", -5: "bv", 0: "n", 1: "u", 2: "v", 6: "t"}

    def read(payload: bytes) -> Resolved:
        if payload[:1] == b"[":
            records = json.loads(payload)
        else:
            records = [{labels[k]: v for k, v in r.items()} for r in cbor2.loads(payload)]
        base: dict[str, object] = {"bn": "", "bt": 0, "bu": None}
        out: Resolved = []
        for record in records:
            base |= {k: v for k, v in record.items() if k in base}
            name = f"{base['bn']}{record.get('n', '')}".rsplit(":", 1)[-1]
            out.append((name, record.get("u", base["bu"]), base["bt"] + record.get("t", 0), record["v"]))
        return out

    return read
