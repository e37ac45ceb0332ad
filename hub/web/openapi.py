"""The interface's description, made from the same table as the exports themselves."""

from typing import Any, Final

from hub import __version__
from hub.quantities import BY_NAME
from hub.store.export import TABLES, Table

PARAMETERS: Final = ("node", "pack", "from", "to", "limit", "cursor")

_DESCRIPTIONS = {
    "node": "Only rows of this node.",
    "pack": "Only rows of this pack.",
    "from": "From this date (inclusive) or RFC 3339 instant.",
    "to": "To this date (inclusive) or RFC 3339 instant.",
    "limit": "Most rows of one answer, 1 to 10000.",
    "cursor": "Continue behind the row that gave this cursor.",
}
_INSTANTS = frozenset({"time", "start", "end", "full_at", "at"})
_TEXTS = frozenset({"node", "pack", "ended_by", "set_aside"})
_UNITS = {
    "_wh": "Wh",
    "_ah": "Ah",
    "_v": "V",
    "_a": "A",
    "_c": "°C",
    "_it": "It, multiples of the reference test current",
    "_s": "s",
    "_ohm": "Ω",
}


def document(server: str) -> dict[str, Any]:
    """An OpenAPI 3.1 document."""
    return {
        "openapi": "3.1.0",
        "info": {
            "title": "Packfold",
            "version": __version__,
            "description": "Readings and figures of solar-charged NiMH packs. Times are UTC, current is positive into "
            "the pack, null means not known.",
        },
        "servers": [{"url": server}],
        "security": [{"token": []}, {"login": []}],
        "paths": {
            "/api/v1/nodes": _read("Nodes in short", "#/components/schemas/Nodes"),
            "/api/v1/nodes/{name}": _read("One node", "#/components/schemas/Object", "name"),
            "/api/v1/packs": _read("Packs in short", "#/components/schemas/Packs"),
            "/api/v1/packs/{label}": _read("One pack", "#/components/schemas/Object", "label"),
            **{f"/api/v1/{table.name}": _rows(table) for table in TABLES.values()},
        },
        "components": {
            "securitySchemes": {
                "token": {"type": "http", "scheme": "bearer"},
                "login": {"type": "apiKey", "in": "cookie", "name": "packfold-session"},
            },
            "parameters": {name: _parameter(name) for name in PARAMETERS},
            "schemas": {
                "Object": {"type": "object"},
                "Nodes": _list_of("nodes"),
                "Packs": _list_of("packs"),
                "Problem": _PROBLEM,
                **{f"{table.name}-row": _row(table) for table in TABLES.values()},
            },
        },
    }


_PROBLEM: dict[str, Any] = {
    "type": "object",
    "description": "RFC 9457 problem details.",
    "properties": {
        "type": {"type": "string"},
        "title": {"type": "string"},
        "status": {"type": "integer"},
        "detail": {"type": "string"},
    },
}


def _list_of(name: str) -> dict[str, Any]:
    return {"type": "object", "properties": {name: {"type": "array", "items": {"type": "object"}}}}


def _answers(schema: dict[str, Any]) -> dict[str, Any]:
    problem = {"content": {"application/problem+json": {"schema": {"$ref": "#/components/schemas/Problem"}}}}
    return {
        "200": {"description": "What was asked for", "content": {"application/json": {"schema": schema}}},
        "400": {"description": "The question cannot be answered as it stands", **problem},
        "401": {"description": "No login and no token", **problem},
        "404": {"description": "There is no such thing", **problem},
    }


def _read(summary: str, schema: str, part: str | None = None) -> dict[str, Any]:
    operation: dict[str, Any] = {"summary": summary, "responses": _answers({"$ref": schema})}
    if part is not None:
        operation["parameters"] = [{"name": part, "in": "path", "required": True, "schema": {"type": "string"}}]
    return {"get": operation}


def _rows(table: Table) -> dict[str, Any]:
    schema = {
        "type": "object",
        "required": ["table", "rows", "next"],
        "properties": {
            "table": {"const": table.name},
            "rows": {"type": "array", "items": {"$ref": f"#/components/schemas/{table.name}-row"}},
            "next": {"type": ["string", "null"], "description": "Cursor of the following page; null on the last."},
        },
    }
    return {
        "get": {
            "summary": table.description,
            "parameters": [{"$ref": f"#/components/parameters/{name}"} for name in PARAMETERS],
            "responses": _answers(schema),
        }
    }


def _parameter(name: str) -> dict[str, Any]:
    schema: dict[str, Any] = {"type": "string"}
    if name == "limit":
        schema = {"type": "integer", "minimum": 1, "maximum": 10_000, "default": 1000}
    return {"name": name, "in": "query", "description": _DESCRIPTIONS[name], "schema": schema}


def _row(table: Table) -> dict[str, Any]:
    return {
        "type": "object",
        "required": list(table.columns),
        "properties": {column: _column(column) for column in table.columns},
    }


def _column(name: str) -> dict[str, Any]:
    if name in _INSTANTS:
        return {"type": ["string", "null"], "format": "date-time"}
    if name == "date":
        return {"type": "string", "format": "date"}
    if name in _TEXTS:
        return {"type": ["string", "null"]}
    schema: dict[str, Any] = {"type": ["number", "null"]}
    unit = BY_NAME[name].unit if name in BY_NAME else next((u for end, u in _UNITS.items() if name.endswith(end)), "")
    return schema | ({"description": f"in {unit}"} if unit else {})
