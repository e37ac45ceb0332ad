import re

import pytest
from web.builders import Hub, a_hub, ridge

from hub.settings import Web
from hub.web.access import OPEN, safe_target

# What must not be seen without login: the store holds these words.
SECRETS = ("ridge-east", "R-07", "HR6", "2.4 Ah")


@pytest.fixture(scope="module")
def guarded(tmp_path_factory):
    found = a_hub(tmp_path_factory.mktemp("guarded"))
    found.load(ridge())
    found.account()
    yield found
    found.database.close()


def example(rule) -> str:
    """An address of a route, with names that exist."""
    values = {
        "name": "ridge-east",
        "label": "R-07",
        "table": "days",
        "form": "csv",
        "secret": "guess",
        "digest": "0",
    }
    return re.sub(r"<(?:[^:<>]*(?:\([^)]*\))?:)?([a-z_]+)>", lambda m: values[m.group(1)], rule.rule)


def test_no_route_gives_data_without_login(guarded):
    app = guarded.app()
    walked = 0
    for rule in app.url_map.iter_rules():
        for method in rule.methods - {"HEAD", "OPTIONS"}:
            address = example(rule)
            answer = app.test_client().open(address, method=method)
            # A redirection repeats the address that was asked for, which is no news to whoever asked.
            told = answer.text.replace(address, "")
            assert not any(word in told for word in SECRETS), (rule.rule, method)
            if rule.endpoint not in OPEN:
                if method == "POST":
                    assert answer.status_code == 403, rule.rule
                elif rule.rule.startswith("/api/"):
                    assert answer.status_code == 401, rule.rule
                    assert answer.mimetype == "application/problem+json"
                    assert answer.headers["WWW-Authenticate"].startswith("Bearer")
                else:
                    assert answer.status_code == 303, rule.rule
                    assert answer.headers["Location"].startswith("/login")
            walked += 1
    assert walked > 15


def test_addresses_that_do_not_exist_look_the_same_without_login(guarded):
    answer = guarded.app().test_client().get("/nodes/ridge-west")
    assert answer.status_code == 303


def test_only_pages_without_data_are_open():
    assert {"assets.serve", "health.healthz", "login.ask", "login.check", "login.enter"} == OPEN


def test_a_token_opens_the_interface_and_a_wrong_one_does_not(guarded):
    token = guarded.grant("token")
    client = guarded.app().test_client()
    assert client.get("/api/v1/nodes", headers={"Authorization": f"Bearer {token}"}).status_code == 200
    assert client.get("/api/v1/nodes", headers={"Authorization": f"bearer {token}"}).status_code == 200
    for header in (f"Bearer {token}x", "Bearer ", f"Basic {token}", token, "Bearer"):
        assert client.get("/api/v1/nodes", headers={"Authorization": header}).status_code == 401


def test_secrets_of_one_kind_do_not_open_another_door(guarded):
    app = guarded.app()
    for kind in ("link", "token"):
        client = app.test_client()
        client.set_cookie("packfold-session", guarded.grant(kind))
        assert client.get("/").status_code == 303
    for kind in ("link", "session"):
        header = {"Authorization": f"Bearer {guarded.grant(kind)}"}
        assert app.test_client().get("/api/v1/nodes", headers=header).status_code == 401


def test_a_wrong_token_is_refused_even_with_a_login(guarded):
    answer = guarded.client().get("/api/v1/nodes", headers={"Authorization": "Bearer wrong"})
    assert answer.status_code == 401


def test_a_login_ends_when_its_time_is_over(hub):
    hub.load(ridge())
    secret = hub.grant("session", lasts_ms=1000)
    client = hub.app().test_client()
    client.set_cookie("packfold-session", secret)
    assert client.get("/packs").status_code == 200
    hub.clock.now_ms += 1001
    assert client.get("/packs").status_code == 303


def test_the_way_back_after_login_is_remembered(guarded):
    answer = guarded.app().test_client().get("/nodes/ridge-east?range=7d")
    assert answer.headers["Location"] == "/login?next=/nodes/ridge-east?range%3D7d"


def token_on(page: str) -> str:
    return re.search(r'name="form_token" value="([^"]+)"', page).group(1)


def test_forms_need_the_token_of_this_browser(guarded):
    client, other = guarded.client(), guarded.client()
    token = token_on(client.get("/export").text)
    assert client.post("/export/token", data={"form_token": token}).status_code == 200
    for wrong in ("", "x", token[:-1], f"{token}0", token_on(other.get("/export").text)):
        assert client.post("/export/token", data={"form_token": wrong}).status_code == 403
    assert client.post("/export/token").status_code == 403


def test_each_page_has_another_token_and_all_are_good(guarded):
    client = guarded.client()
    tokens = {token_on(client.get("/export").text) for _ in range(3)}
    assert len(tokens) == 3
    for token in tokens:
        assert client.post("/export/token", data={"form_token": token}).status_code == 200


@pytest.mark.parametrize(
    "headers",
    [
        {"Sec-Fetch-Site": "cross-site"},
        {"Sec-Fetch-Site": "same-site"},
        {"Origin": "https://evil.example"},
        {"Origin": "null"},
        {"Origin": "http://localhost:8740"},
        {"Origin": "http://localhost.evil.example"},
        {"Origin": "http://[broken"},
    ],
)
def test_forms_of_other_sites_are_refused_whatever_their_token(guarded, headers):
    client = guarded.client()
    token = token_on(client.get("/export").text)
    answer = client.post("/export/token", data={"form_token": token}, headers=headers)
    assert answer.status_code == 403
    assert "another site" in answer.text


def test_forms_of_this_site_are_taken(guarded):
    client = guarded.client()
    for headers in ({"Origin": "http://localhost"}, {"Sec-Fetch-Site": "same-origin"}, {"Sec-Fetch-Site": "none"}):
        token = token_on(client.get("/export").text)
        assert client.post("/export/token", data={"form_token": token}, headers=headers).status_code == 200


def test_a_foreign_host_name_is_refused(guarded):
    answer = guarded.client().get("/", headers={"Host": "evil.example"})
    assert answer.status_code == 400
    assert "web.base_url" in answer.text
    assert not any(word in answer.text for word in SECRETS)


def https_hub(folder) -> Hub:
    return a_hub(folder, Web(base_url="https://packs.home.example"))


def test_behind_tls_cookies_are_marked_and_bound_to_the_host(tmp_path):
    hub = https_hub(tmp_path)
    client = hub.app().test_client()
    cookie = client.get("/login", headers={"Host": "packs.home.example"}).headers["Set-Cookie"]
    assert cookie.startswith("__Host-packfold-visit=")
    for part in ("Secure", "HttpOnly", "SameSite=Lax", "Path=/"):
        assert part in cookie
    hub.database.close()


def test_behind_tls_a_form_with_the_public_origin_is_taken(tmp_path):
    hub = https_hub(tmp_path)
    client = hub.app().test_client()
    client.set_cookie("__Host-packfold-session", hub.grant("session"), domain="packs.home.example")
    base = {"base_url": "https://packs.home.example"}
    token = token_on(client.get("/export", **base).text)
    for origin, status in (("https://packs.home.example", 200), ("http://other.example", 403)):
        answer = client.post("/export/token", data={"form_token": token}, headers={"Origin": origin}, **base)
        assert answer.status_code == status
    hub.database.close()


@pytest.mark.parametrize(
    ("asked", "target"),
    [
        ("/nodes/ridge-east?range=7d", "/nodes/ridge-east?range=7d"),
        (None, "/"),
        ("", "/"),
        ("//evil.example/x", "/"),
        ("/\\evil.example", "/"),
        ("https://evil.example", "/"),
        ("javascript:alert(1)", "/"),
        ("/ok\r\nSet-Cookie: a=b", "/"),
        ("/a\\b", "/"),
        ("nodes", "/"),
    ],
)
def test_nobody_is_sent_elsewhere_after_login(asked, target):
    assert safe_target(asked) == target
