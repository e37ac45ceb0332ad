import threading
import time

import pytest

from hub.mqtt import tray as tray_module
from hub.mqtt.tray import BATCH, STALLED, Letter, Tray


def letter(number: int, size: int = 10) -> Letter:
    return Letter("field/gate/telemetry", b"x" * size, number, 1, False, 1, number)


def fill(tray: Tray, count: int, size: int = 10) -> None:
    for number in range(count):
        tray.put(letter(number, size))


def test_letters_come_out_in_the_order_in_which_they_went_in():
    tray = Tray()
    fill(tray, 2 * BATCH + 7)
    taken = [x.mid for _ in range(3) for x in tray.take(0)]
    assert taken == list(range(2 * BATCH + 7))
    assert len(tray) == 0
    assert tray.received == 2 * BATCH + 7
    assert tray.last_ms == 2 * BATCH + 6


def test_a_batch_waits_for_company_no_longer_than_it_may():
    tray = Tray()
    fill(tray, 3)
    began = time.monotonic()
    assert len(tray.take(0.15)) == 3
    assert 0.14 < time.monotonic() - began < 1.5


def test_a_full_batch_does_not_wait():
    tray = Tray()
    fill(tray, BATCH)
    began = time.monotonic()
    assert len(tray.take(30)) == BATCH
    assert time.monotonic() - began < 1


def test_a_broker_that_waits_for_us_is_not_kept_waiting():
    tray = Tray()
    fill(tray, STALLED)
    began = time.monotonic()
    assert len(tray.take(30)) == STALLED
    assert time.monotonic() - began < 2


def test_what_arrives_while_waiting_is_taken_along():
    tray = Tray()
    later = threading.Timer(0.05, lambda: fill(tray, BATCH))
    tray.put(letter(0))
    later.start()
    began = time.monotonic()
    assert len(tray.take(30)) == BATCH
    assert time.monotonic() - began < 5
    later.join()


def test_nothing_comes_of_an_empty_tray_after_a_while():
    assert Tray().take(0, idle_s=0.01) == []


@pytest.mark.parametrize(("letters", "size"), [(20, 10), (3, 500)])
def test_it_is_full_by_number_and_by_bytes_and_then_empties(letters, size):
    tray = Tray(most_letters=20, most_bytes=1500)
    fill(tray, letters - 1, size)
    assert not tray.full
    tray.put(letter(99, size))
    assert tray.full
    tray.take(0)
    assert not tray.full


def test_large_letters_make_a_smaller_batch(monkeypatch):
    monkeypatch.setattr(tray_module, "BATCH_BYTES", 1000)
    tray = Tray()
    fill(tray, 9, 400)
    began = time.monotonic()
    assert [len(tray.take(30)), len(tray.take(30)), len(tray.take(30))] == [3, 3, 3]
    assert time.monotonic() - began < 5


def test_a_closed_tray_hands_out_the_rest_and_waits_for_nothing():
    tray = Tray()
    fill(tray, 2)
    tray.close()
    began = time.monotonic()
    assert len(tray.take(30)) == 2
    assert tray.take(30, idle_s=30) == []
    assert time.monotonic() - began < 1


def test_closing_wakes_whoever_waits():
    tray = Tray()
    threading.Timer(0.05, tray.close).start()
    began = time.monotonic()
    assert tray.take(30, idle_s=30) == []
    assert time.monotonic() - began < 5
