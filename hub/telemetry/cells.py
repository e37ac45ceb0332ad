"""A line of CSV as cells (RFC 4180), and a cell as a number."""

import csv
from typing import Final, Literal

from hub.errors import PayloadError

Decimal = Literal[".", ","]

DELIMITERS: Final = (",", ";", "\t")


def split(text: str, delimiter: str) -> list[str]:
    """Cells of one line; where spaces cut it, any number of them counts as one.

    Raises
    ------
    PayloadError
        Where a quotation mark is left open, as in a torn line.
    """
    if delimiter == " ":
        return text.split()
    if '"' not in text:
        return text.split(delimiter)
    try:
        return next(csv.reader([text], delimiter=delimiter, strict=True))
    except csv.Error:
        raise PayloadError("A quotation mark is left open or followed by text; the line is torn.") from None


def number(cell: str, decimal: Decimal = ".") -> float:
    """A cell as a number, which may be NaN or infinite where the cell says so.

    Raises
    ------
    ValueError
        Where the cell is anything but one number in ASCII digits with the decimal sign ``decimal``.
    """
    if decimal == ",":
        if "." in cell:
            raise ValueError(cell)
        cell = cell.replace(",", ".")
    # float() also takes underscores and the digits of every script, which no logger writes.
    if "_" in cell or not cell.isascii():
        raise ValueError(cell)
    return float(cell)


def decimals(cell: str, decimal: Decimal = ".") -> int:
    """How many characters stand behind the decimal sign."""
    _, sign, tail = cell.strip().partition(decimal)
    return len(tail) if sign else 0
