"""A client on a socket that reads ahead and sends in one piece.

The MQTT library reads a message in four pieces, two of them a single byte long, and sends each acknowledgement by
itself. Each piece is a call of the system and an invitation to the other threads to take over, and together they are
a quarter of the cost of a message.
"""

import socket
import ssl
from typing import Any, Final

import paho.mqtt.client as paho

CHUNK: Final = 65_536


class BufferedSocket:
    """What the library needs of a socket, with bytes that were read ahead and bytes that are still to be sent."""

    def __init__(self, inner: socket.socket) -> None:
        self._inner = inner
        self._held = b""
        self._at = 0
        self._unsent = bytearray()

    def recv(self, buffer_size: int) -> bytes:
        """The next bytes; none when the other side has hung up."""
        start = self._at
        if start >= len(self._held):
            self._held = self._inner.recv(CHUNK)
            start = 0
        data = self._held[start : start + buffer_size]
        self._at = start + len(data)
        return data

    def pending(self) -> int:
        """Bytes that are here already, so that waiting for the network would miss them."""
        beneath = getattr(self._inner, "pending", None)
        return len(self._held) - self._at + (beneath() if beneath is not None else 0)

    def send(self, buffer: bytes) -> int:
        """Take bytes to be sent with the next ``flush``."""
        if len(self._unsent) >= CHUNK and not self.flush():
            raise BlockingIOError
        self._unsent += buffer
        return len(buffer)

    def flush(self) -> bool:
        """Send as much as the network takes now; whether that was all."""
        try:
            while self._unsent:
                del self._unsent[: self._inner.send(self._unsent)]
        except (BlockingIOError, ssl.SSLWantReadError, ssl.SSLWantWriteError):
            return False
        return True

    @property
    def unsent(self) -> bool:
        """Whether something is still to be sent."""
        return bool(self._unsent)

    def close(self) -> None:
        """Close it, after a last attempt to send."""
        try:
            self.flush()
        except (OSError, ValueError):
            pass  # it is broken or closed already
        finally:
            self._inner.close()

    def fileno(self) -> int:
        """The descriptor to wait for."""
        return self._inner.fileno()

    def setblocking(self, flag: bool) -> None:
        """Whether calls wait."""
        self._inner.setblocking(flag)


class BufferedClient(paho.Client):
    """The library's client on such a socket."""

    buffer: BufferedSocket | None = None

    def _create_socket(self) -> Any:  # noqa: ANN401 - what the library calls a socket
        inner: Any = super()._create_socket()
        self.buffer = BufferedSocket(inner)
        return self.buffer
