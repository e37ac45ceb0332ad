"""The files. That mosquitto reads them, and does as they say, is tested in test_mosquitto and test_broker."""

import os
import stat

import pytest

from hub.mqtt import mosquitto_config as config
from hub.settings import Broker


def lines(settings: Broker | None = None) -> dict[str, list[str]]:
    found: dict[str, list[str]] = {}
    for line in config.configuration(settings or Broker(), 1884).splitlines():
        if not line.startswith("#"):
            key, _, value = line.partition(" ")
            found.setdefault(key, []).append(value)
    return found


def test_nobody_comes_in_without_a_login_and_there_is_one_listener():
    found = lines(Broker(listen="0.0.0.0"))
    assert found["listener"] == ["1884 0.0.0.0"]
    assert found["allow_anonymous"] == ["false"]
    assert found["use_username_as_clientid"] == ["true"]


def test_limits_are_written_out_and_none_is_zero():
    found = lines(Broker(queue_limit=5000, message_limit_bytes=2048))
    assert found["max_queued_messages"] == ["5000"]
    assert found["message_size_limit"] == ["2048"]
    for key in ("max_inflight_messages", "max_inflight_bytes", "max_queued_bytes", "autosave_interval"):
        assert int(found[key][0]) > 0
    assert found["persistent_client_expiration"] == ["30d"]
    assert int(found["autosave_interval"][0]) <= 60


def test_a_line_a_login():
    assert config.passwords({"b": "$7$1$x$y", "a": "$7$1$p$q"}) == "a:$7$1$p$q\nb:$7$1$x$y\n"


def test_the_files_are_for_their_owner_alone(tmp_path):
    folder = tmp_path / "mosquitto"
    config.write_all(folder, Broker(), 1884, {"a": "$7$1$p$q"})
    config.write_all(folder, Broker(), 1884, {"b": "$7$1$p$q"})
    assert stat.S_IMODE(folder.stat().st_mode) == 0o700
    for name in (config.CONFIGURATION, config.PASSWORDS, config.RIGHTS):
        assert stat.S_IMODE((folder / name).stat().st_mode) == 0o600
    assert (folder / config.PASSWORDS).read_text() == "b:$7$1$p$q\n"
    expected = config.owner() or (os.geteuid(), os.getegid())
    assert (folder.stat().st_uid, folder.stat().st_gid) == expected


def test_the_superuser_hands_over_to_an_ordinary_user_where_there_is_one(monkeypatch):
    monkeypatch.setattr(os, "geteuid", lambda: 1000)
    assert config.owner() is None
    monkeypatch.setattr(os, "geteuid", lambda: 0)

    def nobody(_name: str) -> None:
        raise KeyError

    monkeypatch.setattr(config.pwd, "getpwnam", nobody)
    assert config.owner() is None
    assert "user" in lines()


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser's mosquitto is told its user")
def test_an_ordinary_users_mosquitto_is_told_no_user():
    assert "user" not in lines()
