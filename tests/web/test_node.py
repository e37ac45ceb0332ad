import html
import re

import pytest
from web.builders import DAY_MS, MINUTE_MS, NOW_MS, ridge, rows

from hub.store import intake, receipts
from hub.web import node


def text_of(page: str) -> str:
    return html.unescape(re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", page))).replace("\u00a0", " ")


def page(hub, query="", name="ridge-east") -> str:
    answer = hub.client().get(f"/nodes/{name}{query}")
    assert answer.status_code == 200, answer.text
    return answer.text


@pytest.mark.parametrize("kind", ["1d", "7d", "28d", "all"])
def test_each_range_draws_and_tabulates(shown, kind):
    text = page(shown, f"?range={kind}")
    assert text.count('class="paper"') == 2
    assert "The same figures as a table" in text
    assert '<table class="folding">' in text
    assert "Day by day" in text
    assert f'href="?range={kind}#plot" aria-current="true"' in text


def test_the_page_tells_now_today_and_the_zone(shown):
    words = text_of(page(shown))
    assert "Times are Europe/London, now BST (UTC+01:00)." in words
    assert re.search(r"Cell voltage 1\.\d{3} V", words)
    assert "Measured 13:01 BST , 1 min ago." in words
    assert "Today so far:" in words


def test_a_whole_day_can_be_asked_for_and_left_again(shown):
    text = page(shown, "?range=1d&to=2026-05-28")
    assert "Thu\u00a028\u00a0May\u00a02026" in text
    assert 'href="?range=1d&amp;to=2026-05-27#plot"' in text
    assert 'href="?range=1d&amp;to=2026-05-29#plot"' in text
    assert 'href="?range=7d&amp;to=2026-05-28#plot"' in text


def test_charges_open_to_their_evidence(shown):
    text = page(shown, "?range=7d")
    assert text.count("<details>") >= 7
    words = text_of(text)
    assert "Full, quite sure (0.93); ended as the voltage stopped rising" in words
    assert "voltage drop 4.2 mV a cell" in words


def test_days_have_units_and_reasons(shown):
    text = page(shown)
    assert "Charge in, Ah" in text
    assert 'href="#note-a"' in text
    assert 'id="note-a"' in text
    assert "no load is stated for it in the inventory" in text


def test_every_time_gives_utc(shown):
    times = re.findall(r'<time datetime="([^"]+)" title="([^"]+)">', page(shown, "?range=7d"))
    assert len(times) > 10
    for machine, utc in times:
        assert re.fullmatch(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\dZ", machine)
        assert utc == machine.replace("T", " ").replace("Z", " UTC")


def test_a_node_nobody_has_heard_says_what_to_do(hub):
    hub.load(ridge())
    for kind in ("1d", "7d", "28d", "all"):
        words = text_of(page(hub, f"?range={kind}"))
        assert "packfold credential add ridge-east" in words
        assert "no readings here" in words
        assert "Figures of these days are not known: there are no readings." in words


def test_readings_without_figures_say_what_makes_them_known(hub):
    hub.load(ridge())
    hub.append("ridge-east", {NOW_MS - 1000: {"pack_voltage": 10.4}})
    words = text_of(page(hub))
    assert "none have been computed" in words
    assert "packfold analyse" in words


def test_a_node_without_a_pack_shows_what_it_measures(hub):
    hub.load(ridge(pack=None))
    hub.simulate("ridge-east", 3, cells=None, pack=None)
    words = text_of(page(hub))
    assert "Pack voltage" in words
    assert "None is known. Add a [[fitting]]" in words
    assert "none fitted" in words


def test_the_link_tells_what_is_missing(hub):
    hub.load(ridge())
    node_id = hub.ids["ridge-east"]
    with hub.database.write() as connection:
        receipts.note(connection, node_id, 17, [1, 2, 3, 7, 8, 12])
        intake.note_presence(connection, node_id, "offline", NOW_MS - 5 * MINUTE_MS)
    words = text_of(page(hub))
    assert "Boot 17: 6 messages missing, 4 to 6, 9 to 11" in words
    assert "offline since 12:57 BST" in words
    assert "packfold import FILE --node ridge-east" in words


def test_names_nobody_knows_are_shown(hub):
    hub.load(ridge())
    with hub.database.write() as connection:
        connection.exec_driver_sql(
            "INSERT INTO unknown_name (node_id, name, count, last_ms) VALUES (1, 'wind<speed>', 3, 0)"
        )
    text = page(hub)
    assert "wind&lt;speed&gt; (3" in text


def test_what_was_set_aside_is_listed_with_its_reason(hub):
    hub.load(ridge())
    hub.set_aside("ridge-east", "future", "A reading is dated <tomorrow>.", 40)
    text = page(hub)
    assert "40 dated in the future" in text_of(text)
    assert text.count("dated &lt;tomorrow&gt;") == 30


def test_all_packs_that_were_in_it_are_listed(hub):
    hub.load(ridge())
    hub.load(
        rows(
            pack=[{"label": "R 08", "cells_in_series": 4, "rated_capacity_ah": 2.0}],
            fitting=[{"pack": "R 08", "node": "ridge-east", "start_ms": NOW_MS - DAY_MS}],
        )
    )
    text = page(hub)
    assert text.index('href="/packs/R%2008"') < text.index('href="/packs/R-07"')


def test_a_long_life_is_drawn_from_its_days(hub, monkeypatch):
    hub.load(ridge())
    hub.simulate("ridge-east", 5)
    monkeypatch.setattr(node, "READINGS_MOST", 1440)
    words = text_of(page(hub, "?range=all"))
    assert "Charge a day: in (bold) and out" in words


def test_a_year_of_days_is_not_all_listed(hub):
    hub.load(ridge())
    hub.simulate("ridge-east", 40, step_s=3600)
    text = page(hub, "?range=all")
    assert text.count('<tr><th scope="row"><a href="?range=1d') == 28
    assert "earlier days left out" in text_of(text)


@pytest.mark.parametrize("path", ["/nodes/nobody", "/nodes/Ridge-East", "/nodes/%00", "/nodes/%3Cb%3E"])
def test_a_node_that_does_not_exist(shown, path):
    answer = shown.client().get(path)
    assert answer.status_code == 404
    assert "There is no node" in answer.text
    assert "<b>" not in answer.text


@pytest.mark.parametrize("query", ["?range=2d", "?to=soon", "?range=7d&to=2026-13-01"])
def test_a_range_that_does_not_exist(shown, query):
    answer = shown.client().get(f"/nodes/ridge-east{query}")
    assert answer.status_code == 400
    assert re.search("The ranges are|is not a date", html.unescape(answer.text))


def test_a_date_long_ago_is_empty_paper(shown):
    assert "no readings here" in page(shown, "?range=7d&to=2001-01-01")
