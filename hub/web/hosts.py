"""Which host names the pages answer to: a page fetched under a foreign name may be a trick on the browser."""

import ipaddress
import socket
from urllib.parse import urlsplit

from hub.settings import Web

EVERYWHERE = frozenset({"0.0.0.0", "::", ""})  # noqa: S104 - compared, not bound


def names(web: Web) -> frozenset[str]:
    """Names from the settings; the machine's own where the pages are served on every address."""
    host, _ = web.address
    found = {"127.0.0.1", "::1", "localhost", urlsplit(web.url).hostname or ""}
    if host in EVERYWHERE:
        own = socket.gethostname().lower()
        found |= {own, own.partition(".")[0], f"{own.partition('.')[0]}.local"}
    else:
        found.add(host.lower())
    return frozenset(found - {""})


def trusted(host_header: str, web: Web, known: frozenset[str]) -> bool:
    """Whether a request under this ``Host`` is answered.

    Where the pages are served on every address, a plain IP address is answered too: it is a name that nobody else can
    point at this machine.
    """
    host = hostname(host_header)
    if host in known:
        return True
    return web.address[0] in EVERYWHERE and _is_address(host)


def hostname(host_header: str) -> str:
    """The host of ``host:port``, lower case, brackets of an IPv6 address removed."""
    try:
        return (urlsplit(f"//{host_header}").hostname or "").rstrip(".")
    except ValueError:
        return ""


def _is_address(host: str) -> bool:
    try:
        ipaddress.ip_address(host)
    except ValueError:
        return False
    return True
