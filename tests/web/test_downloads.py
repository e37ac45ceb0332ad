import csv
import io
import json
import re

import pyarrow.parquet as pq
import pytest

from hub.store import export
from hub.web import downloads


def test_every_table_can_be_taken_along_in_every_form(shown):
    client = shown.client()
    page = client.get("/export").text
    for table in export.TABLES.values():
        for form in export.FORMATS:
            address = f"/export/{table.name}.{form}"
            assert f'href="{address}"' in page
        assert table.description in page


@pytest.mark.parametrize("table", ["days", "charges", "throughput"])
def test_the_three_forms_hold_the_same_rows(shown, table):
    client = shown.client()
    expected = client.get(f"/api/v1/{table}").json["rows"]
    assert json.loads(client.get(f"/export/{table}.json").data) == expected
    text = client.get(f"/export/{table}.csv").text
    heading, *lines = csv.reader(io.StringIO(text))
    assert heading == list(export.TABLES[table].columns)
    assert len(lines) == len(expected)
    parquet = pq.read_table(io.BytesIO(client.get(f"/export/{table}.parquet").data))
    assert parquet.num_rows == len(expected)


def test_a_download_is_a_file_with_its_name_and_length(shown):
    answer = shown.client().get("/export/days.csv")
    assert answer.headers["Content-Disposition"] == 'attachment; filename="packfold-days.csv"'
    assert int(answer.headers["Content-Length"]) == len(answer.data)


def test_a_choice_is_kept_in_the_links(shown):
    client = shown.client()
    page = client.get("/export?node=ridge-east&from=2026-05-30&to=&pack=").text
    address = re.search(r'href="(/export/days\.json[^"]*)"', page).group(1).replace("&amp;", "&")
    assert address == "/export/days.json?node=ridge-east&from=2026-05-30"
    assert [row["date"] for row in client.get(address).json] == ["2026-05-30", "2026-05-31", "2026-06-01"]


@pytest.mark.parametrize(
    ("path", "status"),
    [
        ("/export/days.xls", 404),
        ("/export/nonsense.csv", 404),
        ("/export/days.csv?node=nobody", 400),
        ("/export/days.csv?from=soon", 400),
    ],
)
def test_what_cannot_be_taken_along_is_told(shown, path, status):
    answer = shown.client().get(path)
    assert answer.status_code == status
    assert "Content-Disposition" not in answer.headers


def test_no_more_than_two_at_a_time(shown, monkeypatch):
    class Busy:
        def acquire(self, **_):
            return False

    monkeypatch.setattr(downloads, "_TWO_AT_A_TIME", Busy())
    answer = shown.client().get("/export/days.csv")
    assert answer.status_code == 503
    assert "Two tables are being written" in answer.text


def test_a_failed_download_makes_way_for_the_next(shown):
    client = shown.client()
    for _ in range(5):
        assert client.get("/export/days.csv?node=nobody").status_code == 400
    assert client.get("/export/days.csv").status_code == 200


def form_token(client):
    return re.search(r'name="form_token" value="([^"]+)"', client.get("/export").text).group(1)


def test_a_token_is_made_shown_once_and_ended(hub):
    client = hub.client()
    page = client.post("/export/token", data={"form_token": form_token(client), "label": "<night job>"})
    assert "no-store" in page.headers["Cache-Control"]
    assert "&lt;night job&gt;" in page.text
    token = re.search(r'<code class="secret">([^<]+)</code>', page.text).group(1)
    assert token not in client.get("/export").text
    program = hub.app().test_client()
    header = {"Authorization": f"Bearer {token}"}
    assert program.get("/api/v1/nodes", headers=header).status_code == 200
    ended = client.post("/export/token/end", data={"form_token": form_token(client), "secret": f" {token} "})
    assert "The token has ended." in ended.text
    assert program.get("/api/v1/nodes", headers=header).status_code == 401
    again = client.post("/export/token/end", data={"form_token": form_token(client), "secret": token})
    assert again.status_code == 400


def test_ending_a_token_cannot_end_a_login(hub):
    client = hub.client()
    secret = client.get_cookie("packfold-session").value
    answer = client.post("/export/token/end", data={"form_token": form_token(client), "secret": secret})
    assert answer.status_code == 400
    assert client.get("/packs").status_code == 200
