import gzip

import pytest

PAGES = ["/", "/nodes/ridge-east", "/packs", "/export", "/nothing-here", "/api/v1/days", "/healthz"]


@pytest.mark.parametrize("path", PAGES)
def test_every_answer_is_fenced_in(shown, path):
    headers = shown.client().get(path).headers
    policy = headers["Content-Security-Policy"]
    assert "default-src 'none'" in policy
    assert "frame-ancestors 'none'" in policy
    assert "unsafe" not in policy
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert headers["Referrer-Policy"] == "same-origin"
    assert "no-cache" in headers["Cache-Control"]


@pytest.mark.parametrize("path", PAGES)
def test_no_page_needs_what_the_policy_forbids(shown, path):
    page = shown.client().get(path).text
    for forbidden in ("<script", "<style", " style=", " onclick=", "http://", "https://", "javascript:"):
        assert forbidden not in page.replace("http://127.0.0.1:8740", "").replace("http://www.w3.org/2000/svg", "")


def test_text_is_compressed_for_whoever_takes_it(shown):
    client = shown.client()
    plain = client.get("/nodes/ridge-east?range=28d")
    packed = client.get("/nodes/ridge-east?range=28d", headers={"Accept-Encoding": "gzip"})
    assert "Content-Encoding" not in plain.headers
    assert packed.headers["Content-Encoding"] == "gzip"
    assert "Accept-Encoding" in packed.headers["Vary"]
    assert len(packed.data) < len(plain.data) / 2
    assert b"ridge-east" in gzip.decompress(packed.data)


def test_whoever_refuses_compression_gets_none(shown):
    answer = shown.client().get("/", headers={"Accept-Encoding": "gzip;q=0"})
    assert "Content-Encoding" not in answer.headers


def test_the_first_page_is_light(shown):
    client = shown.client()
    page = client.get("/", headers={"Accept-Encoding": "gzip"})
    sheet = page_sheet(gzip.decompress(page.data).decode())
    assert len(page.data) + len(client.get(sheet, headers={"Accept-Encoding": "gzip"}).data) < 100_000


def page_sheet(page: str) -> str:
    return page.partition('rel="stylesheet" href="')[2].partition('"')[0]
