"""The buffered socket over a real pair of sockets."""

import contextlib
import socket

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.mqtt.buffered import CHUNK, BufferedSocket


@pytest.fixture
def pair():
    near, far = socket.socketpair()
    near.setblocking(False)
    far.settimeout(5)
    yield BufferedSocket(near), far
    near.close()
    far.close()


@given(st.binary(min_size=1, max_size=2000), st.lists(st.integers(1, 300), min_size=1, max_size=50))
def test_every_byte_comes_once_and_in_order(data, pieces):
    near, far = socket.socketpair()
    with near, far:
        far.sendall(data)
        far.shutdown(socket.SHUT_WR)
        buffered = BufferedSocket(near)
        got = b""
        for number in range(10_000):
            piece = buffered.recv(pieces[number % len(pieces)])
            if not piece:
                break
            got += piece
        assert got == data


def test_reading_ahead_is_told_and_an_empty_network_is_no_end(pair):
    buffered, far = pair
    with pytest.raises(BlockingIOError):
        buffered.recv(1)
    assert buffered.pending() == 0
    far.sendall(b"abcdef")
    assert buffered.recv(1) == b"a"
    assert buffered.pending() == 5
    assert buffered.recv(100) == b"bcdef"
    assert buffered.pending() == 0


def test_small_pieces_go_out_together_when_flushed(pair):
    buffered, far = pair
    far.settimeout(0.05)
    for piece in (b"one", b"two", b"three"):
        assert buffered.send(piece) == len(piece)
    with pytest.raises(TimeoutError):
        far.recv(100)
    assert buffered.unsent
    assert buffered.flush() is True
    assert far.recv(100) == b"onetwothree"
    assert not buffered.unsent


def test_a_network_that_takes_nothing_is_told_and_holds_a_bounded_amount(pair):
    buffered, far = pair
    sent = 0
    with contextlib.suppress(BlockingIOError):
        while sent < 100_000_000:
            sent += buffered.send(b"x" * 1000)
    assert sent < 100_000_000
    assert len(buffered._unsent) < 2 * CHUNK
    got = 0
    while got < sent:
        got += len(far.recv(1_000_000))
        buffered.flush()
    assert got == sent


def test_closing_sends_what_is_left(pair):
    buffered, far = pair
    buffered.send(b"last words")
    buffered.close()
    assert far.recv(100) == b"last words"
    assert far.recv(100) == b""


def test_closing_a_broken_one_raises_nothing(pair):
    buffered, far = pair
    far.close()
    buffered.send(b"to nobody")
    buffered.close()
    buffered.close()
