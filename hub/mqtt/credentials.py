"""Secrets of nodes, and the hashes of them in the form of mosquitto's password file.

A line there is ``name:$7$iterations$salt$hash``: PBKDF2 with HMAC-SHA-512 (RFC 8018, section 5.2), salt and the
64-byte hash in base64. Its own tool, ``mosquitto_passwd``, writes 12 bytes of salt and 101 iterations. The secrets here
are drawn from about 119 random bits, so that no number of iterations decides whether they can be guessed; a few
hundred keep a small broker responsive when all nodes come back at once.
"""

import base64
import binascii
import hashlib
import hmac
import os
import secrets
from typing import Final

# Lower-case letters and digits without those that are mistaken for each other on a label or a phone (i l o 0 1).
ALPHABET: Final = "abcdefghjkmnpqrstuvwxyz23456789"
GROUPS: Final = 6
GROUP_LENGTH: Final = 4

ITERATIONS: Final = 500
MOST_ITERATIONS: Final = 1_000_000
SALT_BYTES: Final = 12
HASH_BYTES: Final = 64
_SCHEME: Final = "7"


def new_secret() -> str:
    """A secret to be typed into a node once: six groups of four characters, as in ``k7fm-2xqa-…``."""
    groups = ("".join(secrets.choice(ALPHABET) for _ in range(GROUP_LENGTH)) for _ in range(GROUPS))
    return "-".join(groups)


def hash_secret(secret: str, *, iterations: int = ITERATIONS, salt: bytes | None = None) -> str:
    """What is kept of a secret.

    Parameters
    ----------
    secret
        The secret as it was shown.
    iterations, salt
        Of the derivation; the salt is random where not given.
    """
    salt = os.urandom(SALT_BYTES) if salt is None else salt
    derived = hashlib.pbkdf2_hmac("sha512", secret.encode(), salt, iterations, HASH_BYTES)
    return f"${_SCHEME}${iterations}${_base64(salt)}${_base64(derived)}"


def verify(secret: str, secret_hash: str) -> bool:
    """Whether this is the secret of a hash; a hash of another form fits nothing."""
    match secret_hash.split("$"):
        case ["", scheme, count, salt_text, hash_text] if scheme == _SCHEME and count.isascii() and count.isdigit():
            iterations = int(count)
        case _:
            return False
    try:
        salt = base64.b64decode(salt_text, validate=True)
        expected = base64.b64decode(hash_text, validate=True)
    except (binascii.Error, ValueError):
        return False
    if not 1 <= iterations <= MOST_ITERATIONS or len(expected) != HASH_BYTES:
        return False
    derived = hashlib.pbkdf2_hmac("sha512", secret.encode(errors="replace"), salt, iterations, HASH_BYTES)
    return hmac.compare_digest(derived, expected)


def _base64(data: bytes) -> str:
    return base64.b64encode(data).decode("ascii")
