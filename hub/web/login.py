"""Coming in and leaving: by name and password, or by a link that works once."""

from flask import Blueprint, Response, redirect, render_template, request, url_for
from werkzeug.wrappers import Response as BaseResponse

from hub.store import people
from hub.web import passwords
from hub.web.access import DAY_MS, cookie_name, safe_target, set_cookie, visitor
from hub.web.desk import desk
from hub.web.words import duration

blueprint = Blueprint("login", __name__)


@blueprint.get("/login")
def ask() -> BaseResponse:
    """The login form; whoever is logged in already goes on."""
    if visitor().account is not None:
        return redirect(safe_target(request.args.get("next")), code=303)
    return _form()


@blueprint.post("/login")
def check() -> BaseResponse:
    """Check name and password; a wrong one costs the same time whether the name exists or not."""
    here = desk()
    name = request.form.get("name", "").strip()[:64]
    password = request.form.get("password", "")[:1024]
    address = request.remote_addr or ""
    now_ms = here.clock()
    wait_ms = here.throttle.wait_ms(name, address, now_ms)
    if wait_ms:
        response = _form(f"Too many tries. Wait {duration(wait_ms)}, then try again.", name, status=429)
        response.headers["Retry-After"] = str(-(-wait_ms // 1000))
        return response
    with here.database.read() as connection:
        account = people.account(connection, name)
    if not passwords.matches(account.password_hash if account else None, password) or account is None:
        here.throttle.failed(name, address, now_ms)
        return _form("The name or the password is not right.", name, status=403)
    here.throttle.succeeded(name, address)
    return _come_in(account.id, safe_target(request.form.get("next")))


@blueprint.get("/enter/<secret>")
def enter(secret: str) -> BaseResponse:
    """Use up a sign-in link. A browser that only looks ahead does not use it up."""
    here = desk()
    looks_ahead = (
        request.method == "HEAD"
        or "prefetch" in request.headers.get("Sec-Purpose", request.headers.get("Purpose", "")).lower()
        or request.headers.get("Sec-Fetch-Mode", "navigate") != "navigate"
    )
    if looks_ahead:
        return Response(status=204)
    with here.database.write() as connection:
        account = people.holder(connection, secret, "link", here.clock())
        used_up = account is not None and people.withdraw(connection, secret)
    if account is None or not used_up:
        return _form("This sign-in link was used before or is too old. Log in with your name and password.", status=403)
    return _come_in(account.id, "/")


@blueprint.post("/logout")
def leave() -> BaseResponse:
    """End this login."""
    if visitor().by == "session":
        with desk().database.write() as connection:
            people.withdraw(connection, visitor().secret)
    response = redirect(url_for("login.ask"), code=303)
    response.delete_cookie(cookie_name("session"), path="/", httponly=True, samesite="Lax")
    return response


def _come_in(account_id: int, target: str) -> BaseResponse:
    here = desk()
    days = here.settings.web.session_days
    with here.database.write() as connection:
        secret = people.grant(connection, account_id, "session", here.clock(), lasts_ms=round(days * DAY_MS))
    response = redirect(target, code=303)
    set_cookie(response, "session", secret, round(days * DAY_MS / 1000))
    return response


def _form(complaint: str = "", name: str = "", status: int = 200) -> Response:
    with desk().database.read() as connection:
        nobody = not people.accounts(connection)
    target = safe_target(request.values.get("next"))
    page = render_template("login.html", complaint=complaint, name=name, target=target, nobody=nobody)
    return Response(page, status=status)
