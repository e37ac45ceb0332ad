"""What mosquitto is told: its configuration, its passwords and its access control, as files in one folder."""

import os
import pwd
from collections.abc import Mapping
from pathlib import Path
from typing import Final

from hub.mqtt.logins import write_private
from hub.mqtt.rights import as_mosquitto_file
from hub.settings import Broker

CONFIGURATION: Final = "mosquitto.conf"
PASSWORDS: Final = "passwords"
RIGHTS: Final = "rights"
STORE: Final = "mosquitto.db"

# Messages on their way to the hub that it has not acknowledged yet. The hub acknowledges after it has stored, in
# batches; with the default of 20 it would take in 20 messages a commit. The bytes bound what that may cost in memory.
WINDOW: Final = 2000
WINDOW_BYTES: Final = 32 * 1024 * 1024
# Of what is held for the hub while it is away. Together with the number of messages, whichever comes first.
QUEUE_BYTES: Final = 512 * 1024 * 1024

# The user of Debian's package.
UNPRIVILEGED: Final = "mosquitto"


def owner() -> tuple[int, int] | None:
    """User and group that mosquitto shall run as, where that is not the hub's own user.

    A program that listens to the network should not be the superuser. Mosquitto could change its user by itself, but
    then it would forget that it must end with the hub, so it is started as that user; its folder and files are given
    to that user, and it works inside that folder with relative names, so that it needs no rights on the folders above.
    """
    if os.geteuid() != 0:
        return None
    try:
        entry = pwd.getpwnam(UNPRIVILEGED)
    except KeyError:
        return None  # built from source on a machine without that user: it stays the hub's user
    return entry.pw_uid, entry.pw_gid


def configuration(settings: Broker, port: int) -> str:
    """The configuration file.

    Numbers are written out even where they are the default: mosquitto's limits drop messages without a word, 0 has
    meant "none" and "drop everything" in different versions, and the default persistence interval is half an hour.
    """
    lines = [
        "# Written by the hub at each of its starts; changes made here do not last.",
        f"listener {port} {settings.listen}",
        "allow_anonymous false",
        f"password_file {PASSWORDS}",
        f"acl_file {RIGHTS}",
        # A client may call itself what it likes, and one that takes another's name ends that one's session. So each
        # login has one session, under the name of the login.
        "use_username_as_clientid true",
        f"max_inflight_messages {WINDOW}",
        f"max_inflight_bytes {WINDOW_BYTES}",
        f"max_queued_messages {settings.queue_limit}",
        f"max_queued_bytes {QUEUE_BYTES}",
        f"message_size_limit {settings.message_limit_bytes}",
        "persistence true",
        "persistence_location ./",
        f"persistence_file {STORE}",
        "autosave_interval 30",
        "persistent_client_expiration 30d",
        "sys_interval 10",
        "log_dest stdout",
        "log_timestamp_format %Y-%m-%dT%H:%M:%S",
        "log_type error",
        "log_type warning",
        "log_type notice",
        "log_type information",
    ]
    if os.geteuid() == 0 and owner() is None:
        lines.append("user root")
    return "\n".join(lines) + "\n"


def passwords(logins: Mapping[str, str]) -> str:
    """The password file."""
    return "".join(f"{name}:{secret_hash}\n" for name, secret_hash in sorted(logins.items()))


def write_all(folder: Path, settings: Broker, port: int, logins: Mapping[str, str]) -> None:
    """Write every file mosquitto reads; the folder is made where it is missing and given to mosquitto's user."""
    folder.mkdir(mode=0o700, exist_ok=True)
    child = owner()
    if child is not None:
        os.chown(folder, *child, follow_symlinks=False)
    write_private(folder / CONFIGURATION, configuration(settings, port), child)
    write_private(folder / RIGHTS, as_mosquitto_file(settings.root), child)
    write_passwords(folder, logins)


def write_passwords(folder: Path, logins: Mapping[str, str]) -> None:
    """Write the password file alone, after a credential was given or taken away."""
    write_private(folder / PASSWORDS, passwords(logins), owner())
