"""Secrets and their hashes, against mosquitto's own tool and a published vector."""

import base64
import re
import subprocess

import pytest
from hypothesis import given
from hypothesis import strategies as st
from mqtt.nodes import need_mosquitto

from hub.mqtt.credentials import ALPHABET, hash_secret, new_secret, verify

# PBKDF2-HMAC-SHA-512 of "passwd" and "salt": the first 32 bytes after one iteration, a vector that several independent
# implementations publish (from memory; the RFCs have vectors for SHA-1 and SHA-256 only).
PASSWD_SALT_1 = bytes.fromhex("c74319d99499fc3e9013acff597c23c5baf0a0bec5634c46b8352b793e324723")


def test_a_secret_is_readable_and_long():
    secret = new_secret()
    assert re.fullmatch(rf"[{ALPHABET}]{{4}}(-[{ALPHABET}]{{4}}){{5}}", secret)
    assert not set("ilo01") & set(ALPHABET)
    assert len({new_secret() for _ in range(100)}) == 100


def test_the_derivation_is_the_published_one():
    parts = hash_secret("passwd", iterations=1, salt=b"salt").split("$")
    assert parts[:3] == ["", "7", "1"]
    assert base64.b64decode(parts[3]) == b"salt"
    assert base64.b64decode(parts[4])[:32] == PASSWD_SALT_1


@pytest.mark.broker
def test_a_hash_of_mosquittos_own_tool_is_understood(tmp_path):
    need_mosquitto()
    file = tmp_path / "passwords"
    subprocess.run(["mosquitto_passwd", "-b", "-c", file, "ridge-east", "a long sécret"], check=True, timeout=20)
    name, _, written = file.read_text().strip().partition(":")
    assert name == "ridge-east"
    assert verify("a long sécret", written)
    assert not verify("a long secret", written)


@pytest.mark.broker
def test_a_hash_of_ours_has_the_form_of_mosquittos_tool(tmp_path):
    need_mosquitto()
    file = tmp_path / "passwords"
    subprocess.run(["mosquitto_passwd", "-b", "-c", file, "n", "s"], check=True, timeout=20)
    theirs = file.read_text().strip().partition(":")[2].split("$")
    ours = hash_secret("s").split("$")
    assert [len(ours), ours[1], len(ours[3]), len(ours[4])] == [len(theirs), theirs[1], len(theirs[3]), len(theirs[4])]


@given(st.text(min_size=1, max_size=40), st.text(min_size=1, max_size=40))
def test_only_the_same_secret_fits(one, other):
    assert verify(one, hash_secret(one, iterations=1)) is True
    assert verify(other, hash_secret(one, iterations=1)) is (one == other)


def test_two_hashes_of_one_secret_differ():
    assert hash_secret("same") != hash_secret("same")


@pytest.mark.parametrize(
    "damaged",
    [
        "",
        "secret",
        "$7$",
        "$7$10$$",
        "$6$c2FsdA==$aGFzaA==",
        "$7$0$c2FsdA==$" + "A" * 86 + "==",
        "$7$-1$c2FsdA==$" + "A" * 86 + "==",
        "$7$²$c2FsdA==$" + "A" * 86 + "==",
        "$7$99999999999$c2FsdA==$" + "A" * 86 + "==",
        "$7$10$c2FsdA==$dG9vIHNob3J0",
        "$7$10$***$***",
    ],
)
def test_a_damaged_hash_fits_nothing(damaged):
    assert verify("secret", damaged) is False
