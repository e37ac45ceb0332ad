"""``packfold selfcheck``."""

import shutil
import socket
import time
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import Literal

import click

from hub.cli.common import Context, format_option, report
from hub.errors import PackfoldError
from hub.store import inventory, people, schema
from hub.store.engine import DATABASE_NAME, Database, FolderLock, sqlite_release

Verdict = Literal["good", "look", "bad"]

# Less than this and the database cannot even be copied for an upgrade.
DISK_LOW_BYTES = 500_000_000
# The first version of this program is younger than this; a clock before it is wrong.
CLOCK_EARLIEST = time.mktime((2026, 1, 1, 0, 0, 0, 0, 0, 0))


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that was looked at: how it is, and what to do."""

    subject: str
    verdict: Verdict
    sentence: str


@click.command()
@format_option
@click.pass_obj
def selfcheck(context: Context, form: str) -> None:
    """Look at settings, database, disk, clock, broker and pages: what is wrong, and what to do about it.

    Exit code 1 if something is bad. It is safe to run while the hub is running.
    """
    found: list[Finding] = []
    for check in (_settings, _disk, _clock, _sqlite, _database, _broker, _pages):
        try:
            found += check(context)
        except PackfoldError as error:
            found.append(Finding(check.__name__.strip("_"), "bad", str(error)))
            if check is _settings:
                break
    report(form, [asdict(f) for f in found], [f"{f.verdict:<5} {f.subject}: {f.sentence}" for f in found])
    if any(f.verdict == "bad" for f in found):
        raise click.exceptions.Exit(1)


def _settings(context: Context) -> Iterator[Finding]:
    _ = context.settings
    source = str(context.settings_path) if context.settings_path else "no file; defaults and environment"
    yield Finding("settings", "good", source)


def _disk(context: Context) -> Iterator[Finding]:
    folder = next(p for p in (context.data, *context.data.parents) if p.exists())
    free = shutil.disk_usage(folder).free
    sentence = f"{free / 1e9:.1f} GB free for {context.data}."
    if free < DISK_LOW_BYTES:
        yield Finding("disk", "bad", f"{sentence} Free some space: with a full disk nothing more can be received.")
    else:
        yield Finding("disk", "good", sentence)


def _clock(_context: Context) -> Iterator[Finding]:
    if time.time() < CLOCK_EARLIEST:
        yield Finding("clock", "bad", "This machine's clock is years behind. Set it, or let it follow a time server.")
    else:
        yield Finding("clock", "good", time.strftime("%Y-%m-%d %H:%M:%S %Z."))


def _sqlite(_context: Context) -> Iterator[Finding]:
    version, sound = sqlite_release()
    if not sound:
        yield Finding(
            "SQLite",
            "look",
            f"{version} has a known fault when two processes tidy the log at once. Packfold lets only one do it; "
            "do not open the database with other tools while the hub runs.",
        )
    else:
        yield Finding("SQLite", "good", version)


def _database(context: Context) -> Iterator[Finding]:
    if not context.settings.database.url and not (context.data / DATABASE_NAME).exists():
        yield Finding("database", "look", f"There is none yet in {context.data}; “packfold run” makes it.")
        return
    database = Database(context.data, context.settings.database.url)
    try:
        with database.read() as connection:
            revision = schema.revision_of(connection)
            fault = database.integrity_fault(connection)
            if fault:
                yield Finding("database", "bad", f"It is damaged ({fault}). Stop the hub and restore the last backup.")
                return
            if revision != schema.head_revision():
                yield Finding(
                    "database",
                    "look",
                    f"Its schema is {revision}, this version's is {schema.head_revision()}: “packfold run” brings it "
                    "up to date and keeps a copy.",
                )
                return
            nodes, users = inventory.node_ids(connection), people.accounts(connection)
    finally:
        database.close()
    yield Finding("database", "good", f"{database.file}, sound, {len(nodes)} nodes.")
    if not nodes:
        yield Finding("inventory", "look", "No nodes yet. See “packfold inventory load --help”.")
    if not users:
        yield Finding("people", "look", "Nobody can log in to the pages yet. Add yourself: “packfold user add NAME”.")


def _running(context: Context, part: str) -> bool:
    lock = FolderLock(context.data, part)
    taken = lock.try_take()
    lock.release()
    return not taken


def _broker(context: Context) -> Iterator[Finding]:
    broker = context.settings.broker
    from hub.mqtt.broker import try_login

    if broker.embedded and not _running(context, "collect"):
        yield from _port_free("broker", broker.listen, broker.port, "broker.port")
        return
    problem = try_login(broker, context.data)
    if problem:
        yield Finding("broker", "bad", problem)
    else:
        yield Finding("broker", "good", f"Logged in at {broker.host}, port {broker.port}.")


def _pages(context: Context) -> Iterator[Finding]:
    host, port = context.settings.web.address
    if not _running(context, "web"):
        yield from _port_free("pages", host, port, "web.listen")
        return
    try:
        with socket.create_connection((host.replace("0.0.0.0", "127.0.0.1"), port), timeout=5):  # noqa: S104 - compared
            yield Finding("pages", "good", context.settings.web.url)
    except OSError as error:
        yield Finding("pages", "bad", f"The hub runs but {context.settings.web.url} does not answer: {error.strerror}.")


def _port_free(subject: str, host: str, port: int, key: str) -> Iterator[Finding]:
    try:
        with socket.socket(socket.AF_INET6 if ":" in host else socket.AF_INET) as probe:
            probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            probe.bind((host, port))
    except OSError:
        yield Finding(
            subject, "bad", f"Port {port} on {host} is taken by another program. Stop it, or choose another {key}."
        )
    else:
        yield Finding(subject, "good", f"Not running; port {port} on {host} is free.")
