import pytest
from web.builders import ridge

from hub.errors import PackfoldError, StoreError

# RFC 9457, section 3.1: the members of a problem details object.
MEMBERS = {"type", "title", "status", "detail"}


def check(answer, status):
    assert answer.status_code == status
    assert answer.mimetype == "application/problem+json"
    assert set(answer.json) == MEMBERS
    assert answer.json["status"] == status
    assert answer.json["detail"].endswith((".", ")"))


@pytest.mark.parametrize(
    ("method", "path", "status"),
    [
        ("GET", "/api/v1/nodes/nobody", 404),
        ("GET", "/api/v1/packs/none", 404),
        ("GET", "/api/v1/nonsense", 404),
        ("GET", "/api/v2/nodes", 404),
        ("GET", "/api/v1/days?node=nobody", 400),
        ("GET", "/api/v1/days?from=soon", 400),
        ("GET", "/api/v1/days?cursor=x", 400),
        ("GET", "/api/v1/days?limit=0", 400),
        ("GET", "/api/v1/days?nodes=ridge-east", 400),
        ("POST", "/api/v1/nodes", 403),
    ],
)
def test_the_interface_answers_every_error_as_a_problem(shown, method, path, status):
    check(shown.client().open(path, method=method), status)


def test_without_login_the_interface_answers_a_problem_too(shown):
    client = shown.app().test_client()
    check(client.get("/api/v1/nodes"), 401)
    check(client.get("/api/v1/nonsense"), 401)


def test_a_wrong_method_with_a_token_says_which_ones_there_are(shown):
    header = {"Authorization": f"Bearer {shown.grant('token')}"}
    answer = shown.app().test_client().delete("/api/v1/nodes", headers=header)
    check(answer, 405)
    assert "GET" in answer.headers["Allow"]


def test_pages_answer_errors_in_plain_words(shown):
    answer = shown.client().get("/nothing")
    assert answer.status_code == 404
    assert answer.mimetype == "text/html"
    assert "There is nothing at this address." in answer.text


@pytest.mark.parametrize(
    ("error", "status", "words"),
    [
        (StoreError("The database is busy with another writer."), 503, "busy with another writer"),
        (PackfoldError("Something of ours."), 500, "Something of ours"),
        (ZeroDivisionError("a secret detail"), 500, "Something went wrong in the hub"),
    ],
)
def test_what_goes_wrong_inside_is_told_without_its_insides(hub, monkeypatch, error, status, words):
    hub.load(ridge())
    app = hub.app()
    app.config["PROPAGATE_EXCEPTIONS"] = False

    def fail(*_):
        raise error

    monkeypatch.setattr(app.extensions["packfold"].book, "read", fail)
    client = app.test_client()
    client.set_cookie("packfold-session", hub.grant("session"))
    answer = client.get("/")
    assert answer.status_code == status
    assert words in answer.text
    assert "a secret detail" not in answer.text
    assert "Traceback" not in answer.text


def test_a_form_that_is_too_long_is_refused_in_plain_words(shown):
    answer = shown.client().post("/export/token", data={"label": "x" * 2_000_000})
    assert answer.status_code == 413
    assert "more than this form takes" in answer.text
