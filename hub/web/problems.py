"""Errors: a sentence on a page for people, RFC 9457 problem details for programs."""

import json
from http import HTTPStatus

from flask import Flask, Response, render_template
from werkzeug.exceptions import HTTPException

from hub.errors import InventoryError, PackfoldError, StoreError, UsageError
from hub.web.access import is_interface

# Our own words for what the framework would say in its own.
SENTENCES = {
    400: "The hub could not read this request.",
    401: "Log in first.",
    403: "This is not allowed.",
    404: "There is nothing at this address.",
    405: "This address does not take that kind of request.",
    413: "That is more than this form takes.",
    500: "Something went wrong in the hub. Its log says what; nothing was lost.",
    503: "The database cannot be read at the moment. Try again shortly.",
}


class NotKnownError(PackfoldError):
    """A page about something that does not exist."""


def register(app: Flask) -> None:
    """Answer every error in plain words."""
    app.register_error_handler(HTTPException, _http)
    app.register_error_handler(PackfoldError, _ours)
    app.register_error_handler(Exception, _unexpected)


def _http(error: HTTPException) -> Response:
    status = error.code or 500
    own_words = error.description if error.description != type(error).description else None
    response = answer(status, own_words or SENTENCES.get(status, HTTPStatus(status).phrase + "."))
    for name, value in error.get_headers():
        if name.lower() not in {"content-type", "content-length"}:
            response.headers[name] = value
    if status == HTTPStatus.UNAUTHORIZED:
        response.headers["WWW-Authenticate"] = 'Bearer realm="packfold"'
    return response


def _ours(error: PackfoldError) -> Response:
    match error:
        case NotKnownError() | InventoryError():
            return answer(404, str(error))
        case UsageError():
            return answer(400, str(error))
        case StoreError():
            return answer(503, str(error))
        case _:
            return answer(500, str(error))


def _unexpected(error: Exception) -> Response:
    from flask import current_app

    current_app.logger.error("A page failed", exc_info=error)
    return answer(500, SENTENCES[500])


def answer(status: int, sentence: str) -> Response:
    """The error in the form that whoever asks can read."""
    title = HTTPStatus(status).phrase
    if is_interface():
        body = {"type": "about:blank", "title": title, "status": status, "detail": sentence}
        return Response(json.dumps(body, ensure_ascii=False), status, mimetype="application/problem+json")
    return Response(render_template("problem.html", status=status, sentence=sentence), status)
