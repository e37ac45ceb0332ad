def test_a_credential_is_shown_once_and_kept_only_as_a_hash(packfold):
    given = packfold.stocked()("credential", "add", "ridge-east", "--format", "json").document
    assert set(given) == {"node", "username", "secret", "host", "port"}
    assert given["secret"].encode() not in (packfold.data / "packfold.db").read_bytes()
    again = packfold("credential", "add", "ridge-east", "--format", "json").document
    assert again["secret"] != given["secret"]


def test_a_credential_of_an_unknown_node_is_refused(packfold):
    assert "no node “nowhere”" in packfold.stocked()("credential", "add", "nowhere", code=1).err


def test_revoking_says_whether_there_was_one(packfold):
    packfold.stocked()
    assert "had no login" in packfold("credential", "revoke", "ridge-east").out
    packfold("credential", "add", "ridge-east")
    assert "can no longer log in" in packfold("credential", "revoke", "ridge-east").out


def test_people_come_and_go(packfold):
    assert "Nobody yet" in packfold("user", "list").out
    packfold("user", "add", "sam", "--password-stdin", text="a short sentence is fine\n")
    packfold("user", "add", "kim", "--role", "viewer", "--password-stdin", text="another short sentence\n")
    listed = packfold("user", "list", "--format", "json").document
    assert listed == [{"name": "kim", "role": "viewer"}, {"name": "sam", "role": "keeper"}]
    assert b"a short sentence" not in (packfold.data / "packfold.db").read_bytes()
    packfold("user", "remove", "kim")
    assert "no user “kim”" in packfold("user", "remove", "kim", code=2).err


def test_a_short_password_and_a_strange_name_are_refused(packfold):
    assert "at least" in packfold("user", "add", "sam", "--password-stdin", text="short\n", code=2).err
    assert "name has" in packfold("user", "add", "sam smith", "--password-stdin", text="x" * 20 + "\n", code=2).err
