"""Topics of a node, and MQTT topic filters (OASIS MQTT 3.1.1 and 5.0, section 4.7)."""

import re
from typing import Final, Literal

Kind = Literal["telemetry", "presence", "receipt"]

KINDS: Final[tuple[Kind, ...]] = ("telemetry", "presence", "receipt")

# Topic names and filters are at most 65,535 bytes of UTF-8 (4.7.3-3).
MAX_TOPIC_BYTES: Final = 65_535

_NODE: Final = re.compile(r"[a-z0-9-]{1,64}", re.ASCII)


def node_problem(name: str) -> str | None:
    """One sentence on why ``name`` cannot be a node's name, ``None`` where it can."""
    if _NODE.fullmatch(name):
        return None
    return "A node's name has 1 to 64 characters out of a-z, 0-9 and -; choose one of that form."


def topic(root: str, node: str, kind: Kind) -> str:
    """The topic of one kind of message of a node."""
    return f"{root}/{node}/{kind}"


def every_node(root: str, kind: Kind) -> str:
    """The filter that takes one kind of message of all nodes."""
    return f"{root}/+/{kind}"


def parse_topic(name: str, root: str) -> tuple[str, Kind] | None:
    """Node and kind of a topic below ``root``; ``None`` where it is not one of the node interface."""
    if not name.startswith(f"{root}/"):
        return None
    node, _, last = name[len(root) + 1 :].partition("/")
    for kind in KINDS:
        if last == kind and _NODE.fullmatch(node):
            return node, kind
    return None


def filter_problem(text: str) -> str | None:
    """One sentence on why ``text`` is no MQTT topic filter, ``None`` where it is one."""
    problem = _text_problem(text, "filter")
    if problem:
        return problem
    levels = text.split("/")
    for position, level in enumerate(levels):
        if "#" in level and (level != "#" or position != len(levels) - 1):
            return "In a topic filter # stands alone as the last level, as in field/#."  # 4.7.1-2
        if "+" in level and level != "+":
            return "In a topic filter + stands for one whole level, as in field/+/telemetry."  # 4.7.1-3
    return None


def name_problem(text: str) -> str | None:
    """One sentence on why ``text`` is no MQTT topic name, ``None`` where it is one."""
    problem = _text_problem(text, "name")
    if problem:
        return problem
    if "#" in text or "+" in text:
        return "A topic name has no # and no +; those belong to filters."  # 3.3.2-2
    return None


def matches(topic_filter: str, name: str) -> bool:
    """Whether a valid filter takes a valid topic name.

    ``+`` takes one level, also an empty one; a last ``#`` takes the level before it and everything below
    (4.7.1-2, -3). A wildcard in front does not take topics that begin with ``$`` (4.7.2-1).
    """
    if name.startswith("$") and topic_filter[:1] in {"+", "#"}:
        return False
    wanted, levels = topic_filter.split("/"), name.split("/")
    for position, level in enumerate(wanted):
        if level == "#":
            return True
        if position == len(levels):
            return False
        if level not in {"+", levels[position]}:
            return False
    return len(wanted) == len(levels)


def _text_problem(text: str, kind: str) -> str | None:
    if not text:
        return f"A topic {kind} has at least one character."  # 4.7.3-1
    if "\0" in text:
        return f"A topic {kind} has no null character."  # 4.7.3-2
    try:
        size = len(text.encode())
    except UnicodeEncodeError:
        return f"A topic {kind} has no lone surrogates; write it in proper UTF-8."  # 1.5.3-1
    if size > MAX_TOPIC_BYTES:
        return f"A topic {kind} has at most {MAX_TOPIC_BYTES} bytes; this one has {size}."  # 4.7.3-3
    return None
