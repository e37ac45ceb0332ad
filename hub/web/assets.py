"""The style sheet and the mark. Their address holds a digest of their content, so that browsers may keep them."""

import hashlib
import mimetypes
from pathlib import Path

from flask import Blueprint, Response, abort, url_for

FOLDER = Path(__file__).parent / "static"
A_YEAR_S = 365 * 24 * 3600

blueprint = Blueprint("assets", __name__)
_CONTENT = {path.name: path.read_bytes() for path in sorted(FOLDER.iterdir()) if path.is_file()}
_DIGESTS = {name: hashlib.sha256(content).hexdigest()[:12] for name, content in _CONTENT.items()}


def asset(name: str) -> str:
    """The address of a file of the static folder."""
    return url_for("assets.serve", digest=_DIGESTS[name], name=name)


@blueprint.get("/look/<digest>/<name>")
def serve(digest: str, name: str) -> Response:
    """The file, for a year; an address of an older version gives the present file, not to be kept."""
    if name not in _CONTENT:
        abort(404)
    response = Response(_CONTENT[name], mimetype=mimetypes.guess_type(name)[0] or "application/octet-stream")
    fresh = digest == _DIGESTS[name]
    response.headers["Cache-Control"] = f"public, max-age={A_YEAR_S}, immutable" if fresh else "no-cache"
    return response
