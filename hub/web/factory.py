"""Putting the pages together."""

from collections.abc import Callable
from typing import Any

from flask import Flask
from jinja2 import StrictUndefined

from hub.settings import Settings
from hub.store.engine import Database
from hub.web import (
    access,
    api,
    assets,
    downloads,
    headers,
    health,
    hosts,
    login,
    node,
    overview,
    pack,
    problems,
    sentences,
    words,
)
from hub.web.book import Book
from hub.web.desk import NAME, Desk

# Forms here are short; files do not come this way.
LONGEST_FORM_BYTES = 1024 * 1024


def create_app(
    database: Database,
    settings: Settings,
    *,
    clock: Callable[[], int],
    status: Callable[[], dict[str, Any]] | None = None,
) -> Flask:
    """The pages and the interface of one hub.

    Parameters
    ----------
    clock
        Now, UTC milliseconds.
    status
        What the other parts in this process say about themselves; none where they run elsewhere.
    """
    app = Flask("hub.web", static_folder=None)
    app.config.update(MAX_CONTENT_LENGTH=LONGEST_FORM_BYTES, MAX_FORM_PARTS=200)
    # A label may hold any sign, two strokes in a row as well.
    app.url_map.merge_slashes = False
    app.extensions[NAME] = Desk(
        database, settings, clock, status or dict, Book(database, clock), hosts.names(settings.web)
    )
    _prepare_templates(app, clock)
    app.before_request(access.guard)
    # The last one registered runs first: the cookie must be there before the answer is finished.
    app.after_request(headers.finish)
    app.after_request(access.remember_visit)
    for part in (overview, node, pack, downloads, login, api, health, assets):
        app.register_blueprint(part.blueprint)
    problems.register(app)
    return app


def _prepare_templates(app: Flask, clock: Callable[[], int]) -> None:
    environment = app.jinja_env
    environment.undefined = StrictUndefined
    environment.trim_blocks = environment.lstrip_blocks = True
    environment.globals.update(
        asset=assets.asset, clock=clock, form_token=access.form_token, stamp=words.stamp, visitor=access.visitor
    )
    environment.filters.update(
        many=words.count,
        flow=sentences.flow,
        day=words.day_words,
        duration=words.duration,
        figure=words.figure,
        percent=words.percent,
    )
