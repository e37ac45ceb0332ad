import socket

import pytest


@pytest.fixture(autouse=True)
def free_ports(monkeypatch):
    """The usual ports may be in use on the machine that runs the tests."""
    with socket.socket() as one, socket.socket() as other:
        for taken in (one, other):
            taken.bind(("127.0.0.1", 0))
        monkeypatch.setenv("PACKFOLD_BROKER_PORT", str(one.getsockname()[1]))
        monkeypatch.setenv("PACKFOLD_WEB_LISTEN", f"127.0.0.1:{other.getsockname()[1]}")


def by_subject(document):
    return {row["subject"]: row for row in document}


def test_a_fresh_machine_is_told_what_to_do_next(packfold):
    found = by_subject(packfold("selfcheck", "--format", "json").document)
    assert found["database"]["verdict"] == "look"
    packfold.stocked()
    found = by_subject(packfold("selfcheck", "--format", "json").document)
    assert found["database"]["verdict"] == "good"
    assert "user add" in found["people"]["sentence"]


def test_a_taken_port_is_bad_and_says_which_key_to_change(packfold):
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]
        ran = packfold("selfcheck", "--format", "json", code=1, PACKFOLD_BROKER_PORT=str(port))
    found = by_subject(ran.document)["broker"]
    assert found["verdict"] == "bad"
    assert "broker.port" in found["sentence"]


def test_a_damaged_database_is_found(packfold):
    packfold.stocked()
    path = packfold.data / "packfold.db"
    content = bytearray(path.read_bytes())
    content[4096:8192] = b"\xff" * 4096
    path.write_bytes(content)
    found = by_subject(packfold("selfcheck", "--format", "json", code=1).document)
    assert found["database"]["verdict"] == "bad"
    assert "backup" in found["database"]["sentence"]
