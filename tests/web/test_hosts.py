import pytest

from hub.settings import Web
from hub.web.hosts import hostname, names, trusted


def answers(host: str, **web: str) -> bool:
    settings = Web(**web)
    return trusted(host, settings, names(settings))


def test_a_loopback_hub_answers_to_loopback_names_only():
    for host in ("127.0.0.1:8740", "localhost:8740", "LOCALHOST", "[::1]:8740"):
        assert answers(host)
    for host in ("evil.example", "192.168.1.5:8740", "127.0.0.1.evil.example", "", "localhost.evil.example:8740"):
        assert not answers(host)


def test_the_address_people_type_is_answered():
    assert answers("packs.home.example", base_url="https://packs.home.example")
    assert answers("packs.home.example.", base_url="https://packs.home.example")
    assert not answers("home.example", base_url="https://packs.home.example")


def test_on_every_address_ip_addresses_are_answered_and_foreign_names_are_not():
    # A foreign name can be pointed at this machine by whoever owns it; a bare address cannot.
    for host in ("192.168.1.5:8740", "[fd00::5]:8740", "127.0.0.1"):
        assert answers(host, listen="0.0.0.0:8740")
    assert not answers("evil.example:8740", listen="0.0.0.0:8740")


def test_the_machine_s_own_name_is_answered_on_every_address(monkeypatch):
    monkeypatch.setattr("socket.gethostname", lambda: "Shed.lan")
    for host in ("shed", "shed.lan", "shed.local:8740"):
        assert answers(host, listen="0.0.0.0:8740")
        assert not answers(host)


@pytest.mark.parametrize("header", ["[::1", "a b", "host:port:more", "\x00", "x@y"])
def test_a_header_that_is_no_host_is_nobody(header):
    assert not answers(header)
    assert isinstance(hostname(header), str)
