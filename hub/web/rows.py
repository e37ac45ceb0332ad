"""Rows of figures as the pages take them: from the store or from a test, whatever their class."""

from typing import Any, Protocol


class Row(Protocol):
    """Anything that gives a value by a column's name."""

    def __getitem__(self, name: str, /) -> Any:  # noqa: ANN401 - numbers, texts and nothing
        """The value of a column."""
