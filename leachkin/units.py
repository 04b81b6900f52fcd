"""Units at the door: text in trade spellings becomes a float in the unit that the name carries.

pint does the arithmetic, but only for spellings that stand in ``tables/data/unit_spellings.csv``;
a spelling that is not there never reaches it, and one with two meanings is asked back.
"""

from __future__ import annotations

import math
import re
from functools import cache, lru_cache
from typing import Any

from leachkin.constants import DAYS_PER_MONTH
from leachkin.errors import UnitError, nearest_names
from leachkin.tables import Row, read_table

_NUMBER = re.compile(r"^\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*?)\s*$")
#: Signs that mean the same: micro and mu, superscripts, degree signs, minus signs.
_SAME_SIGNS = str.maketrans(
    {
        "\u00b5": "u",
        "\u03bc": "u",
        "\u00b9": "1",
        "\u00b2": "2",
        "\u00b3": "3",
        "\u00b0": "deg",
        "\u00ba": "deg",
        "\u207b": "-",
        "\u2212": "-",
    }
)
_CLOSERS = {")": "(", "]": "["}


def parse_quantity(text: str, target: str) -> float:
    """Return a written quantity in the target unit.

    Parameters
    ----------
    text : str
        A number and a unit, as ``"8 L/h/m2"``, ``"17 degC"`` or ``"95 %"``.
    target : str
        The unit of the result in a known spelling; ``"1"`` for a fraction.

    Returns
    -------
    float

    Raises
    ------
    UnitError
        If there is no number, no unit where one is needed, an unknown or ambiguous spelling,
        or a unit of another dimension.

    Examples
    --------
    >>> round(parse_quantity("17 degC", "K"), 2)
    290.15
    >>> parse_quantity("95 %", "1")
    0.95
    """
    match = _NUMBER.match(text)
    if match is None:
        raise UnitError(
            f"{text!r} is not a number with a unit",
            f"a number and a unit such as {target}",
            f'write it as "{_example(target)}"',
        )
    value, spelling = float(match.group(1)), match.group(2)
    if not math.isfinite(value):
        raise UnitError(f"{text!r} is too large", "a finite number", f"{_example(target)}")
    if re.match(r"[,.][0-9]", spelling):
        raise UnitError(
            f"{text!r} has a decimal comma or a thousands mark",
            "a number with a decimal point and no thousands marks",
            f'write it as "{_example(target)}"',
        )
    if not spelling:
        if target == "1":
            return value
        raise UnitError(
            f"{text!r} has no unit",
            f"a unit that converts to {target}",
            f'write "{text.strip()} {target}"',
        )
    return convert(value, spelling, target)


def convert(value: float, spelling: str, target: str) -> float:
    """Return a value given in a trade spelling in the target unit.

    Parameters
    ----------
    value : float
    spelling, target : str
        Spellings of the table; ``"1"`` or ``""`` is a bare fraction.

    Returns
    -------
    float

    Raises
    ------
    UnitError
        As :func:`parse_quantity`.

    Examples
    --------
    >>> round(convert(0.005, "gpm/ft2", "L/h/m2"), 2)
    12.22
    """
    meaning = _checked_meaning(spelling, target)
    if "degree_" in meaning or meaning == "kelvin":
        converted = float(_registry().Quantity(value, meaning).to(_meaning(target)).magnitude)
        return float(f"{converted:.12g}")
    return float(f"{value * _scale(meaning, target):.15g}")


def split_heading(heading: str) -> tuple[str, str | None]:
    """Split a column heading into its name and its unit, None where no unit is written.

    Examples
    --------
    >>> split_heading("free H2SO4 (g/L)")
    ('free H2SO4', 'g/L')
    >>> split_heading("remark")
    ('remark', None)
    """
    text = heading.strip()
    opener = _CLOSERS.get(text[-1:])
    if opener is None:
        return text, None
    depth = 0
    for position in range(len(text) - 1, -1, -1):
        depth += (text[position] == text[-1]) - (text[position] == opener)
        if depth == 0:
            return text[:position].strip(), text[position + 1 : -1].strip()
    return text, None


def is_spelling(text: str) -> bool:
    """Return True for a spelling of the table, with one meaning or more.

    Examples
    --------
    >>> is_spelling("mg/L"), is_spelling("oz/t"), is_spelling("pot")
    (True, True, False)
    """
    return _fold(text) in _by_spelling()


def known_spellings(target: str) -> list[str]:
    """Return the unambiguous spellings that convert to the target unit, in order of the table."""
    return [
        row.text("spelling")
        for row in read_table("unit_spellings").rows
        if row.text("ambiguous") == "no" and _compatible(row.text("meaning"), target)
    ]


def _checked_meaning(spelling: str, target: str) -> str:
    meaning = _meaning(spelling)
    if _compatible(meaning, target):
        return meaning
    hint = _spelling_row(spelling).text("instead") if spelling not in ("", "1") else ""
    raise UnitError(
        f"{spelling!r} does not measure what is needed here",
        ", ".join(known_spellings(target)[:10]) or target,
        hint or f"give it in {target}",
    )


@cache
def _scale(meaning: str, target: str) -> float:
    return float(_one(meaning).to(_one(_meaning(target)).units).magnitude) / float(
        _one(_meaning(target)).magnitude
    )


@cache
def _compatible(meaning: str, target: str) -> bool:
    return bool(_one(meaning).dimensionality == _one(_meaning(target)).dimensionality)


def _one(meaning: str) -> Any:
    """One of the unit; a meaning may carry a factor, as ``1e6*metric_ton``."""
    registry = _registry()
    if meaning.startswith("degree_"):
        return registry.Quantity(1.0, meaning)
    return registry.Quantity(registry.parse_expression(meaning))


def _meaning(spelling: str) -> str:
    if spelling in ("", "1"):
        return "dimensionless"
    row = _spelling_row(spelling)
    if row.text("ambiguous") == "yes":
        raise UnitError(
            f"{spelling!r} has more than one meaning",
            row.text("instead"),
            f"write one of: {row.text('instead')}",
            ambiguous=True,
        )
    return row.text("meaning")


def _spelling_row(spelling: str) -> Row:
    by_spelling = _by_spelling()
    folded = _fold(spelling)
    if folded in by_spelling:
        return by_spelling[folded]
    near = nearest_names(spelling, [row.text("spelling") for row in by_spelling.values()])
    raise UnitError(
        f"unknown unit {spelling!r}",
        "a unit of the list in docs/reference/units.md",
        f"did you mean {' or '.join(near)}?" if near else "write it as in that list",
    )


@lru_cache(maxsize=1)
def _by_spelling() -> dict[str, Row]:
    return {_fold(row.text("spelling")): row for row in read_table("unit_spellings").rows}


def _fold(spelling: str) -> str:
    """Spaces, the micro signs, superscripts and dots do not make another unit; case does."""
    return re.sub(r"[\s\u00b7]+", "", spelling.translate(_SAME_SIGNS))


@lru_cache(maxsize=1)
def _registry() -> Any:
    import pint

    registry: Any = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
    registry.define(f"plan_month = {DAYS_PER_MONTH} * day")
    registry.define("equivalent = 1 * mole")
    return registry


def _example(target: str) -> str:
    return "0.95 or 95 %" if target == "1" else f"10 {target}"
