"""Everybody who may log in at a broker that the hub starts: the nodes, and the hub itself."""

import json
import os
from pathlib import Path
from typing import Final

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.credentials import hash_secret, new_secret
from hub.mqtt.rights import CHECK_USER, HUB_USER
from hub.store import people
from hub.store.engine import Database

FOLDER: Final = "broker"
LOGIN_FILE: Final = "login.json"


class Logins:
    """User names with the hashes of their secrets, as the database has them now.

    The hub's own secret is new at each start and never leaves this machine.
    """

    def __init__(self, database: Database) -> None:
        self._database = database
        self._seen = -1
        self.secret = new_secret()
        own_hash = hash_secret(self.secret)
        self._own = {HUB_USER: own_hash, CHECK_USER: own_hash}

    def read(self) -> dict[str, str]:
        """All of them now."""
        with self._database.read() as connection:
            self._seen = people.credentials_version(connection)
            nodes = {c.username: c.secret_hash for c in people.credentials(connection)}
        return {**nodes, **self._own}

    def changed(self) -> bool:
        """Whether a credential was given or taken away since the last ``read``."""
        with self._database.read() as connection:
            return people.credentials_version(connection) != self._seen


def folder(data: Path) -> Path:
    """The folder of what belongs to the started broker, made where it is missing.

    Raises
    ------
    BrokerError
        It cannot be made.
    """
    path = data / FOLDER
    try:
        path.mkdir(mode=0o700, parents=True, exist_ok=True)
    except OSError as error:
        raise BrokerError(
            f"The broker's folder {path} cannot be made: {error.strerror}. Make the data folder writable for the hub."
        ) from None
    return path


def write_private(path: Path, text: str, owner: tuple[int, int] | None = None) -> None:
    """Put a file in place at once, readable by its owner alone.

    Parameters
    ----------
    owner
        User and group that shall own it, where it is not this process's.
    """
    fresh = path.with_name(f"{path.name}.new")
    fresh.unlink(missing_ok=True)
    handle = os.open(fresh, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW, 0o600)
    with open(handle, "w", encoding="utf-8") as file:  # noqa: PTH123 - a descriptor
        if owner is not None:
            os.fchown(handle, *owner)
        file.write(text)
        file.flush()
        os.fsync(handle)
    fresh.replace(path)


def leave_for_selfcheck(data: Path, access: Access) -> None:
    """Note where the started broker is and how another process of the same user logs in there."""
    document = {"host": access.host, "port": access.port, "username": CHECK_USER, "secret": access.password}
    write_private(folder(data) / LOGIN_FILE, json.dumps(document))


def access_for_selfcheck(data: Path) -> Access:
    """What ``leave_for_selfcheck`` left.

    Raises
    ------
    BrokerError
        There is nothing, or it may not be read.
    """
    path = data / FOLDER / LOGIN_FILE
    try:
        found = json.loads(path.read_text(encoding="utf-8"))
        return Access(found["host"], found["port"], CHECK_USER, found["username"], found["secret"])
    except FileNotFoundError:
        raise BrokerError(f"No broker was started for the data folder {data} yet. Start it: packfold run.") from None
    except OSError as error:
        raise BrokerError(f"{path} cannot be read: {error.strerror}. Run this as the user the hub runs as.") from None
    except (ValueError, KeyError, TypeError):
        raise BrokerError(f"{path} is damaged. Start the hub again; it writes the file anew.") from None
