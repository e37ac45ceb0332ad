"""``hub.toml`` and the environment to one frozen, validated ``Settings``.

Every key has a default, so that no file is needed. An unknown key refuses to start and suggests the nearest
known one: a typing error in a limit must not silently leave the default in force.
"""

import os
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal, get_type_hints

from msgspec import Meta, Struct, field

from hub import stated
from hub.errors import SettingsError

Port = Annotated[int, Meta(ge=0, le=65535)]
Seconds = Annotated[float, Meta(gt=0)]

ENVIRONMENT_PREFIX = "PACKFOLD_"
# Variables with the prefix that are not settings of the file.
RESERVED_VARIABLES = frozenset({"PACKFOLD_SETTINGS", "PACKFOLD_DATA", "PACKFOLD_MEASURED", "PACKFOLD_TRACE"})


class Database(Struct, frozen=True, forbid_unknown_fields=True):
    """Where readings and figures are kept.

    Attributes
    ----------
    url
        SQLAlchemy URL; empty means ``packfold.db`` in the data folder.
    commit_every_s
        Longest time a received message waits for its commit. Longer spares an SD card, shorter brings receipts sooner.
    """

    url: str = ""
    commit_every_s: Annotated[float, Meta(ge=0, le=60)] = 0.5


class Broker(Struct, frozen=True, forbid_unknown_fields=True):
    """The MQTT broker: one the hub starts, or one that is already there.

    Attributes
    ----------
    embedded
        Start a broker. False uses the one at ``host`` and ``port``.
    kind
        Which broker to start: ``mosquitto`` (Debian's, as a managed child), ``trial`` (inside the process, loopback
        only, for a first look) or ``auto``: mosquitto where it is installed, the trial broker where not.
    listen
        Address the started broker listens on. ``127.0.0.1`` is this machine only; ``0.0.0.0`` lets nodes in from
        outside.
    host, port
        The broker the collector speaks to; ``port`` is also where a started broker listens.
    tls, ca_file
        Speak TLS to an outside broker, trusting ``ca_file`` (empty: the system's authorities).
    username, password_file
        The hub's login at an outside broker.
    root
        First level of every topic.
    client_id
        The collector's name at the broker. Two hubs on one broker need two names.
    message_limit_bytes
        Larger messages are refused by a started broker and set aside by the collector.
    queue_limit
        Messages the started broker holds for the hub while it is away.
    """

    embedded: bool = True
    kind: Literal["auto", "mosquitto", "trial"] = "auto"
    listen: str = "127.0.0.1"
    host: str = "127.0.0.1"
    port: Port = 1883
    tls: bool = False
    ca_file: str = ""
    username: str = ""
    password_file: str = ""
    root: Annotated[
        str,
        Meta(
            pattern=r"\A[A-Za-z0-9_-]+(/[A-Za-z0-9_-]+)*\Z",
            description="topic levels of letters, digits, - and _ with / between them, such as field",
        ),
    ] = "field"
    client_id: str = "packfold-collector"
    message_limit_bytes: Annotated[int, Meta(ge=1024, le=16_777_216)] = 1_048_576
    queue_limit: Annotated[int, Meta(ge=1000)] = 1_000_000


class Web(Struct, frozen=True, forbid_unknown_fields=True):
    """The pages.

    Attributes
    ----------
    listen
        ``address:port`` the pages are served on.
    base_url
        The address people type, if it differs (behind a proxy); it also decides whether cookies are marked secure.
    trusted_proxy
        Address of a reverse proxy whose forwarding headers are believed; empty: none.
    session_days
        How long a login lasts.
    """

    listen: Annotated[
        str,
        Meta(pattern=r"\A[^\s]+:[0-9]{1,5}\Z", description="an address and a port, such as 127.0.0.1:8740"),
    ] = "127.0.0.1:8740"
    base_url: str = ""
    trusted_proxy: str = ""
    session_days: Annotated[float, Meta(gt=0, le=365)] = 30

    @property
    def address(self) -> tuple[str, int]:
        """Host and port to listen on."""
        host, _, port = self.listen.rpartition(":")
        return host.strip("[]"), int(port)

    @property
    def url(self) -> str:
        """The address to show to people, without a trailing slash."""
        host, port = self.address
        shown = "127.0.0.1" if host in {"0.0.0.0", "::"} else host  # noqa: S104 - compared, not bound
        return self.base_url.rstrip("/") or f"http://{f'[{shown}]' if ':' in shown else shown}:{port}"


class Analysis(Struct, frozen=True, forbid_unknown_fields=True):
    """When figures are brought up to date.

    Attributes
    ----------
    every_s
        Pause between two looks for readings that figures do not know yet.
    """

    every_s: Seconds = 120.0


class Settings(Struct, frozen=True, forbid_unknown_fields=True):
    """All settings of one hub."""

    database: Database = field(default_factory=Database)
    broker: Broker = field(default_factory=Broker)
    web: Web = field(default_factory=Web)
    analysis: Analysis = field(default_factory=Analysis)


def load(path: Path | None, environment: Mapping[str, str] | None = None) -> Settings:
    """Settings from a file (or none) with the environment on top.

    Parameters
    ----------
    path
        The settings file; ``None`` uses defaults and the environment alone.
    environment
        Variables ``PACKFOLD_SECTION_KEY``; the process's own where not given.

    Raises
    ------
    SettingsError
        The file is missing, is not TOML, or holds a key or value that cannot be used. The text names the key, what it
        may be, and the nearest known key.
    """
    document = _read(path) if path else {}
    source = str(path) if path else "the environment"
    for name, text in sorted((os.environ if environment is None else environment).items()):
        if name.startswith(ENVIRONMENT_PREFIX) and name not in RESERVED_VARIABLES:
            _apply_variable(document, name, text)
    _check_keys(document, Settings, (), source)
    try:
        settings: Settings = stated.convert(document, Settings)
    except ValueError as error:
        raise SettingsError(f"{source}: {error}.") from None
    _check_sense(settings, source)
    return settings


def _read(path: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise SettingsError(
            f"There is no settings file {path}. Leave out --settings to use the defaults, or create the file."
        ) from None
    except OSError as error:
        raise SettingsError(
            f"The settings file {path} cannot be read: {error.strerror}. Check its permissions."
        ) from None
    except (ValueError, RecursionError) as error:
        raise SettingsError(
            f"The settings file {path} is not TOML: {error}. Correct that line and try again."
        ) from None


def _apply_variable(document: dict[str, Any], name: str, text: str) -> None:
    """Put ``PACKFOLD_SECTION_KEY=text`` into the document, in the type that the key has."""
    section, _, key = name.removeprefix(ENVIRONMENT_PREFIX).lower().partition("_")
    known_sections = get_type_hints(Settings)
    if section not in known_sections:
        raise SettingsError(
            f"The environment variable {name} names no section.{stated.nearest(section, known_sections)}"
        )
    kind = get_type_hints(known_sections[section]).get(key)
    if kind is None:
        raise SettingsError(
            f"The environment variable {name} names no key of [{section}]."
            f"{stated.nearest(key, get_type_hints(known_sections[section]))}"
        )
    value: Any = text
    if kind is bool:
        if text.lower() not in {"true", "false", "1", "0", "yes", "no"}:
            raise SettingsError(f"The environment variable {name} must be true or false, not “{text}”.")
        value = text.lower() in {"true", "1", "yes"}
    elif kind in {int, float}:
        try:
            value = kind(text)
        except ValueError:
            raise SettingsError(f"The environment variable {name} must be a number, not “{text}”.") from None
    table = document.setdefault(section, {})
    if not isinstance(table, dict):
        raise SettingsError(f"[{section}] must be a table of keys.")
    table[key] = value


def _check_keys(table: Mapping[str, Any], struct: type, trail: tuple[str, ...], source: str) -> None:
    hints = get_type_hints(struct)
    for key, value in table.items():
        if key not in hints:
            where = f" in [{'.'.join(trail)}]" if trail else ""
            raise SettingsError(f"{source}: unknown key “{key}”{where}.{stated.nearest(key, hints)}")
        inner = stated.struct_of(hints[key])
        if inner is not None and isinstance(value, Mapping):
            _check_keys(value, inner, (*trail, key), source)


def _check_sense(settings: Settings, source: str) -> None:
    """Refuse what parses and still cannot work."""
    broker = settings.broker
    if settings.web.address[1] > 65535:  # noqa: PLR2004 - the highest port there is
        raise SettingsError(f"{source}: web.listen has a port above 65535.")
    if broker.embedded and broker.kind == "trial" and broker.listen not in {"127.0.0.1", "::1", "localhost"}:
        raise SettingsError(
            f"{source}: the trial broker serves this machine only. Set broker.listen to 127.0.0.1, or install "
            "mosquitto and set broker.kind to mosquitto to let nodes in from outside."
        )
    if broker.embedded and broker.tls:
        raise SettingsError(
            f"{source}: broker.tls concerns an outside broker, and the one the hub starts speaks plain MQTT. "
            "Leave it out, or set broker.embedded to false."
        )
    if broker.username and not broker.password_file:
        raise SettingsError(f"{source}: broker.username needs broker.password_file beside it.")
