"""Numerals as people write them: one decimal mark a file, no thousands marks guessed at."""

from __future__ import annotations

import math
import re
from typing import Literal

DecimalMark = Literal[".", ","]

#: What a spreadsheet shows where a formula failed.
ERROR_CODES = frozenset(
    {"#REF!", "#DIV/0!", "#N/A", "#VALUE!", "#NAME?", "#NUM!", "#NULL!", "#SPILL!", "#CALC!"}
)

_POINT = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_COMMA = re.compile(r"[+-]?(?:[0-9]+,?[0-9]*|,[0-9]+)(?:[eE][+-]?[0-9]+)?")
_BOTH = re.compile(r"[+-]?[0-9]{1,3}(?:(?:\.[0-9]{3})+,[0-9]+|(?:,[0-9]{3})+\.[0-9]+)")
_MINUS = str.maketrans({"\u2212": "-", "\u2013": "-"})


def parse_numeral(text: str, decimal: DecimalMark = ".") -> float:
    """Return the number that a cell holds.

    Parameters
    ----------
    text : str
    decimal : "." or ","
        Decimal mark of the file.

    Returns
    -------
    float
        Always finite.

    Raises
    ------
    ValueError
        If the text is anything but one plain number; the message says what is wrong with it.

    Examples
    --------
    >>> parse_numeral("10,5", decimal=",")
    10.5
    """
    stripped = text.strip().translate(_MINUS)
    pattern = _POINT if decimal == "." else _COMMA
    if pattern.fullmatch(stripped) is None:
        raise ValueError(_why_not(stripped, decimal))
    value = float(stripped.replace(",", "."))
    if not math.isfinite(value):
        raise ValueError(f"{text!r} is too large for a number")
    return value


def _why_not(text: str, decimal: DecimalMark) -> str:
    if _BOTH.fullmatch(text):
        return f"{text!r} has a thousands mark"
    if decimal == "." and _COMMA.fullmatch(text):
        return f"{text!r} has a comma, a decimal or a thousands mark"
    if decimal == "," and _POINT.fullmatch(text):
        return f"{text!r} has a point in a file with decimal commas"
    return f"{text!r} is not a number"
