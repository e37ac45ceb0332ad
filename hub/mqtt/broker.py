"""The broker: one that the hub starts, or one that is there already."""

import threading
from pathlib import Path
from typing import Any, Final, Protocol

import paho.mqtt.client as paho

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.client import ANSWER_LIMIT_S, new_client, refusal, unreachable
from hub.mqtt.logins import Logins, access_for_selfcheck
from hub.mqtt.mosquitto import Mosquitto, find_program
from hub.settings import Broker
from hub.store.engine import Database

LOOPBACK: Final = frozenset({"127.0.0.1", "::1", "localhost"})


class RunningBroker(Protocol):
    """A broker as the rest of the hub sees it."""

    access: Access
    """How the hub reaches it."""

    @property
    def port(self) -> int:
        """Where nodes reach it."""
        ...

    @property
    def sentence(self) -> str:
        """What it is, for a person."""
        ...

    def poll(self) -> str:
        """What is wrong with it now; empty when nothing is."""
        ...

    def stop(self) -> None:
        """End it, where the hub started it."""
        ...


class OutsideBroker:
    """A broker that somebody else runs."""

    def __init__(self, settings: Broker) -> None:
        self.access = _outside_access(settings, settings.client_id)

    @property
    def port(self) -> int:
        """Where nodes reach it."""
        return self.access.port

    @property
    def sentence(self) -> str:
        """What it is, for a person."""
        return f"Broker: the one at {self.access.place}."

    def poll(self) -> str:
        """Nothing is known of it beyond what the connection tells."""
        return ""

    def stop(self) -> None:
        """It goes on."""


def start_broker(settings: Broker, data: Path, database: Database) -> RunningBroker:
    """The broker that the settings ask for, running.

    Raises
    ------
    BrokerError
        It cannot be started: the text says why and what to do.
    """
    if not settings.embedded:
        return OutsideBroker(settings)
    logins = Logins(database)
    program = find_program() if settings.kind in {"auto", "mosquitto"} else None
    if program is not None:
        mosquitto = Mosquitto(program, settings, data, logins)
        mosquitto.start()
        return mosquitto
    if settings.kind == "mosquitto":
        raise BrokerError(
            "Mosquitto is not installed. Install it (“apt install mosquitto”), or set broker.kind to trial."
        )
    if settings.listen not in LOOPBACK:
        raise BrokerError(
            "Mosquitto is not installed, and the trial broker serves this machine only. Install mosquitto to let nodes "
            "in from outside, or set broker.listen to 127.0.0.1."
        )
    from hub.mqtt.trial import TrialBroker

    trial = TrialBroker(settings, data, logins)
    trial.start()
    return trial


def try_login(settings: Broker, data: Path) -> str:
    """Log in at the broker and out again; what is wrong, or nothing.

    At a broker that the hub started this uses a login of its own without any rights, so that the hub keeps its session.
    """
    try:
        if settings.embedded:
            access = access_for_selfcheck(data)
        else:
            access = _outside_access(settings, f"{settings.client_id}-check")
        client = new_client(paho.Client, access, clean=True)
    except BrokerError as error:
        return str(error)
    answered = threading.Event()
    answers: list[Any] = []

    def on_connect(_client: paho.Client, _data: object, _flags: object, reason: Any, _properties: object) -> None:  # noqa: ANN401
        answers.append(reason)
        answered.set()

    client.on_connect = on_connect
    try:
        client.connect(access.host, access.port)
        client.loop_start()
        if not answered.wait(ANSWER_LIMIT_S):
            return f"The broker at {access.place} takes the connection and does not answer."
    except OSError as error:
        return unreachable(access, error)
    finally:
        client.disconnect()
        client.loop_stop()
    return refusal(access, answers[0]) if answers[0].is_failure else ""


def _outside_access(settings: Broker, client_id: str) -> Access:
    password = ""
    if settings.password_file:
        try:
            password = Path(settings.password_file).read_text(encoding="utf-8").splitlines()[0].strip()
        except IndexError:
            raise BrokerError(
                f"broker.password_file {settings.password_file} is empty. Put the password in it."
            ) from None
        except (OSError, UnicodeDecodeError) as error:
            raise BrokerError(f"broker.password_file {settings.password_file} cannot be read: {error}.") from None
    return Access(settings.host, settings.port, client_id, settings.username, password, settings.tls, settings.ca_file)
