import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.telemetry import lines
from hub.telemetry.lines import MAX_LINE_BYTES, Line, physical_lines


def contents(source):
    return [line.content for line in physical_lines(source)]


@pytest.mark.parametrize(
    ("data", "expected"),
    [
        (b"", []),
        (b"a\nb\n", [b"a", b"b"]),
        (b"a\r\nb\r\n", [b"a", b"b"]),
        (b"a\n\rb\n\r", [b"a", b"b", b""]),
        (b"a\rb\r", [b"a", b"b"]),
        (b"a\n\nb", [b"a", b"", b"b"]),
        (b"\n", [b""]),
    ],
)
def test_line_ends(data, expected):
    assert contents(data) == expected


def test_only_the_last_line_may_lack_its_end():
    assert list(physical_lines(b"a\nb")) == [Line(1, b"a", True, False), Line(2, b"b", False, False)]


def test_an_endless_line_is_counted_and_not_kept(monkeypatch):
    monkeypatch.setattr(lines, "BLOCK_BYTES", 1000)
    data = b"a\n" + b"x" * (3 * MAX_LINE_BYTES) + b"\nb\n" + b"y" * (2 * MAX_LINE_BYTES)
    assert [(line.number, line.content, line.too_long) for line in physical_lines(io.BytesIO(data))] == [
        (1, b"a", False),
        (2, b"", True),
        (3, b"b", False),
        (4, b"", True),
    ]


@given(st.binary(max_size=60).filter(lambda data: b"\n" in data or b"\r" not in data), st.integers(1, 8))
def test_blocks_leave_no_trace(data, block):
    whole = contents(data)
    assert len(whole) == data.count(b"\n") + (not data.endswith(b"\n") and data != b"")
    assert whole == [line.strip(b"\r") for line in data.split(b"\n")][: len(whole)]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(lines, "BLOCK_BYTES", block)
        if b"\r" not in data:
            assert contents(io.BytesIO(data)) == whole
