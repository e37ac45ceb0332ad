"""Who is asking, and whether they may: logins, interface tokens, and forms that only our own pages can send."""

import hashlib
import hmac
import secrets
from dataclasses import dataclass
from typing import Literal
from urllib.parse import urlsplit

from flask import Response, abort, g, redirect, request, url_for
from werkzeug.wrappers import Response as BaseResponse

from hub.store import people
from hub.store.people import Account
from hub.web.desk import desk
from hub.web.hosts import hostname, trusted

# The only answers that need no login; none of them tells anything about nodes or packs.
OPEN = frozenset({"assets.serve", "health.healthz", "login.ask", "login.check", "login.enter"})
SAFE_METHODS = frozenset({"GET", "HEAD", "OPTIONS"})
FORM_FIELD = "form_token"
DAY_MS = 24 * 3_600_000


@dataclass(frozen=True, slots=True)
class Visitor:
    """Who asks.

    Attributes
    ----------
    account
        The person; ``None`` before login.
    secret
        Secret of the cookie that form tokens are made from; empty where the browser has none.
    by
        How they showed who they are.
    """

    account: Account | None = None
    secret: str = ""
    by: Literal["nothing", "session", "token"] = "nothing"


def visitor() -> Visitor:
    """Who sent the present request."""
    found = g.visitor
    assert isinstance(found, Visitor)
    return found


def secure() -> bool:
    """Whether people come through TLS, so that cookies must too."""
    return desk().settings.web.base_url.startswith("https://")


def cookie_name(kind: Literal["session", "visit"]) -> str:
    """The cookie's name; its prefix binds it to this host where TLS is used."""
    prefix = "__Host-" if secure() else ""
    return f"{prefix}packfold-{kind}"


def set_cookie(
    response: BaseResponse, kind: Literal["session", "visit"], secret: str, lasts_s: int | None = None
) -> None:
    """Give the browser a secret that scripts cannot read and other sites' forms do not send."""
    response.set_cookie(
        cookie_name(kind), secret, max_age=lasts_s, httponly=True, samesite="Lax", secure=secure(), path="/"
    )


def guard() -> BaseResponse | None:
    """Run before every request: refuse foreign host names and foreign forms, and send strangers to the login."""
    g.visitor = Visitor()
    here = desk()
    if not trusted(request.host, here.settings.web, here.hosts):
        abort(400, "The hub does not answer to this host name. Set web.base_url to the address you use.")
    g.visitor = _identify()
    if request.method not in SAFE_METHODS and visitor().by != "token":
        _check_form()
    if request.endpoint in OPEN or visitor().account is not None:
        return None
    if is_interface():
        abort(401, "Send a token as “Authorization: Bearer …”, or log in.")
    target = request.full_path.rstrip("?") if request.method in SAFE_METHODS else "/"
    return redirect(url_for("login.ask", next=None if target == "/" else target), code=303)


def is_interface() -> bool:
    """Whether a program asks rather than a person."""
    return request.path.startswith("/api/")


def _identify() -> Visitor:
    here = desk()
    scheme, _, token = request.headers.get("Authorization", "").partition(" ")
    if scheme.lower() == "bearer":
        with here.database.read() as connection:
            account = people.holder(connection, token.strip(), "token", here.clock())
        # A wrong token is refused even where a login came along: the sender meant the token.
        return Visitor(account, by="token" if account else "nothing")
    secret = request.cookies.get(cookie_name("session"), "")
    if secret:
        with here.database.read() as connection:
            account = people.holder(connection, secret, "session", here.clock())
        if account is not None:
            return Visitor(account, secret, "session")
    return Visitor(secret=request.cookies.get(cookie_name("visit"), ""))


def form_token() -> str:
    """A token for a form of the present page; each page has another, all belong to the browser's cookie."""
    secret = visitor().secret
    if not secret:
        # The first page before login: the cookie is given with the answer.
        secret = secrets.token_urlsafe(32)
        g.visitor = Visitor(secret=secret)
        g.new_visit = secret
    salt = secrets.token_urlsafe(9)
    return f"{salt}.{_seal(secret, salt)}"


def remember_visit(response: Response) -> Response:
    """Give the cookie that the page's form token was made from."""
    fresh = g.get("new_visit")
    if fresh:
        set_cookie(response, "visit", fresh)
    return response


def _seal(secret: str, salt: str) -> str:
    return hmac.new(secret.encode(), f"form {salt}".encode(), hashlib.sha256).hexdigest()


def _check_form() -> None:
    if request.headers.get("Sec-Fetch-Site", "same-origin") not in {"same-origin", "none"}:
        abort(403, "This form came from another site, so it was not used.")
    origin = request.headers.get("Origin")
    if origin is not None and not _own_origin(origin):
        abort(403, "This form came from another site, so it was not used.")
    salt, _, seal = request.form.get(FORM_FIELD, "").partition(".")
    secret = visitor().secret
    if not secret or not hmac.compare_digest(_seal(secret, salt), seal):
        abort(403, "This form is too old or came from elsewhere. Go back, load the page again, and send it once more.")


def _own_origin(origin: str) -> bool:
    try:
        parts = urlsplit(origin)
    except ValueError:
        return False
    if parts.netloc and parts.netloc.lower() == request.host.lower():
        return True
    base = urlsplit(desk().settings.web.base_url)
    return bool(base.hostname) and (parts.scheme, hostname(parts.netloc), parts.port) == (
        base.scheme,
        base.hostname,
        base.port,
    )


def safe_target(text: str | None) -> str:
    """Where to go after login: a path of this hub, or the overview."""
    if not text or not text.startswith("/") or text.startswith(("//", "/\\")) or not text.isprintable():
        return "/"
    parts = urlsplit(text)
    return text if not parts.scheme and not parts.netloc and "\\" not in text else "/"
