import html
import re

from web.builders import DAY_MS, NOW_MS, ZONE, Weather, ridge, rows

from hub.web import overview


def text_of(page: str) -> str:
    return html.unescape(re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", page))).replace("\u00a0", " ")


def test_an_empty_store_explains_the_next_steps(hub):
    page = text_of(hub.client().get("/").text)
    for command in ("packfold inventory load", "packfold credential add", "packfold import", "packfold demo"):
        assert command in page


def test_an_empty_store_names_who_already_sends(hub):
    hub.set_aside("barn-door", "unknown-node", "There is no such node.", 2)
    assert "Messages already come from “barn-door” (2)" in text_of(hub.client().get("/").text)


def test_one_node_has_one_strip_and_one_story(shown):
    page = shown.client().get("/").text
    assert page.count('<article class="strip">') == 1
    words = text_of(page)
    assert re.search(r"Filled on (each|\d|none)", words)
    assert "Pack R-07, 8 cells of 2.4 Ah rated, since 2 Apr 2026." in words
    assert "Last heard 1 min ago." in words
    assert "1 node at 1 site, as of now." in words
    assert "Nothing needs you now." in words


def test_what_needs_a_person_comes_before_the_strips(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 8, weathers=[Weather(sun=0.1)])
    hub.append("ridge-east", {NOW_MS - 1000: {"pack_voltage": 11.0, "pack_current": 0.4, "pack_temperature": 57.0}})
    page = hub.client().get("/").text
    words = text_of(page)
    assert page.index("Needs you now") < page.index("Needs you before long") < page.index('<article class="strip">')
    assert "Pack R-07 on ridge-east is 57 °C while charging" in words
    assert "has not filled once in 7 days" in words
    assert "Local codes and licensed practice come first" in words


def test_a_silent_node_says_so_first(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 3, until_ms=NOW_MS - DAY_MS)
    state = re.search(r'<p class="state">([^<]+)', hub.client().get("/").text).group(1)
    assert state.startswith("Silent for 24")


def test_gaps_stay_blank(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 8, gaps=[(3.0, 2.5)])
    page = hub.client().get("/").text
    path = re.search(r'<path class="ink" d="([^"]+)"', page).group(1)
    assert path.count("M") == 2


def test_a_node_without_a_pack_says_what_to_do(hub):
    hub.load(ridge(pack=None))
    hub.simulate("ridge-east", 3, cells=None, pack=None)
    words = text_of(hub.client().get("/").text)
    assert "ridge-east sends readings, but no pack is fitted to it." in words
    assert "cell voltage not known: no pack fitted" in words


def test_names_of_the_inventory_cannot_become_markup(hub):
    site, label = '<img src=x onerror="alert(1)">', "R&<b>7</b>"
    hub.load(ridge(pack=label, site=site))
    hub.set_aside("<i>x</i>", "unknown-node", "no")
    client = hub.client()
    for path in ("/", "/nodes/ridge-east", "/packs", "/export", "/packs/R%26%3Cb%3E7%3C%2Fb%3E"):
        page = client.get(path)
        assert page.status_code == (200 if "%2F" not in path else page.status_code)
        for hostile in ("<img", "<b>7", "<i>x"):
            assert hostile not in page.text, path
    assert html.escape(site, quote=False).replace('"', "&#34;") in client.get("/").text


def test_many_nodes_are_turned_over_page_by_page(hub, monkeypatch):
    monkeypatch.setattr(overview, "STRIPS_A_PAGE", 2)
    names = [f"n{i}" for i in range(5)]
    hub.load(
        rows(
            site=[{"name": "s", "latitude": 0.0, "longitude": 0.0, "timezone": ZONE}],
            node=[{"name": name, "site": "s"} for name in names],
        )
    )
    client = hub.client()
    found = []
    for number in (1, 2, 3):
        found += re.findall(r'<h2><a href="/nodes/(n\d)">', client.get(f"/?page={number}").text)
    assert found == names
    for odd in ("0", "99", "x", "-1"):
        assert client.get(f"/?page={odd}").status_code == 200
