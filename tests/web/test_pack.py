import html
import re

from web.builders import DAY_MS, NOW_MS, ridge, rows


def text_of(page: str) -> str:
    return html.unescape(re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", page))).replace("\u00a0", " ")


def test_without_packs_the_page_says_what_to_do(hub):
    assert "packfold inventory load FILE" in text_of(hub.client().get("/packs").text)


def test_packs_are_listed_with_their_place(hub):
    hub.load(ridge())
    hub.load(rows(pack=[{"label": "S-01", "cells_in_series": 4, "rated_capacity_ah": 2.0}]))
    words = text_of(hub.client().get("/packs").text)
    assert "R-07 8 cells HR6, 2.4 Ah rated. In ridge-east since 2 Apr 2026, 13:02 BST ." in words
    assert "S-01 4 cells, 2.0 Ah rated. Not fitted to any node now." in words


def test_cycles_are_the_charge_taken_out_over_the_rated_capacity(shown):
    # Equivalent full cycles = discharged charge / rated capacity, as the interface defines them.
    client = shown.client()
    rows = client.get("/api/v1/throughput?pack=R-07").json["rows"]
    discharged = sum(row["discharge_ah"] for row in rows)
    words = text_of(client.get("/packs/R-07").text)
    assert f"Equivalent full cycles {discharged / 2.4:.1f}" in words
    assert f"Charge taken out {discharged:.1f} Ah" in words
    assert "9 days, 24 May 2026 to 1 Jun 2026" in words


def test_a_pack_that_did_nothing_has_unknown_cycles_and_not_nought(hub):
    hub.load(ridge())
    words = text_of(hub.client().get("/packs/R-07").text)
    assert "Equivalent full cycles not known" in words
    assert "Capacity not known" in words


def test_a_pack_that_moved_shows_both_places_and_all_its_charges(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 6)
    hub.load(
        rows(
            node=[{"name": "ridge-west", "site": "ridge"}],
            fitting=[{"pack": "R-07", "node": "ridge-west", "start_ms": NOW_MS - DAY_MS}],
        )
    )
    page = hub.client().get("/packs/R-07").text
    assert page.index("/nodes/ridge-west") < page.index("/nodes/ridge-east")
    assert page.count('<span class="number">') == 7


def test_a_label_with_signs_has_a_page(hub):
    hub.load(ridge(pack="R 7//ä?#"))
    client = hub.client()
    address = re.search(r'href="(/packs/R[^"]+)"', client.get("/packs").text).group(1)
    answer = client.get(address)
    assert answer.status_code == 200
    assert "R 7//ä?#" in html.unescape(answer.text)


def test_a_pack_that_does_not_exist(shown):
    answer = shown.client().get("/packs/R-99")
    assert answer.status_code == 404
    assert "Known packs: R-07" in answer.text
