"""Messages as they came, to what the store takes: readings of known nodes, presence, and what has to be set aside."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Final

from hub.errors import PayloadError, StoreError
from hub.mqtt.tray import Letter
from hub.store import inventory
from hub.store.aside import Origin
from hub.store.engine import Database
from hub.store.intake import Incoming
from hub.telemetry.message import Message, Remark
from hub.telemetry.senml import decode
from hub.telemetry.topics import node_problem, parse_topic

SOURCE: Final = "mqtt"
STATES: Final = {b"online": "online", b"offline": "offline"}


@dataclass(frozen=True, slots=True)
class Presence:
    """A node's word about itself."""

    node_id: int
    state: str
    at_ms: int


@dataclass(slots=True)
class Sorted:
    """A batch, ready to be stored. Each list is in the order of arrival."""

    incoming: list[Incoming] = field(default_factory=list)
    presence: list[Presence] = field(default_factory=list)


class Sorter:
    """Reads topics and payloads, and knows the nodes.

    Parameters
    ----------
    database
        Where the nodes are enrolled; asked when a name comes that is not known yet.
    root, limit_bytes
        First level of the topics, and the size beyond which a message is set aside.
    read
        Payload and time of receipt to a message.
    """

    def __init__(
        self,
        database: Database,
        root: str,
        limit_bytes: int,
        read: Callable[[bytes, int], Message] = decode,
    ) -> None:
        self._database = database
        self._root = root
        self._limit_bytes = limit_bytes
        self._read = read
        self._ids: dict[str, int] = {}
        self._names: dict[int, str] = {}
        self._asked = False

    def sort(self, letters: Sequence[Letter]) -> Sorted:
        """Everything that came, in one of the lists. No message raises.

        Raises
        ------
        StoreError
            The nodes cannot be looked up now; nothing is decided then.
        """
        found = Sorted()
        self._asked = False
        for letter in letters:
            try:
                self._place(letter, found)
            except StoreError:
                raise
            except Exception as error:  # noqa: BLE001 - one message must never stop the others
                origin = Origin(SOURCE, letter.topic, None, None, letter.received_ms)
                found.incoming.append(apart(Incoming(origin, letter.payload), error))
        return found

    def name_of(self, node_id: int) -> str:
        """The name of a node that a message came from."""
        return self._names[node_id]

    def _place(self, letter: Letter, found: Sorted) -> None:
        parsed = parse_topic(letter.topic, self._root)
        if parsed is None:
            found.incoming.append(self._stranger(letter, None))
            return
        node, kind = parsed
        node_id = self._id_of(node)
        if kind == "telemetry":
            found.incoming.append(
                self._stranger(letter, node) if node_id is None else self._reading(letter, node, node_id)
            )
        elif kind == "presence" and node_id is not None:
            self._note(letter, node, node_id, found)
        elif kind == "presence" and not letter.retained:
            # What the broker has kept comes again with each connection; once is enough to tell of a stranger.
            found.incoming.append(self._stranger(letter, node))

    def _reading(self, letter: Letter, node: str, node_id: int) -> Incoming:
        origin = Origin(SOURCE, letter.topic, node_id, node, letter.received_ms)
        if len(letter.payload) > self._limit_bytes:
            detail = (
                f"The message has {len(letter.payload)} bytes, more than the {self._limit_bytes} of "
                "broker.message_limit_bytes; send the backlog in several messages."
            )
            return Incoming(origin, letter.payload, None, Remark("too-large", detail))
        try:
            return Incoming(origin, letter.payload, self._read(letter.payload, letter.received_ms))
        except PayloadError as error:
            return Incoming(origin, letter.payload, None, Remark("malformed", str(error)))
        except Exception as error:  # noqa: BLE001 - one message must never stop the others
            return Incoming(origin, letter.payload, None, Remark("malformed", _unforeseen(error)))

    def _note(self, letter: Letter, node: str, node_id: int, found: Sorted) -> None:
        state = STATES.get(letter.payload)
        if state is not None:
            found.presence.append(Presence(node_id, state, letter.received_ms))
        elif letter.payload or not letter.retained:
            origin = Origin(SOURCE, letter.topic, node_id, node, letter.received_ms)
            detail = "A presence message says online or offline and nothing else; correct the node's firmware."
            found.incoming.append(Incoming(origin, letter.payload, None, Remark("malformed", detail)))

    def _stranger(self, letter: Letter, node: str | None) -> Incoming:
        """A message of a node that is not enrolled, or of none that could be."""
        origin = Origin(SOURCE, letter.topic, None, node, letter.received_ms)
        if node is None:
            level = letter.topic.removeprefix(f"{self._root}/").partition("/")[0]
            problem = node_problem(level) or "This topic belongs to no part of the node interface."
            return Incoming(origin, letter.payload, None, Remark("unknown-node", problem))
        detail = (
            f"No node is enrolled as “{node}”. Add it to the inventory (packfold inventory load), or correct the name "
            "in the node's topic."
        )
        return Incoming(origin, letter.payload, None, Remark("unknown-node", detail))

    def _id_of(self, node: str) -> int | None:
        if node not in self._ids and not self._asked:
            with self._database.read() as connection:
                self._ids = inventory.node_ids(connection)
            self._names = {node_id: name for name, node_id in self._ids.items()}
            self._asked = True
        return self._ids.get(node)


def apart(item: Incoming, error: Exception) -> Incoming:
    """A message that the store cannot take, to be set aside whole."""
    return Incoming(item.origin, item.payload, None, Remark("malformed", _unforeseen(error)))


def _unforeseen(error: Exception) -> str:
    said = f"{type(error).__name__}: {error}".splitlines()[0][:200]
    return f"The hub failed on this message in a way that was not foreseen ({said}); report it with the message."
