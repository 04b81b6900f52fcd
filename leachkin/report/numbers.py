"""Numbers as a person reads them: significant digits by column, never more than the column has."""

from __future__ import annotations

import math
from collections.abc import Sequence

from leachkin.result_table import Cell, Column

_LARGEST_PLAIN = 1e9
_SMALLEST_PLAIN = 1e-4
_NARROW_RANGE = 1000.0


def format_number(value: float, digits: int = 4) -> str:
    """Return a number with so many significant digits, plain where that can be read.

    Parameters
    ----------
    value : float
    digits : int
        Significant digits, at least 1.

    Returns
    -------
    str
        ``"1640"``, ``"0.0123"``, ``"2.3e-05"``; ``"not finite"`` is never hidden: infinity is
        ``"inf"``.

    Examples
    --------
    >>> format_number(1638.96, 3), format_number(0.012345, 3), format_number(2.345e-05, 2)
    ('1640', '0.0123', '2.3e-05')
    """
    if not math.isfinite(value):
        return "inf" if value == math.inf else str(value)
    if value == 0:
        return "0"
    if not _SMALLEST_PLAIN <= abs(value) < _LARGEST_PLAIN:
        return f"{value:.{digits - 1}e}"
    return _fixed(value, _decimals(value, digits))


def format_column(
    column: Column, cells: Sequence[Cell], empty: str = "-", *, one_by_one: bool = False
) -> list[str]:
    """Return a column's cells as text, with one number of decimals where the range allows it.

    Parameters
    ----------
    column : Column
        Its ``digits`` is how many significant digits the largest value gets.
    cells : sequence
    empty : str
        What stands for an empty cell.
    one_by_one : bool
        Give each number its own decimals, as where the rows have different units.

    Returns
    -------
    list of str
    """
    decimals = None if one_by_one else _common_decimals(column, cells)
    return [_cell_text(cell, column.digits, decimals, empty) for cell in cells]


def is_numeric(cells: Sequence[Cell]) -> bool:
    """Return True where every filled cell is a number, and there is at least one."""
    filled = [cell for cell in cells if cell is not None]
    return bool(filled) and all(
        isinstance(cell, int | float) and not isinstance(cell, bool) for cell in filled
    )


def _cell_text(cell: Cell, digits: int, decimals: int | None, empty: str) -> str:
    if cell is None or cell == "":
        return empty
    if isinstance(cell, bool):
        return "yes" if cell else "no"
    if isinstance(cell, int):
        return str(cell)
    if isinstance(cell, float):
        if decimals is None or cell == 0 or not math.isfinite(cell):
            return format_number(cell, digits)
        return _fixed(cell, decimals)
    return str(cell)


def _common_decimals(column: Column, cells: Sequence[Cell]) -> int | None:
    """Decimals that give the largest value its digits; None where the range is too wide."""
    sizes = [abs(cell) for cell in cells if isinstance(cell, float) and math.isfinite(cell)]
    sizes = [size for size in sizes if size > 0]
    if not sizes:
        return None
    largest, smallest = max(sizes), min(sizes)
    if largest / smallest > _NARROW_RANGE:
        return None
    if largest >= _LARGEST_PLAIN or smallest < _SMALLEST_PLAIN:
        return None
    return _decimals(largest, column.digits)


def _decimals(value: float, digits: int) -> int:
    """Decimals that show the significant digits, negative where whole digits are rounded off."""
    exponent = int(f"{value:.{digits - 1}e}".split("e")[1])
    return digits - 1 - exponent


def _fixed(value: float, decimals: int) -> str:
    rounded = round(value, decimals)
    return f"{rounded if rounded else 0.0:.{max(decimals, 0)}f}"
