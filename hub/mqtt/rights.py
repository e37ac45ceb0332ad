"""Who may do what at a broker that the hub starts.

A node publishes its telemetry and its presence and reads its receipts, all below its own name, and nothing else. The
hub reads and writes everything below the root. Both kinds of broker follow this one table.
"""

from typing import Final

from hub.telemetry.topics import topic

# A dot is not allowed in a node's name, so that these can never be nodes.
HUB_USER: Final = "hub.collector"
CHECK_USER: Final = "hub.selfcheck"

# How often the nodes' credentials are looked at for a change.
LOOK_S: Final = 1.0


def may_publish(username: str, name: str, root: str) -> bool:
    """Whether a user may publish on a topic."""
    if username == HUB_USER:
        return name.startswith(f"{root}/")
    return username != CHECK_USER and name in {topic(root, username, "telemetry"), topic(root, username, "presence")}


def may_read(username: str, name: str, root: str) -> bool:
    """Whether a user may be given what is published on a topic."""
    if username == HUB_USER:
        return name.startswith(f"{root}/")
    return username != CHECK_USER and name == topic(root, username, "receipt")


def may_subscribe(username: str, topic_filter: str, root: str) -> bool:
    """Whether a user may ask for a topic filter. A node's may not have wildcards."""
    if username == HUB_USER:
        return topic_filter.startswith(f"{root}/")
    return may_read(username, topic_filter, root)


def as_mosquitto_file(root: str) -> str:
    """The same as mosquitto's access control file.

    A ``pattern`` line applies to every user, with the name of the login in place of ``%u``. The name of the
    client, ``%c``, is never used: each client chooses it for itself.
    """
    return (
        f"user {HUB_USER}\n"
        f"topic readwrite {root}/#\n"
        "topic read $SYS/#\n"
        "\n"
        f"pattern write {topic(root, '%u', 'telemetry')}\n"
        f"pattern write {topic(root, '%u', 'presence')}\n"
        f"pattern read {topic(root, '%u', 'receipt')}\n"
    )
