"""What the commands share: where the data is, how reports are printed, how progress is shown."""

import json
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import cached_property
from pathlib import Path
from typing import Any, TypeVar

import click
import platformdirs

from hub import settings as settings_module
from hub.settings import Settings
from hub.store import schema
from hub.store.engine import Database, FolderLock

Command = TypeVar("Command", bound=Callable[..., Any])

format_option = click.option(
    "--format",
    "form",
    type=click.Choice(["text", "json"]),
    default="text",
    show_default=True,
    help="json prints one JSON document on standard output; remarks always go to standard error.",
)


class Context:
    """The global options, and what follows from them."""

    def __init__(self, settings_path: Path | None, data: Path | None) -> None:
        self.settings_path = settings_path
        self.given_data = data
        self.data = data or platformdirs.user_data_path("packfold")

    @cached_property
    def settings(self) -> Settings:
        """The settings; read once."""
        return settings_module.load(self.settings_path)

    @contextmanager
    def database(self) -> Iterator[Database]:
        """The database at this version's schema.

        While a hub runs on the folder, it alone moves the write-ahead log into the file and brings the schema up to
        date; without one, this command does.
        """
        lock = FolderLock(self.data)
        alone = lock.try_take()
        database = Database(self.data, self.settings.database.url, checkpoints=alone)
        try:
            if alone:
                schema.prepare(database)
            yield database
        finally:
            database.close()
            lock.release()


def now_ms() -> int:
    """The time by the clock of this machine."""
    return time.time_ns() // 1_000_000


def say(text: str) -> None:
    """A remark for the person, on standard error."""
    click.echo(text, err=True)


def report(form: str, document: object, lines: Iterator[str] | list[str]) -> None:
    """The result: one JSON document, or lines of text, on standard output."""
    if form == "json":
        click.echo(json.dumps(document, ensure_ascii=False, indent=2))
        return
    for line in lines:
        click.echo(line)


@contextmanager
def progress(description: str, total: int | None) -> Iterator[Callable[[int], None]]:
    """A progress bar on standard error while somebody watches; silent otherwise.

    The callable takes the number of things done so far.
    """
    if not sys.stderr.isatty():
        yield lambda _done: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, SpinnerColumn, TextColumn, TimeRemainingColumn

    columns = [SpinnerColumn(), TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn()]
    with Progress(*columns, TimeRemainingColumn(), console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(description, total=total)
        yield lambda done: bar.update(task, completed=done)
