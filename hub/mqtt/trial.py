"""A broker inside the process, for a first look without installing one.

Its limits: it serves this machine only; it speaks MQTT 3.1.1, so that a node on version 5 gets no answer; it keeps
everything in memory, so that messages the hub has not stored when it ends are gone; a message that the hub does not
acknowledge within five seconds (a busy disk is enough) or before its connection breaks is dropped; it bounds neither
queues nor the size of a message; a program on this machine that knows no login can still disturb a session by taking
its name; a node that falls silent with its connection open stays "online", as keep-alive is not enforced; what was
published to be kept (presence) reaches every login; and it takes some thousand messages a second at most. A node that
keeps its readings until the receipt loses none by any of this; one that does not, may. Mosquitto has none of these
limits.
"""

import asyncio
import contextlib
import logging
import threading
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

from amqtt.adapters import StreamReaderAdapter, StreamWriterAdapter
from amqtt.broker import Broker as AmqttBroker
from amqtt.contexts import Action, BrokerConfig, ListenerConfig, ListenerType
from amqtt.errors import AMQTTError
from amqtt.plugins.base import BaseAuthPlugin, BaseTopicPlugin
from amqtt.session import Session

from hub.errors import BrokerError
from hub.mqtt import rights
from hub.mqtt.access import Access
from hub.mqtt.credentials import verify
from hub.mqtt.logins import Logins, leave_for_selfcheck
from hub.mqtt.mosquitto import check_port
from hub.settings import Broker

START_LIMIT_S: Final = 10.0
STOP_LIMIT_S: Final = 3.0
# Sessions of clients that went away are kept this long, in memory.
SESSION_S: Final = 24 * 3600
MOST_NAMES: Final = 10_000
MOST_CONNECTIONS: Final = 200


class Gate:
    """Who may come in and what they may do: asked by the broker's plugins on its thread.

    A client name belongs to the user that came with it first, so that nobody ends another one's session.
    """

    def __init__(self, root: str, logins: dict[str, str]) -> None:
        self.root = root
        self.logins = logins
        self._names: dict[str, str] = {}

    def admits(self, username: str | None, secret: str | None, client_id: str | None) -> bool:
        """Whether this login is right and the client's name is not somebody else's."""
        if not username or not secret or username not in self.logins:
            return False
        if not verify(secret, self.logins[username]):
            return False
        if not client_id:
            return True
        if client_id not in self._names and len(self._names) < MOST_NAMES:
            self._names[client_id] = username
        return self._names.get(client_id) == username

    def allows(self, username: str | None, name: str | None, action: Action | None) -> bool:
        """Whether a user may do this on a topic; one whose credential was taken away may nothing."""
        if not username or not name or username not in self.logins:
            return False
        match action:
            case Action.PUBLISH:
                return rights.may_publish(username, name, self.root)
            case Action.SUBSCRIBE:
                return rights.may_subscribe(username, name, self.root)
            case Action.RECEIVE:
                return rights.may_read(username, name, self.root)
            case _:
                return False


class LoginPlugin(BaseAuthPlugin):  # type: ignore[misc]  # the library has no types we read
    """Lets in whom the gate admits."""

    @dataclass
    class Config:
        """The gate to ask."""

        gate: Gate

    async def authenticate(self, *, session: Session) -> bool:
        """Whether this session may begin."""
        gate: Gate = self.config.gate
        return gate.admits(session.username, session.password, session.client_id)


class RightsPlugin(BaseTopicPlugin):  # type: ignore[misc]  # see above
    """Lets through what the gate allows."""

    @dataclass
    class Config:
        """The gate to ask."""

        gate: Gate

    async def topic_filtering(
        self, *, session: Session | None = None, topic: str | None = None, action: Action | None = None
    ) -> bool:
        """Whether this session may do this."""
        gate: Gate = self.config.gate
        return session is not None and gate.allows(session.username, topic, action)


@dataclass(slots=True)
class _State:
    """What the broker's thread and the others share."""

    settled: threading.Event = field(default_factory=threading.Event)
    failure: BrokerError | None = None
    trouble: str = ""


class TrialBroker:
    """A running trial broker, on a thread and an event loop of its own."""

    def __init__(self, settings: Broker, data: Path, logins: Logins) -> None:
        self._settings = settings
        self._data = data
        self._logins = logins
        self._state = _State()
        self._loop: asyncio.AbstractEventLoop | None = None
        self._ending: asyncio.Event | None = None
        self._thread = threading.Thread(target=self._run, name="trial broker", daemon=True)
        self.access = Access(settings.listen, settings.port, rights.HUB_USER, rights.HUB_USER, logins.secret)

    @property
    def port(self) -> int:
        """Where it listens."""
        return self.access.port

    @property
    def sentence(self) -> str:
        """What it is, for a person."""
        return (
            f"Broker: the trial broker on {self.access.place}, for this machine only and for a first look. "
            "Install mosquitto to let nodes in from outside."
        )

    def start(self) -> None:
        """Start it and wait until it takes connections.

        Raises
        ------
        BrokerError
            The port is taken, or it does not start; the text says what to do.
        """
        port = check_port(self._settings.listen, self._settings.port, threading.Event(), patience_s=0)
        self.access = Access(self.access.host, port, rights.HUB_USER, rights.HUB_USER, self._logins.secret)
        gate = Gate(self._settings.root, self._logins.read())
        leave_for_selfcheck(self._data, self.access)
        self._gate = gate
        self._thread.start()
        if not self._state.settled.wait(START_LIMIT_S):
            self.stop()
            raise BrokerError(f"The trial broker does not start within {START_LIMIT_S:.0f} s. Install mosquitto.")
        if self._state.failure is not None:
            raise self._state.failure

    def poll(self) -> str:
        """What is wrong with it now; empty when nothing is."""
        if self._state.settled.is_set() and not self._thread.is_alive():
            return "The trial broker has ended. Start the hub again, or install mosquitto."
        return self._state.trouble

    def stop(self) -> None:
        """End it, within a bounded time."""
        loop, ending = self._loop, self._ending
        if loop is not None and ending is not None:
            with contextlib.suppress(RuntimeError):  # the loop has ended by itself
                loop.call_soon_threadsafe(ending.set)
        if self._thread.is_alive():
            self._thread.join(2 * STOP_LIMIT_S + 1)

    def _run(self) -> None:
        # The library logs refused logins and slow clients with their stack; the hub says what matters in its own words.
        for name in ("amqtt", "transitions"):
            logger = logging.getLogger(name)
            if not logger.handlers:
                logger.addHandler(logging.NullHandler())
            logger.propagate = False
        try:
            asyncio.run(self._serve())
        except BrokerError as error:
            self._state.failure = error
        except Exception as error:  # noqa: BLE001 - whatever ends this thread must be told
            self._state.failure = BrokerError(f"The trial broker cannot be started: {error}. Install mosquitto.")
        finally:
            self._state.settled.set()

    async def _serve(self) -> None:
        self._loop = asyncio.get_running_loop()
        self._loop.set_exception_handler(self._note_exception)
        self._ending = asyncio.Event()
        broker = AmqttBroker(
            BrokerConfig(
                # The listener is our own, so that a free port can be asked for and connections be bounded and closed.
                listeners={"default": ListenerConfig(type=ListenerType.EXTERNAL)},
                session_expiry_interval=SESSION_S,
                plugins={
                    f"{__name__}.{LoginPlugin.__name__}": {"gate": self._gate},
                    f"{__name__}.{RightsPlugin.__name__}": {"gate": self._gate},
                },
            )
        )
        connections: set[asyncio.Task[Any]] = set()

        async def connected(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
            task = asyncio.current_task()
            assert task is not None
            if len(connections) >= MOST_CONNECTIONS:
                writer.close()
                return
            connections.add(task)
            try:
                await broker.external_connected(StreamReaderAdapter(reader), StreamWriterAdapter(writer), "default")
            except (AMQTTError, OSError, ValueError, asyncio.CancelledError):
                pass  # one client's end is no concern of the others
            finally:
                connections.discard(task)
                writer.close()

        await broker.start()
        server = await asyncio.start_server(connected, self.access.host, self.access.port)
        self._state.settled.set()
        try:
            while not self._ending.is_set():
                with contextlib.suppress(asyncio.TimeoutError):
                    await asyncio.wait_for(self._ending.wait(), rights.LOOK_S)
                await self._follow_credentials()
        finally:
            server.close()
            # An idle connection would make an orderly end wait without limit.
            for task in tuple(connections):
                task.cancel()
            with contextlib.suppress(asyncio.TimeoutError, AMQTTError):
                await asyncio.wait_for(broker.shutdown(), STOP_LIMIT_S)

    async def _follow_credentials(self) -> None:
        try:
            if await asyncio.to_thread(self._logins.changed):
                self._gate.logins = await asyncio.to_thread(self._logins.read)
            self._state.trouble = ""
        except Exception as error:  # noqa: BLE001 - the broker goes on with the credentials it knows
            self._state.trouble = f"A change of credentials cannot be passed on to the broker yet: {error}"

    def _note_exception(self, _loop: asyncio.AbstractEventLoop, context: dict[str, Any]) -> None:
        """One client's failure does not end the broker, and is not printed over the hub's own words."""
        logging.getLogger("amqtt").debug("%s", context.get("message"))
