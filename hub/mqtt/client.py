"""An MQTT client of the hub, and what may stand in its way, in words."""

import ssl
from typing import Final, TypeVar

import paho.mqtt.client as paho
from paho.mqtt.enums import CallbackAPIVersion

from hub.errors import BrokerError
from hub.mqtt.access import Access

# How long a broker may take to be connected to, and again to answer.
ANSWER_LIMIT_S: Final = 5.0


Client = TypeVar("Client", bound=paho.Client)


def new_client(kind: type[Client], access: Access, *, clean: bool, manual_ack: bool = False) -> Client:
    """A client of the protocol's version 3.1.1, with login and TLS set and no connection yet.

    Version 3.1.1 because it is half the work of version 5 in this library and offers all that the hub needs; nodes may
    speak either.

    Raises
    ------
    BrokerError
        The file of trusted authorities cannot be read.
    """
    client = kind(
        CallbackAPIVersion.VERSION2,
        client_id=access.client_id,
        clean_session=clean,
        protocol=paho.MQTTv311,
        reconnect_on_failure=False,
        manual_ack=manual_ack,
    )
    client.connect_timeout = ANSWER_LIMIT_S
    if access.username:
        client.username_pw_set(access.username, access.password)
    if access.tls:
        try:
            client.tls_set_context(ssl.create_default_context(cafile=access.ca_file or None))
        except (OSError, ssl.SSLError) as error:
            raise BrokerError(f"broker.ca_file {access.ca_file} cannot be used: {error}. Give a PEM file.") from None
    return client


def unreachable(access: Access, error: OSError) -> str:
    """One sentence about a broker that cannot be connected to."""
    if isinstance(error, ssl.SSLCertVerificationError):
        return (
            f"The certificate of the broker at {access.place} is not trusted: {error.verify_message}. "
            "Set broker.ca_file to the authority that signed it."
        )
    if isinstance(error, ssl.SSLError):
        return f"The broker at {access.place} does not speak TLS there. Check broker.port and broker.tls."
    reason = error.strerror or str(error) or type(error).__name__
    return f"The broker at {access.place} cannot be reached: {reason}. Check that it runs, broker.host and broker.port."


def refusal(access: Access, reason: object) -> str:
    """One sentence about a broker that refuses the hub."""
    return (
        f"The broker at {access.place} refuses the hub ({reason}). Check broker.username, broker.password_file and "
        "broker.client_id."
    )
