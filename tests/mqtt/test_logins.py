import stat

import pytest
from mqtt.nodes import SECRET

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.credentials import verify
from hub.mqtt.logins import Logins, access_for_selfcheck, folder, leave_for_selfcheck, write_private
from hub.mqtt.rights import CHECK_USER, HUB_USER
from hub.store import inventory, people


def test_everybody_is_there_and_changes_are_noticed(enrolled):
    logins = Logins(enrolled)
    known = logins.read()
    assert set(known) == {"ridge-east", "ridge-west", "weir-gauge", HUB_USER, CHECK_USER}
    assert verify(SECRET, known["ridge-east"])
    assert verify(logins.secret, known[HUB_USER])
    assert not logins.changed()
    with enrolled.write() as connection:
        people.revoke_credential(connection, inventory.node_id(connection, "ridge-east"))
    assert logins.changed()
    assert "ridge-east" not in logins.read()
    assert not logins.changed()


def test_the_hubs_secret_is_new_each_time(enrolled):
    assert Logins(enrolled).secret != Logins(enrolled).secret


def test_a_private_file_is_private_and_replaced_whole(tmp_path):
    path = tmp_path / "secret"
    write_private(path, "one")
    write_private(path, "two")
    assert path.read_text() == "two"
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert [file.name for file in tmp_path.iterdir()] == ["secret"]


def test_a_private_file_is_not_written_through_a_link(tmp_path):
    victim = tmp_path / "victim"
    victim.write_text("untouched")
    (tmp_path / "secret").symlink_to(victim)
    (tmp_path / "secret.new").symlink_to(victim)
    write_private(tmp_path / "secret", "mine")
    assert victim.read_text() == "untouched"
    assert (tmp_path / "secret").read_text() == "mine"


def test_the_selfcheck_finds_its_way_by_what_was_left(tmp_path):
    leave_for_selfcheck(tmp_path, Access("127.0.0.1", 4711, HUB_USER, HUB_USER, "s"))
    assert access_for_selfcheck(tmp_path) == Access("127.0.0.1", 4711, CHECK_USER, CHECK_USER, "s")


def test_without_or_with_a_damaged_note_there_is_a_sentence(tmp_path):
    with pytest.raises(BrokerError, match="No broker was started"):
        access_for_selfcheck(tmp_path)
    for damage in ("{", "[]", "{}"):
        (folder(tmp_path) / "login.json").write_text(damage)
        with pytest.raises(BrokerError, match="is damaged"):
            access_for_selfcheck(tmp_path)


def test_a_folder_that_cannot_be_made_is_a_sentence(tmp_path):
    (tmp_path / "data").write_text("a file where the folder should be")
    with pytest.raises(BrokerError, match="cannot be made"):
        folder(tmp_path / "data")
