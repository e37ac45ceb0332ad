"""Check values: RFC 6901, sections 3 to 5."""

import pytest

from hub.errors import PayloadError
from hub.telemetry.pointer import look_up, pointer_problem

DOCUMENT = {"foo": ["bar", "baz"], "": 0, "a/b": 1, "c%d": 2, "e^f": 3, "g|h": 4, "i\\j": 5, 'k"l': 6, " ": 7, "m~n": 8}


@pytest.mark.parametrize(
    ("pointer", "value"),
    [
        ("", DOCUMENT),
        ("/foo", ["bar", "baz"]),
        ("/foo/0", "bar"),
        ("/", 0),
        ("/a~1b", 1),
        ("/c%d", 2),
        ("/e^f", 3),
        ("/g|h", 4),
        ("/i\\j", 5),
        ('/k"l', 6),
        ("/ ", 7),
        ("/m~0n", 8),
    ],
)
def test_the_examples_of_section_5(pointer, value):
    assert pointer_problem(pointer) is None
    assert look_up(DOCUMENT, pointer) == value


def test_01_is_a_tilde_and_a_one():
    assert look_up({"~1": 1, "/": 2}, "/~01") == 1


@pytest.mark.parametrize(
    "pointer",
    ["/bar", "/foo/2", "/foo/-", "/foo/00", "/foo/+1", "/foo/1e0", "/foo/0/x", "/foo/" + "9" * 5000, "/foo/\u0661"],
)
def test_places_that_do_not_exist(pointer):
    assert pointer_problem(pointer) is None
    with pytest.raises(PayloadError, match="has nothing at"):
        look_up(DOCUMENT, pointer)


@pytest.mark.parametrize("pointer", ["foo", "/a~b", "/a~2", "/~"])
def test_what_is_no_pointer(pointer):
    assert (pointer_problem(pointer) or "").endswith(".")
