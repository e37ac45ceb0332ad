"""The JSON interface: nodes, packs, and every export table under its own name."""

import json
from itertools import islice
from typing import Any
from urllib.parse import urlencode

from flask import Blueprint, Response, request, url_for

from hub.errors import UsageError
from hub.store import export, inventory
from hub.web import describe
from hub.web.desk import desk
from hub.web.openapi import PARAMETERS, document

blueprint = Blueprint("api", __name__, url_prefix="/api/v1")

ROWS_USUAL = 1000
ROWS_MOST = 10_000


@blueprint.get("/")
def contents() -> Response:
    """What there is, with addresses."""
    tables = {name: url_for("api.rows", table=name) for name in export.TABLES}
    return _json(
        {"openapi": url_for("api.openapi"), "nodes": url_for("api.nodes"), "packs": url_for("api.packs"), **tables}
    )


@blueprint.get("/openapi.json")
def openapi() -> Response:
    """The interface described in OpenAPI 3.1."""
    return _json(document(desk().settings.web.url))


@blueprint.get("/nodes")
def nodes() -> Response:
    """All nodes in short."""
    _refuse_unknown(())
    here = desk()
    with here.database.read() as connection:
        known, ids = inventory.load(connection), inventory.node_ids(connection)
    return _json({"nodes": describe.nodes(here.database, known, ids, here.clock())})


@blueprint.get("/nodes/<name>")
def node(name: str) -> Response:
    """All that is known of one node."""
    _refuse_unknown(())
    here = desk()
    with here.database.read() as connection:
        known, node_id = inventory.load(connection), inventory.node_id(connection, name)
    return _json(describe.node(here.database, known, name, node_id, here.clock()))


@blueprint.get("/packs")
def packs() -> Response:
    """All packs in short."""
    _refuse_unknown(())
    here = desk()
    with here.database.read() as connection:
        known = inventory.load(connection)
    return _json({"packs": describe.packs(known, here.clock())})


@blueprint.get("/packs/<path:label>")
def pack(label: str) -> Response:
    """All that is known of one pack."""
    _refuse_unknown(())
    here = desk()
    with here.database.read() as connection:
        known, ids = inventory.load(connection), inventory.pack_ids(connection)
    known.pack(label)
    return _json(describe.pack(here.database, known, label, ids[label], here.clock()))


@blueprint.get("/<any({}):table>".format(", ".join(f'"{name}"' for name in export.TABLES)))
def rows(table: str) -> Response:
    """Rows of an export table, a page at a time; ``next`` is the cursor of the following page, if there is one."""
    _refuse_unknown(PARAMETERS)
    limit = _limit()
    with desk().database.read() as connection:
        found = list(islice(export.rows(connection, table, selection(), request.args.get("cursor") or None), limit + 1))
    more = len(found) > limit
    page = found[:limit]
    cursor = page[-1][0] if more else None
    response = _json({"table": table, "rows": [row for _, row in page], "next": cursor})
    if cursor is not None:
        following = f"{request.path}?{urlencode({**request.args.to_dict(), 'cursor': cursor})}"
        response.headers["Link"] = f'<{following}>; rel="next"'
    return response


def selection() -> export.Selection:
    """The rows that the query asks for."""
    wanted = {name: request.args.get(name) or None for name in ("node", "pack", "from", "to")}
    return export.Selection(wanted["node"], wanted["pack"], wanted["from"], wanted["to"])


def _limit() -> int:
    text = request.args.get("limit", str(ROWS_USUAL))
    if not text.isdecimal() or not 1 <= int(text[:9]) <= ROWS_MOST:
        raise UsageError(f"limit must be a whole number from 1 to {ROWS_MOST}, not “{text}”.")
    return int(text)


def _refuse_unknown(known: tuple[str, ...]) -> None:
    """A misspelt parameter must not silently select everything."""
    for name in request.args:
        if name not in known:
            takes = f"It takes {', '.join(known)}." if known else "It takes none."
            raise UsageError(f"This address does not know the parameter “{name}”. {takes}")


def _json(content: dict[str, Any]) -> Response:
    body = json.dumps(content, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    response = Response(body, mimetype="application/json")
    response.add_etag(weak=True)
    response.make_conditional(request)
    return response
