"""Serving the pages: a bounded number of threads behind one socket."""

import errno
import logging
import socket
import threading
import time
from typing import Any

from flask import Flask
from waitress.server import create_server

from hub.errors import PackfoldError
from hub.settings import Web
from hub.web.desk import NAME, Desk

THREADS = 8
LONGEST_REQUEST_BYTES = 2 * 1024 * 1024
STOP_WAIT_S = 10.0
FLUSH_WAIT_S = 2.0


class Pages:
    """The pages on their port.

    Parameters
    ----------
    app
        The pages.
    web
        Where to listen, and which proxy to believe.
    """

    def __init__(self, app: Flask, web: Web) -> None:
        self._app = app
        self._web = web
        self._server: Any = None
        self._thread: threading.Thread | None = None
        self._stopping = threading.Event()

    @property
    def port(self) -> int:
        """The port in use; of interest where 0 was asked for."""
        return int(self._server.effective_port)

    def start(self) -> None:
        """Listen, and answer from threads of our own.

        Raises
        ------
        PackfoldError
            The address cannot be listened on.
        """
        listening = _bind(self._web)
        proxy = self._web.trusted_proxy
        # With a trusted proxy both keys are needed: the address alone believes hardly anything.
        believed = (
            {
                "trusted_proxy": proxy,
                "trusted_proxy_count": 1,
                "trusted_proxy_headers": {"x-forwarded-for", "x-forwarded-proto", "x-forwarded-host"},
            }
            if proxy
            else {}
        )
        logging.getLogger("waitress.queue").setLevel(logging.ERROR)
        self._server = create_server(
            self._app,
            sockets=[listening],
            threads=THREADS,
            ident="packfold",
            max_request_body_size=LONGEST_REQUEST_BYTES,
            connection_limit=200,
            channel_timeout=60,
            clear_untrusted_proxy_headers=True,
            **believed,
        )
        self._thread = threading.Thread(target=self._serve, args=(self._server,), name="pages", daemon=True)
        self._thread.start()
        # The first visitor should not wait until every node has been looked at once.
        here = self._app.extensions[NAME]
        assert isinstance(here, Desk)
        threading.Thread(target=here.book.refresh_beside, name="first strip book", daemon=True).start()

    def _serve(self, server: Any) -> None:  # noqa: ANN401 - the server's class is private to its library
        while not self._stopping.is_set():
            server.asyncore.loop(timeout=0.5, map=server._map, count=1)  # noqa: SLF001 - its own loop never ends

    def stop(self) -> None:
        """Stop listening; answers that are under way are finished first."""
        server, thread = self._server, self._thread
        if server is None or thread is None:
            return
        self._server = None
        server.accepting = False
        server.pull_trigger()
        server.task_dispatcher.shutdown(cancel_pending=True, timeout=STOP_WAIT_S)
        patience = time.monotonic() + FLUSH_WAIT_S
        while any(channel.total_outbufs_len for channel in list(server.active_channels.values())):
            if time.monotonic() > patience:
                break
            time.sleep(0.02)
        self._stopping.set()
        server.pull_trigger()
        thread.join(STOP_WAIT_S)
        for channel in list(server.active_channels.values()):
            channel.close()
        server.close()


def _bind(web: Web) -> socket.socket:
    host, port = web.address
    try:
        family, kind, protocol, _, address = socket.getaddrinfo(
            host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE
        )[0]
    except socket.gaierror:
        raise PackfoldError(
            f"web.listen names “{host}”, which is no address of this machine. Set it to 127.0.0.1:{port}, or to "
            f"0.0.0.0:{port} for every address."
        ) from None
    listening = socket.socket(family, kind, protocol)
    try:
        listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listening.bind(address)
    except OSError as error:
        listening.close()
        raise PackfoldError(_refusal(error, host, port)) from None
    return listening


def _refusal(error: OSError, host: str, port: int) -> str:
    match error.errno:
        case errno.EADDRINUSE:
            return f"Port {port} on {host} is taken. Stop what uses it, or set web.listen to another port."
        case errno.EACCES:
            return f"Port {port} on {host} needs more rights than the hub has. Set web.listen to a port above 1023."
        case errno.EADDRNOTAVAIL:
            return f"This machine does not have the address {host}. Set web.listen to one it has, or to 0.0.0.0:{port}."
        case _:
            return f"The pages cannot listen on {host}, port {port}: {error.strerror}. Set web.listen to another one."
