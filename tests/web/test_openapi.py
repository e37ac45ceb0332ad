import re

import pytest

from hub.store.export import TABLES
from hub.web.openapi import document


@pytest.fixture
def described():
    return document("https://packs.home.example")


def references(node):
    if isinstance(node, dict):
        for key, value in node.items():
            if key == "$ref":
                yield value
            else:
                yield from references(value)
    elif isinstance(node, list):
        for value in node:
            yield from references(value)


def test_it_is_an_openapi_3_1_document(described):
    # OpenAPI Specification 3.1.0, section 4.8.1: openapi and info are required, info needs title and version.
    assert re.fullmatch(r"3\.1\.\d+", described["openapi"])
    assert {"title", "version"} <= set(described["info"])
    assert described["servers"] == [{"url": "https://packs.home.example"}]


def test_every_reference_leads_somewhere(described):
    found = list(references(described))
    assert found
    for reference in found:
        node = described
        assert reference.startswith("#/")
        for part in reference[2:].split("/"):
            node = node[part]


def test_every_operation_has_answers_and_every_path_its_parameters(described):
    for path, item in described["paths"].items():
        operation = item["get"]
        assert {"200", "401"} <= set(operation["responses"])
        assert all("description" in response for response in operation["responses"].values())
        named = {p["name"] for p in operation.get("parameters", ()) if p.get("in") == "path"}
        assert named == set(re.findall(r"\{(\w+)\}", path))


def test_it_describes_every_table_and_every_column(described):
    for table in TABLES.values():
        assert f"/api/v1/{table.name}" in described["paths"]
        schema = described["components"]["schemas"][f"{table.name}-row"]
        assert tuple(schema["properties"]) == table.columns


def test_it_describes_exactly_the_routes_there_are(shown, described):
    routes = {
        re.sub(r"<(?:path:)?([a-z]+)>", r"{\1}", rule.rule)
        for rule in shown.app().url_map.iter_rules()
        if rule.rule.startswith("/api/v1/") and "any(" not in rule.rule
    }
    told = {path for path in described["paths"] if path.rpartition("/")[2] not in TABLES}
    assert told == routes - {"/api/v1/", "/api/v1/openapi.json"}


def types_of(schema):
    kinds = schema["type"]
    return set(kinds) if isinstance(kinds, list) else {kinds}


@pytest.mark.parametrize("table", sorted(TABLES))
def test_rows_are_of_the_types_described(shown, described, table):
    schema = described["components"]["schemas"][f"{table}-row"]["properties"]
    names = {str: "string", float: "number", int: "number", type(None): "null"}
    for row in shown.client().get(f"/api/v1/{table}?limit=50").json["rows"]:
        for column, value in row.items():
            assert names[type(value)] in types_of(schema[column]), column


def test_the_document_is_served(shown):
    answer = shown.client().get("/api/v1/openapi.json")
    assert answer.status_code == 200
    assert answer.json["openapi"].startswith("3.1")
