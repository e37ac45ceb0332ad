import http.client
import socket
import threading

import pytest
from web.builders import ridge

from hub.errors import PackfoldError
from hub.settings import Web
from hub.web import server
from hub.web.server import Pages


@pytest.fixture
def pages(hub):
    hub.load(ridge())
    found = Pages(hub.app(), Web(listen="127.0.0.1:0"))
    found.start()
    yield found
    found.stop()


def ask(port, path="/healthz", host="127.0.0.1", **headers):
    connection = http.client.HTTPConnection(host, port, timeout=10)
    connection.request("GET", path, headers=headers)
    answer = connection.getresponse()
    body = answer.read()
    connection.close()
    return answer, body


def test_pages_are_served_until_stopped(pages):
    port = pages.port
    answer, body = ask(port)
    assert answer.status == 200
    assert b'"ok"' in body
    assert answer.headers["Server"] == "packfold"
    pages.stop()
    with pytest.raises(ConnectionRefusedError):
        ask(port)


def test_the_strip_book_is_gathered_before_anybody_asks(pages):
    book = pages._app.extensions["packfold"].book
    for _ in range(300):
        if book._last is not None:
            break
        threading.Event().wait(0.01)
    assert book._last is not None


def test_an_answer_that_is_under_way_is_finished(hub):
    app = hub.app()
    began = threading.Event()
    read = hub.database.read

    def slowly():
        began.set()
        threading.Event().wait(0.3)
        return read()

    pages = Pages(app, Web(listen="127.0.0.1:0"))
    pages.start()
    port = pages.port
    threading.Event().wait(0.2)
    hub.database.read = slowly
    answers = []
    thread = threading.Thread(target=lambda: answers.append(ask(port)[0].status))
    thread.start()
    assert began.wait(5)
    pages.stop()
    thread.join(5)
    assert answers == [200]
    del hub.database.read


def test_a_taken_port_is_told_with_what_to_do(hub):
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        pages = Pages(hub.app(), Web(listen=f"127.0.0.1:{port}"))
        with pytest.raises(
            PackfoldError, match=f"^Port {port} on 127.0.0.1 is taken. Stop what uses it, or set web.listen"
        ):
            pages.start()
        pages.stop()


@pytest.mark.parametrize(
    ("listen", "words"),
    [("no.such.host.invalid:8740", "is no address of this machine"), ("203.0.113.9:8740", "does not have the address")],
)
def test_an_address_that_is_not_here_is_told(hub, listen, words):
    # 203.0.113.0/24 is set aside for documentation (RFC 5737), .invalid for names that never exist (RFC 6761).
    with pytest.raises(PackfoldError, match=words):
        Pages(hub.app(), Web(listen=listen)).start()


def test_a_port_can_be_used_again_at_once(hub):
    first = Pages(hub.app(), Web(listen="127.0.0.1:0"))
    first.start()
    port = first.port
    ask(port)
    first.stop()
    second = Pages(hub.app(), Web(listen=f"127.0.0.1:{port}"))
    second.start()
    assert ask(port)[0].status == 200
    second.stop()


def seen_address(hub, web, **headers):
    app = hub.app()
    seen = []

    @app.before_request
    def look():
        from flask import request

        seen.append((request.remote_addr, request.scheme, request.host))

    pages = Pages(app, web)
    pages.start()
    ask(pages.port, **headers)
    pages.stop()
    return seen[0]


FORWARDED = {"X-Forwarded-For": "198.51.100.7", "X-Forwarded-Proto": "https"}


def test_forwarding_headers_of_strangers_are_not_believed(hub):
    address, scheme, _ = seen_address(hub, Web(listen="127.0.0.1:0"), **FORWARDED)
    assert (address, scheme) == ("127.0.0.1", "http")
    address, scheme, _ = seen_address(hub, Web(listen="127.0.0.1:0", trusted_proxy="192.0.2.1"), **FORWARDED)
    assert (address, scheme) == ("127.0.0.1", "http")


def test_forwarding_headers_of_the_trusted_proxy_are_believed(hub):
    web = Web(listen="127.0.0.1:0", trusted_proxy="127.0.0.1", base_url="https://packs.home.example")
    assert seen_address(hub, web, **FORWARDED)[:2] == ("198.51.100.7", "https")


def test_what_a_client_puts_in_front_of_the_proxy_s_word_is_not_believed(hub):
    web = Web(listen="127.0.0.1:0", trusted_proxy="127.0.0.1")
    headers = {"X-Forwarded-For": "203.0.113.1, 198.51.100.7"}
    assert seen_address(hub, web, **headers)[0] == "198.51.100.7"


def test_a_huge_body_is_refused(pages):
    connection = http.client.HTTPConnection("127.0.0.1", pages.port, timeout=10)
    connection.putrequest("POST", "/login")
    connection.putheader("Content-Length", str(server.LONGEST_REQUEST_BYTES + 1))
    connection.endheaders()
    assert connection.getresponse().status == 413
    connection.close()


def test_an_ipv6_address_can_be_listened_on(hub):
    if not socket.has_ipv6:
        pytest.skip("this machine has no IPv6")
    pages = Pages(hub.app(), Web(listen="[::1]:0"))
    try:
        pages.start()
    except PackfoldError:
        pytest.skip("this machine has no IPv6 loopback")
    assert ask(pages.port, host="::1")[0].status == 200
    pages.stop()
