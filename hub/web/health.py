"""Whether the hub is alive and its database readable: for a watchdog, without login and without data."""

from flask import Blueprint, Response, jsonify

from hub.errors import StoreError
from hub.store import facts
from hub.web.desk import desk

blueprint = Blueprint("health", __name__)


@blueprint.get("/healthz")
def healthz() -> tuple[Response, int]:
    """``{"status": "ok"}`` or, with 503, what cannot be read."""
    try:
        with desk().database.read() as connection:
            facts.revision(connection)
    except StoreError:
        return jsonify(status="failing", database="not readable"), 503
    return jsonify(status="ok", database="readable"), 200
