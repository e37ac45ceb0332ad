"""Messages: their bytes by RFC 8428, and keeping them until the receipt."""

import json
from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.demo.outbox import Outbox, Packet

BASE_S = 1_780_000_000


def packet(sequence: int, boot: int = 1, readings: int = 2, clock: bool = True) -> Packet:
    stamps = [BASE_S + 60 * (sequence * readings + k) for k in range(readings)]
    volts = [7.5 + 0.004 * k for k in range(readings)]
    return Packet(
        boot,
        sequence,
        [1000 * t for t in stamps],
        stamps if clock else None,
        {"pack_voltage": volts, "pack_temperature": [20.0625] * readings},
    )


@pytest.mark.parametrize("form", ["json", "cbor"])
def test_a_message_says_what_was_read(form: str, resolve: Callable) -> None:
    said = resolve(packet(3, boot=7).encode(form, "urn:dev:mac:00fffe:", 0))
    first = BASE_S + 360
    assert ("boot", "count", first, 7) in said
    assert ("sequence", "count", first, 3) in said
    assert [s for s in said if s[0] == "pack_voltage"] == [
        ("pack_voltage", "V", first, 7.5),
        ("pack_voltage", "V", first + 60, 7.504),
    ]
    assert ("pack_temperature", "Cel", first + 60, 20.0625) in said
    assert not any(name == "oldest" for name, *_ in said)
    assert len(said) == 6


def test_the_json_form_is_that_of_the_interface() -> None:
    records = json.loads(packet(1).encode("json", "urn:dev:mac:00fffe:", 0))
    assert records[0]["bn"] == "urn:dev:mac:00fffe:"
    assert records[0]["bt"] == BASE_S + 120
    assert all({"n", "u", "v"} <= record.keys() for record in records)


def test_the_short_form_is_shorter() -> None:
    long = packet(1, readings=60)
    assert len(long.encode("cbor", "urn:", 0)) < 0.5 * len(long.encode("json", "urn:", 0))


@pytest.mark.parametrize("form", ["json", "cbor"])
def test_a_node_without_a_clock_says_how_long_ago(form: str, resolve: Callable) -> None:
    sent_ms = 1000 * (BASE_S + 120 + 60 + 5)
    said = resolve(packet(1, clock=False).encode(form, "urn:", sent_ms))
    # RFC 8428: a time below 2**28 is relative to the moment of receipt.
    assert [t for n, _, t, _ in said if n == "pack_voltage"] == [-65, -5]


def test_what_is_gone_is_said(resolve: Callable) -> None:
    assert ("oldest", "count", BASE_S + 120, 9) in resolve(packet(1).encode("json", "urn:", 0, oldest=9))


def fill(outbox: Outbox, sequences: range, boot: int = 1) -> None:
    for sequence in sequences:
        outbox.add(packet(sequence, boot))


def send(outbox: Outbox, now: float = 0.0, window: int = 100) -> list[tuple[int, int]]:
    went = []
    while (due := outbox.due(now, window, 20.0)) is not None:
        outbox.sent(due, now)
        went.append((due.boot, due.sequence))
    return went


def test_messages_go_in_order_and_stay_until_the_receipt() -> None:
    outbox = Outbox()
    fill(outbox, range(1, 6))
    assert send(outbox) == [(1, s) for s in range(1, 6)]
    assert len(outbox) == outbox.unreceipted == 5
    assert outbox.receipt(b'{"boot": 1, "sequence": 3}') == 3
    assert len(outbox) == 2
    assert outbox.receipt(b'{"boot": 1, "sequence": 5}') == 2
    assert len(outbox) == 0


def test_a_receipt_counts_for_its_boot_only() -> None:
    outbox = Outbox()
    fill(outbox, range(1, 4), boot=1)
    fill(outbox, range(1, 4), boot=2)
    send(outbox)
    assert outbox.receipt(b'{"boot": 2, "sequence": 9}') == 3
    assert len(outbox) == 3


@pytest.mark.parametrize("payload", [b"", b"ok", b"[]", b'{"boot": 1}', b'{"boot": null, "sequence": 1}', b"\xff\x00"])
def test_a_receipt_nobody_can_read_lets_nothing_go(payload: bytes) -> None:
    outbox = Outbox()
    fill(outbox, range(1, 3))
    send(outbox)
    assert outbox.receipt(payload) == 0
    assert len(outbox) == 2


def test_a_receipt_does_not_cover_what_was_never_sent() -> None:
    outbox = Outbox()
    fill(outbox, range(1, 4))
    assert outbox.receipt(b'{"boot": 1, "sequence": 3}') == 0
    assert outbox.waiting == 3


def test_no_more_than_a_window_goes_unreceipted() -> None:
    outbox = Outbox()
    fill(outbox, range(1, 10))
    assert len(send(outbox, window=4)) == 4
    outbox.receipt(b'{"boot": 1, "sequence": 2}')
    assert send(outbox, window=4) == [(1, 5), (1, 6)]


def test_an_unanswered_message_goes_again_oldest_first() -> None:
    outbox = Outbox()
    fill(outbox, range(1, 4))
    send(outbox, 0.0)
    assert send(outbox, 19.0) == []
    assert send(outbox, 20.0) == [(1, 1), (1, 2), (1, 3)]
    assert len(outbox) == 3


def test_a_full_outbox_drops_the_oldest_and_says_so() -> None:
    outbox = Outbox(limit=4)
    fill(outbox, range(1, 4))
    send(outbox)
    fill(outbox, range(4, 8))
    assert len(outbox) == 4
    assert outbox.dropped == 3
    assert outbox.oldest(1) == 4
    assert outbox.oldest(2) is None


@given(st.lists(st.one_of(st.just("add"), st.just("send"), st.integers(0, 30)), max_size=60))
def test_nothing_is_lost_and_nothing_comes_back(steps: list[str | int]) -> None:
    outbox, made, gone = Outbox(), 0, 0
    for now, step in enumerate(steps):
        if step == "add":
            made += 1
            outbox.add(packet(made))
        elif step == "send":
            send(outbox, float(now), 5)
        else:
            gone += outbox.receipt(json.dumps({"boot": 1, "sequence": step}).encode())
        assert len(outbox) == made - gone
        assert outbox.waiting + outbox.unreceipted == len(outbox)
