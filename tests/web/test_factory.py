from jinja2 import StrictUndefined
from web.builders import ridge

from hub.web.factory import create_app


def test_every_template_can_be_read(hub):
    app = hub.app()
    names = app.jinja_env.list_templates()
    assert {"base.html", "overview.html", "node.html", "login.html"} <= set(names)
    for name in names:
        assert app.jinja_env.get_template(name)


def test_a_name_that_a_template_misses_is_an_error_and_not_a_blank(hub):
    assert hub.app().jinja_env.undefined is StrictUndefined


def test_the_status_of_other_parts_is_at_hand(hub):
    app = create_app(hub.database, hub.settings, clock=hub.clock, status=lambda: {"collector": {"stored": 3}})
    assert app.extensions["packfold"].status() == {"collector": {"stored": 3}}


def test_two_hubs_do_not_mix(hub, shown):
    hub.load(ridge(node="other-node"))
    assert "other-node" in hub.client().get("/").text
    assert "other-node" not in shown.client().get("/").text


def test_every_page_answers_head_as_it_answers_get(shown):
    client = shown.client()
    for path in ("/", "/nodes/ridge-east", "/packs", "/packs/R-07", "/export", "/api/v1/days"):
        answer = client.head(path)
        assert answer.status_code == 200
        assert answer.data == b""
