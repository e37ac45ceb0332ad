"""Tables to take along: the page with the links, the files, and tokens for programs that fetch them."""

import tempfile
import threading
from collections.abc import Iterator
from typing import IO, cast

from flask import Blueprint, Response, abort, render_template, request

from hub.store import export, inventory, people
from hub.web.access import DAY_MS, visitor
from hub.web.api import selection
from hub.web.desk import desk

blueprint = Blueprint("downloads", __name__)

KINDS = {"csv": "text/csv", "json": "application/json", "parquet": "application/vnd.apache.parquet"}
IN_MEMORY_BYTES = 4 * 1024 * 1024
PIECE_BYTES = 64 * 1024
# Writing a long table takes a while; the other threads stay free for pages.
_TWO_AT_A_TIME = threading.BoundedSemaphore(2)
TOKEN_DAYS = 365


@blueprint.get("/export")
def page() -> str:
    """What there is to take along."""
    return _page()


def _page(token: str = "", label: str = "") -> str:
    with desk().database.read() as connection:
        known = inventory.load(connection)
    return render_template(
        "export.html",
        tables=list(export.TABLES.values()),
        forms=export.FORMATS,
        nodes=[node.name for node in known.nodes],
        packs=[pack.label for pack in known.packs],
        chosen={name: request.args.get(name, "") for name in ("node", "pack", "from", "to")},
        query={name: text for name, text in request.args.items() if name in {"node", "pack", "from", "to"} and text},
        token=token,
        label=label,
        token_days=TOKEN_DAYS,
    )


@blueprint.get("/export/<table>.<form>")
def download(table: str, form: str) -> Response:
    """A table as a file; it is written whole before it is sent, so that an error is never half a file."""
    if form not in KINDS or table not in export.TABLES:
        abort(404, f"There is no table “{table}” as {form}. See the page “Take along” for those there are.")
    if not _TWO_AT_A_TIME.acquire(timeout=5):
        abort(503, "Two tables are being written already. Try again when they are done.")
    here = desk()
    # In the data folder: the system's folder for such files may be small and in memory.
    stream: IO[bytes] = tempfile.SpooledTemporaryFile(IN_MEMORY_BYTES, dir=str(here.database.data))  # noqa: SIM115 - closed by the answer
    try:
        with here.database.read() as connection:
            export.write(connection, table, selection(), cast("export.Format", form), stream)
        length = stream.tell()
        stream.seek(0)
    except BaseException:
        stream.close()
        raise
    finally:
        _TWO_AT_A_TIME.release()
    response = Response(_pieces(stream), mimetype=KINDS[form])
    response.content_length = length
    response.headers["Content-Disposition"] = f'attachment; filename="packfold-{table}.{form}"'
    # For an answer of which nobody reads the body.
    response.call_on_close(stream.close)
    return response


def _pieces(stream: IO[bytes]) -> Iterator[bytes]:
    with stream:
        while piece := stream.read(PIECE_BYTES):
            yield piece


@blueprint.post("/export/token")
def make_token() -> Response:
    """A token for a program, shown this once."""
    account = visitor().account
    if account is None:
        abort(401)
    label = request.form.get("label", "").strip()[:64] or "token"
    here = desk()
    with here.database.write() as connection:
        secret = people.grant(connection, account.id, "token", here.clock(), lasts_ms=TOKEN_DAYS * DAY_MS, label=label)
    response = Response(_page(secret, label))
    response.headers["Cache-Control"] = "no-store"
    return response


@blueprint.post("/export/token/end")
def end_token() -> Response:
    """End a token that its holder pastes in."""
    token = request.form.get("secret", "").strip()
    here = desk()
    with here.database.write() as connection:
        held = people.holder(connection, token, "token", here.clock())
        if held is None:
            abort(400, "This is not a token, or it has ended already.")
        people.withdraw(connection, token)
    return Response(render_template("done.html", sentence="The token has ended.", target="/export"))
