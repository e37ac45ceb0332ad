import re

import pytest
from web.builders import NOW_MS, ridge

from hub.store import export

TABLES = sorted(export.TABLES)


def whole(hub, table, **selection):
    with hub.database.read() as connection:
        return [row for _, row in export.rows(connection, table, export.Selection(**selection))]


def paged(client, address, limit):
    found, following = [], f"{address}{'&' if '?' in address else '?'}limit={limit}"
    pages = 0
    while following:
        answer = client.get(following)
        assert answer.status_code == 200, answer.text
        assert len(answer.json["rows"]) <= limit
        found += answer.json["rows"]
        link = answer.headers.get("Link")
        assert (link is None) == (answer.json["next"] is None)
        following = re.fullmatch(r'<([^>]+)>; rel="next"', link).group(1) if link else None
        pages += 1
    return found, pages


@pytest.mark.parametrize("table", [name for name in TABLES if name != "readings"])
def test_pages_put_together_are_the_export(shown, table):
    found, pages = paged(shown.client(), f"/api/v1/{table}", 4)
    assert found == whole(shown, table)
    assert pages >= 2


def test_readings_put_together_are_the_export(shown):
    address = "/api/v1/readings?from=2026-05-31T22:00:00Z&node=ridge-east"
    found, pages = paged(shown.client(), address, 200)
    assert found == whole(shown, "readings", start="2026-05-31T22:00:00Z", node="ridge-east")
    assert pages == 5


@pytest.mark.parametrize("table", TABLES)
def test_rows_have_the_promised_columns(shown, table):
    row = shown.client().get(f"/api/v1/{table}?limit=1").json["rows"][0]
    assert tuple(row) == export.TABLES[table].columns


def test_a_selection_selects(shown):
    client = shown.client()
    rows = client.get("/api/v1/days?from=2026-05-30&to=2026-05-31").json["rows"]
    assert [row["date"] for row in rows] == ["2026-05-30", "2026-05-31"]
    assert client.get("/api/v1/days?node=&pack=").json["rows"] == whole(shown, "days")


def test_an_empty_table_is_an_empty_list(hub):
    client = hub.client()
    for table in TABLES:
        assert client.get(f"/api/v1/{table}").json == {"table": table, "rows": [], "next": None}
    assert client.get("/api/v1/nodes").json == {"nodes": []}
    assert client.get("/api/v1/packs").json == {"packs": []}


def test_a_misspelt_parameter_does_not_select_everything(shown):
    answer = shown.client().get("/api/v1/days?nod=ridge-east")
    assert answer.status_code == 400
    assert "It takes node, pack, from, to, limit, cursor." in answer.json["detail"]
    assert shown.client().get("/api/v1/nodes?limit=3").status_code == 400


@pytest.mark.parametrize("limit", ["0", "-1", "x", "1.5", "10001", "9" * 400, "²"])
def test_a_limit_that_is_none_is_refused(shown, limit):
    assert shown.client().get(f"/api/v1/days?limit={limit}").status_code == 400


def test_an_unchanged_answer_is_not_sent_again(shown):
    # RFC 9110, section 13.1.2: If-None-Match compares weakly.
    client = shown.client()
    first = client.get("/api/v1/days")
    tag = first.headers["ETag"]
    again = client.get("/api/v1/days", headers={"If-None-Match": tag})
    assert again.status_code == 304
    assert again.data == b""
    assert again.headers["ETag"] == tag
    packed = client.get("/api/v1/days", headers={"If-None-Match": tag, "Accept-Encoding": "gzip"})
    assert packed.status_code == 304
    assert client.get("/api/v1/days", headers={"If-None-Match": '"other"'}).status_code == 200


def test_a_change_changes_the_tag(hub):
    hub.load(ridge())
    client = hub.client()
    first = client.get("/api/v1/readings").headers["ETag"]
    hub.append("ridge-east", {NOW_MS - 1000: {"pack_voltage": 10.4}})
    assert client.get("/api/v1/readings").headers["ETag"] != first


def test_the_contents_lead_everywhere(shown):
    client = shown.client()
    for address in client.get("/api/v1/").json.values():
        assert client.get(address).status_code == 200, address
