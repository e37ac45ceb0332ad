"""What every answer tells the browser: load nothing from elsewhere, run nothing inline, show nothing in a frame."""

import gzip

from flask import Response, request

# Form posts need their Origin header, which "no-referrer" would blank: hence "same-origin".
SECURITY = {
    "Content-Security-Policy": (
        "default-src 'none'; style-src 'self'; img-src 'self'; form-action 'self'; base-uri 'none'; "
        "frame-ancestors 'none'"
    ),
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "Referrer-Policy": "same-origin",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Permissions-Policy": "camera=(), geolocation=(), microphone=()",
}

COMPRESSED = frozenset(
    {"text/html", "text/css", "application/json", "application/problem+json", "image/svg+xml", "text/plain"}
)
WORTH_COMPRESSING_BYTES = 1024


def finish(response: Response) -> Response:
    """Add the headers, and compress text for whoever takes it."""
    for name, value in SECURITY.items():
        response.headers.setdefault(name, value)
    response.headers.setdefault("Cache-Control", "private, no-cache")
    return _compressed(response)


def _compressed(response: Response) -> Response:
    if response.mimetype not in COMPRESSED or response.is_streamed or response.status_code in {204, 304}:
        return response
    response.vary.add("Accept-Encoding")
    body = response.get_data()
    if len(body) < WORTH_COMPRESSING_BYTES or not request.accept_encodings["gzip"]:
        return response
    response.set_data(gzip.compress(body, compresslevel=5, mtime=0))
    response.headers["Content-Encoding"] = "gzip"
    return response
