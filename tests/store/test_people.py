import re

import pytest

from hub.errors import UsageError
from hub.store import people

SECRET_WORD = re.compile(r"[A-Za-z0-9_-]{43}")


def an_account(connection, name="keeper", role="keeper"):
    people.put_account(connection, name, "$argon2id$hash", role, 100)
    return people.account(connection, name)


def everything(connection):
    return "\n".join(
        str(tuple(row))
        for name in ("account", "pass", "credential", "audit")
        for row in connection.exec_driver_sql(f"SELECT * FROM {name}")
    )


def test_only_a_digest_of_a_secret_is_kept(scratch):
    with scratch() as connection:
        account = an_account(connection)
        secrets = [people.grant(connection, account.id, kind, 100) for kind in ("session", "token", "link")]
        assert len(set(secrets)) == 3
        assert all(SECRET_WORD.fullmatch(secret) for secret in secrets)
        assert not any(secret in everything(connection) for secret in secrets)


def test_hashes_do_not_show_where_an_account_is_printed(scratch):
    with scratch() as connection:
        assert "argon2" not in repr(an_account(connection))
        people.put_credential(connection, 1, "PBKDF2$7$hash", 5)
        assert "PBKDF2" not in repr(people.credentials(connection))


def test_a_pass_opens_for_its_kind_until_it_ends(scratch):
    with scratch() as connection:
        account = an_account(connection)
        secret = people.grant(connection, account.id, "session", 1000, lasts_ms=500)
        assert people.holder(connection, secret, "session", 1500) == account
        assert people.holder(connection, secret, "session", 1501) is None
        assert people.holder(connection, secret, "token", 1000) is None
        assert people.holder(connection, secret + "x", "session", 1000) is None
        forever = people.grant(connection, account.id, "token", 1000, label="scraper")
        assert people.holder(connection, forever, "token", 2**53) == account


def test_passes_that_ended_are_cleared_away(scratch):
    with scratch() as connection:
        account = an_account(connection)
        people.grant(connection, account.id, "session", 1000, lasts_ms=500)
        people.grant(connection, account.id, "session", 1501, lasts_ms=500)
        assert connection.exec_driver_sql("SELECT COUNT(*) FROM pass").scalar() == 1


def test_a_withdrawn_pass_opens_nothing(scratch):
    with scratch() as connection:
        account = an_account(connection)
        secret = people.grant(connection, account.id, "link", 1000)
        assert people.withdraw(connection, secret)
        assert not people.withdraw(connection, secret)
        assert people.holder(connection, secret, "link", 1000) is None


@pytest.mark.parametrize("secret", ["", "\ud800", "\x00", "é" * 1000])
def test_any_text_may_be_tried_as_a_secret(scratch, secret):
    with scratch() as connection:
        assert people.holder(connection, secret, "session", 0) is None


def test_a_new_password_ends_the_logins_and_sets_the_role(scratch):
    with scratch() as connection:
        account = an_account(connection)
        other = an_account(connection, "viewer", "viewer")
        secret, others = (people.grant(connection, a.id, "session", 1000) for a in (account, other))
        people.put_account(connection, "keeper", "$argon2id$other", "viewer", 2000)
        assert people.holder(connection, secret, "session", 1000) is None
        assert people.holder(connection, others, "session", 1000) == other
        changed = people.account(connection, "keeper")
        assert (changed.id, changed.role, changed.password_hash, changed.created_ms) == (
            *(account.id, "viewer", "$argon2id$other"),
            100,
        )


def test_a_removed_account_is_gone_with_its_logins(scratch):
    with scratch() as connection:
        secret = people.grant(connection, an_account(connection).id, "session", 1000)
        an_account(connection, "viewer", "viewer")
        people.remove_account(connection, "keeper")
        assert people.holder(connection, secret, "session", 1000) is None
        assert [a.name for a in people.accounts(connection)] == ["viewer"]
        with pytest.raises(UsageError, match="no user “keeper”"):
            people.remove_account(connection, "keeper")


def test_a_node_has_one_credential_and_each_change_is_counted(scratch):
    with scratch() as connection:
        assert people.credentials_version(connection) == 0
        people.put_credential(connection, 2, "first", 5)
        people.put_credential(connection, 1, "one", 5)
        people.put_credential(connection, 2, "second", 6)
        assert [(c.node_id, c.username, c.secret_hash) for c in people.credentials(connection)] == [
            (1, "node-1", "one"),
            (2, "node-2", "second"),
        ]
        assert people.credentials_version(connection) == 3
        assert people.revoke_credential(connection, 2)
        assert not people.revoke_credential(connection, 2)
        assert [c.username for c in people.credentials(connection)] == ["node-1"]
        assert people.credentials_version(connection) > 3
