import threading

import pytest
from web.builders import MINUTE_MS, NOW_MS, ridge, rows

from hub.web import book as module
from hub.web.book import Book


@pytest.fixture
def book(hub):
    hub.load(ridge())
    return Book(hub.database, hub.clock)


def wait_for(condition) -> None:
    for _ in range(200):
        if condition():
            return
        threading.Event().wait(0.01)
    pytest.fail("nothing happened in two seconds")


def test_a_fresh_book_is_shown_as_it_is(book, hub):
    first = book.read()
    hub.append("ridge-east", {NOW_MS - 1000: {"pack_voltage": 10.4}})
    hub.clock.now_ms += module.FRESH_MS
    assert book.read() is first


def test_an_older_book_is_shown_while_the_next_is_gathered(book, hub):
    first = book.read()
    hub.append("ridge-east", {NOW_MS - 1000: {"pack_voltage": 10.4}})
    hub.clock.now_ms += module.FRESH_MS + 1
    assert book.read() is first
    wait_for(lambda: book._last is not first)
    assert book.read().glances[0].last_ms == NOW_MS - 1000


def test_a_book_that_is_too_old_is_not_shown(book, hub):
    first = book.read()
    hub.clock.now_ms += module.STALE_MS + 1
    second = book.read()
    assert second is not first
    assert second.made_ms == hub.clock()


def test_a_clock_that_was_set_back_does_not_keep_an_old_book(book, hub):
    first = book.read()
    hub.clock.now_ms -= 10 * MINUTE_MS
    assert book.read() is not first


def test_after_a_change_here_nobody_sees_the_old_book(book, hub):
    book.read()
    hub.load(ridge(node="ridge-west", pack=None))
    book.forget()
    assert [glance.node.name for glance in book.read().glances] == ["ridge-east", "ridge-west"]


def test_a_change_while_gathering_is_not_lost(book, hub, monkeypatch):
    gather = book._gather

    def overtaken(now_ms):
        made = gather(now_ms)
        monkeypatch.setattr(book, "_gather", gather)
        hub.load(ridge(node="ridge-west", pack=None))
        book.forget()
        return made

    monkeypatch.setattr(book, "_gather", overtaken)
    assert len(book.read().glances) == 1
    assert len(book.read().glances) == 2


def test_nodes_come_by_site_and_name(hub):
    hub.load(
        rows(
            site=[{"name": name, "latitude": 0.0, "longitude": 0.0} for name in ("b", "a")],
            node=[{"name": "n2", "site": "b"}, {"name": "n3", "site": "a"}, {"name": "n1", "site": "b"}],
        )
    )
    assert [glance.node.name for glance in Book(hub.database, hub.clock).read().glances] == ["n3", "n1", "n2"]


def test_what_was_set_aside_is_counted_for_seven_days(book, hub):
    hub.set_aside("ridge-east", "future", "It is dated tomorrow.", 3)
    hub.set_aside("barn-door", "unknown-node", "There is no such node.", 2)
    snapshot = book.refresh()
    assert snapshot.glances[0].set_aside == {"future": 3}
    assert snapshot.strangers == {"barn-door": 2}
    assert book.set_aside_of("ridge-east", hub.ids["ridge-east"], hub.clock()) == {"future": 3}
    hub.clock.now_ms += 7 * 86_400_000
    assert book.refresh().glances[0].set_aside == {}
    assert book.set_aside_of("ridge-east", hub.ids["ridge-east"], hub.clock()) == {}


def test_many_strips_have_wider_columns(hub, monkeypatch):
    hub.load(ridge())
    hub.simulate("ridge-east", 3)
    fine = Book(hub.database, hub.clock).read().strips["ridge-east"]
    monkeypatch.setattr(module, "FINE_STRIPS", 0)
    assert len(Book(hub.database, hub.clock).read().strips["ridge-east"]) < len(fine)


def test_a_book_is_gathered_once_for_all_who_wait(book, monkeypatch):
    gathered = []
    gather = book._gather

    def slowly(now_ms):
        gathered.append(now_ms)
        threading.Event().wait(0.05)
        return gather(now_ms + 1)

    monkeypatch.setattr(book, "_gather", slowly)
    threads = [threading.Thread(target=book.refresh) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(gathered) == 1
