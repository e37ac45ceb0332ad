import html

from web.builders import ridge

from hub.web.factory import create_app
from hub.web.hubneeds import hub_needs


def test_a_hub_that_is_well_or_runs_elsewhere_needs_nobody():
    assert hub_needs({}) == []
    assert hub_needs({"collector": {"problems": []}, "analysis": {"failures_in_a_row": 0, "last_error": ""}}) == []
    assert hub_needs({"collector": None, "analysis": {}}) == []


def test_what_the_collector_says_is_passed_on():
    (need,) = hub_needs({"collector": {"problems": ("The broker refuses the hub's password. Renew it.",)}})
    assert need.advice == "The broker refuses the hub's password. Renew it."
    assert need.urgent


def test_an_analysis_that_fails_is_told_with_its_reason():
    (need,) = hub_needs({"analysis": {"failures_in_a_row": 3, "last_error": "The disk is full."}})
    assert "failed 3\u00a0times in a row: The disk is full. Run" in need.advice
    (need,) = hub_needs({"analysis": {"failures_in_a_row": 1, "last_error": None}})
    assert "it did not say why" in need.advice


def test_it_stands_on_the_overview_without_a_link(hub):
    hub.load(ridge())
    status = {"collector": {"problems": ["The <b>broker</b> is gone."]}}
    app = create_app(hub.database, hub.settings, clock=hub.clock, status=lambda: status)
    client = app.test_client()
    client.set_cookie("packfold-session", hub.grant("session"))
    page = client.get("/").text
    assert "The hub does not receive as it should." in page
    assert html.escape("The <b>broker</b> is gone.") in page
    assert 'href="/nodes/"' not in page


def test_a_clock_that_is_behind_is_a_need_until_it_is_right():
    (need,) = hub_needs({"clock": {"problem": "Set the clock."}})
    assert need.kind == "receiving"
    assert hub_needs({"clock": {"problem": ""}}) == []
