"""Passwords: hashed slowly and with memory, so that a stolen database does not give them away."""

import threading

from argon2 import PasswordHasher
from argon2.exceptions import InvalidHashError, VerificationError

# Common practice, no source: long enough to stand alone behind a throttled login.
MINIMUM_LENGTH = 12

# 19 MiB, two passes, one lane: the least that the OWASP Password Storage Cheat Sheet accepts for Argon2id (value from
# memory). A hub on a small board checks a password in well under a second, and several at once do not exhaust it.
_HASHER = PasswordHasher(time_cost=2, memory_cost=19_456, parallelism=1)
# A name nobody has costs the same time as a wrong password, so that names cannot be guessed by the clock.
_NOBODY = _HASHER.hash("nobody has this password")
_TWO_AT_A_TIME = threading.BoundedSemaphore(2)


def hash_password(password: str) -> str:
    """What is kept of a password: Argon2id in its own text form, with a salt of its own."""
    return _HASHER.hash(password)


def matches(password_hash: str | None, password: str) -> bool:
    """Whether a password is the one that was hashed; ``None`` (nobody of that name) takes as long and is never right.

    At most two are checked at the same time: each takes 19 MiB.
    """
    with _TWO_AT_A_TIME:
        try:
            right = _HASHER.verify(password_hash or _NOBODY, password)
        except (VerificationError, InvalidHashError):
            return False
    return right and password_hash is not None
