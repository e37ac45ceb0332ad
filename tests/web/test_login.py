import re

import pytest
from web.builders import PASSWORD, ridge

from hub.store import people
from hub.web import throttle


@pytest.fixture
def door(hub):
    hub.load(ridge())
    hub.account()
    return hub


def log_in(client, name="keeper", password=PASSWORD, **more):
    page = client.get("/login").text
    token = re.search(r'name="form_token" value="([^"]+)"', page).group(1)
    return client.post("/login", data={"form_token": token, "name": name, "password": password, **more})


def test_the_right_password_opens_and_the_cookie_is_no_script_s_business(door):
    client = door.app().test_client()
    answer = log_in(client)
    assert answer.status_code == 303
    assert answer.headers["Location"] == "/"
    cookie = answer.headers["Set-Cookie"]
    for part in ("packfold-session=", "HttpOnly", "SameSite=Lax", f"Max-Age={30 * 86400}"):
        assert part in cookie
    assert client.get("/").status_code == 200


def test_only_a_digest_of_the_cookie_is_stored(door):
    client = door.app().test_client()
    secret = re.search(r"packfold-session=([^;]+)", log_in(client).headers["Set-Cookie"]).group(1)
    assert secret.encode() not in door.database.file.read_bytes()
    with door.database.read() as connection:
        assert people.holder(connection, secret, "session", door.clock()).name == "keeper"


def test_after_login_one_goes_where_one_wanted_to(door):
    client = door.app().test_client()
    assert log_in(client, next="/packs").headers["Location"] == "/packs"
    assert client.get("/login?next=/packs").headers["Location"] == "/packs"
    assert log_in(door.app().test_client(), next="//evil.example").headers["Location"] == "/"


@pytest.mark.parametrize(("name", "password"), [("keeper", "wrong"), ("nobody", PASSWORD), ("", ""), ("keeper", "")])
def test_what_is_wrong_is_not_told_apart(door, name, password):
    answer = log_in(door.app().test_client(), name, password)
    assert answer.status_code == 403
    assert "The name or the password is not right." in answer.text
    assert "Set-Cookie" not in answer.headers


def test_the_form_keeps_the_name_and_escapes_it(door):
    answer = log_in(door.app().test_client(), '"><b>x', "wrong")
    assert "&#34;&gt;&lt;b&gt;x" in answer.text
    assert "<b>x" not in answer.text


def test_guessing_is_slowed_down_and_the_wait_is_told(door):
    client = door.app().test_client()
    for _ in range(throttle.FREE_TRIES_NAME_AND_ADDRESS):
        assert log_in(client, password="wrong").status_code == 403
    answer = log_in(client)
    assert answer.status_code == 429
    assert answer.headers["Retry-After"] == "4"
    assert "Wait 4\u00a0s" in answer.text
    door.clock.now_ms += 4_001
    assert log_in(client).status_code == 303


def test_a_link_works_once(door):
    link = f"/enter/{door.grant('link')}"
    app = door.app()
    client = app.test_client()
    assert client.get(link).status_code == 303
    assert client.get("/").status_code == 200
    second = app.test_client().get(link)
    assert second.status_code == 403
    assert "used before" in second.text


def test_a_link_does_not_last_for_ever(door):
    link = f"/enter/{door.grant('link', lasts_ms=60_000)}"
    door.clock.now_ms += 60_001
    assert door.app().test_client().get(link).status_code == 403


@pytest.mark.parametrize(
    "headers", [{"Sec-Purpose": "prefetch;prerender"}, {"Purpose": "prefetch"}, {"Sec-Fetch-Mode": "no-cors"}]
)
def test_a_browser_that_looks_ahead_does_not_use_the_link_up(door, headers):
    link = f"/enter/{door.grant('link')}"
    client = door.app().test_client()
    assert client.get(link, headers=headers).status_code == 204
    assert client.head(link).status_code == 204
    assert client.get(link).status_code == 303


def test_logging_out_ends_the_login_everywhere(door):
    client = door.app().test_client()
    log_in(client)
    secret = client.get_cookie("packfold-session").value
    page = client.get("/packs").text
    token = re.search(r'name="form_token" value="([^"]+)"', page).group(1)
    answer = client.post("/logout", data={"form_token": token})
    assert answer.headers["Location"] == "/login"
    assert client.get("/").status_code == 303
    client.set_cookie("packfold-session", secret)
    assert client.get("/").status_code == 303


def test_a_new_password_ends_the_logins(door):
    client = door.app().test_client()
    log_in(client)
    door.account()
    assert client.get("/").status_code == 303


def test_with_nobody_registered_the_door_says_what_to_do(hub):
    assert "packfold user add" in hub.app().test_client().get("/login").text


def test_a_foreign_form_cannot_log_a_browser_in(door):
    client = door.app().test_client()
    answer = client.post("/login", data={"name": "keeper", "password": PASSWORD})
    assert answer.status_code == 403
    assert client.get("/").status_code == 303
