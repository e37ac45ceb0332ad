"""What the pages work with, kept with the app: the database, the settings, the clock, and what is remembered."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from flask import current_app

from hub.settings import Settings
from hub.store.engine import Database
from hub.web.book import Book
from hub.web.throttle import Throttle

NAME = "packfold"


@dataclass(frozen=True, slots=True)
class Desk:
    """Everything a page needs.

    Attributes
    ----------
    database, settings
        Where the data lies, and how the hub is set.
    clock
        Now, UTC milliseconds.
    status
        What the other parts of the hub in this process say about themselves.
    book
        The strip book: what is known of each node, gathered now and then.
    throttle
        Failed logins.
    hosts
        Names the pages answer to.
    """

    database: Database
    settings: Settings
    clock: Callable[[], int]
    status: Callable[[], dict[str, Any]]
    book: Book
    hosts: frozenset[str]
    throttle: Throttle = field(default_factory=Throttle)


def desk() -> Desk:
    """The desk of the app that answers the present request."""
    found = current_app.extensions[NAME]
    assert isinstance(found, Desk)
    return found
