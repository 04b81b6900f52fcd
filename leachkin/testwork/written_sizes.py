"""Sizes as people write them: ``-12.5+9.5 mm``, ``-1/2 in``, ``P80 75 um``, one size alone."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from leachkin.errors import UnitError
from leachkin.problems import Problem
from leachkin.testwork.answers import Answers
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.sizes import SizeDistribution
from leachkin.testwork.written_units import mesh_aperture_mm
from leachkin.units import convert

if TYPE_CHECKING:
    from leachkin.testwork.tests_sheet import TestRow

#: Slope of a crushed ore where only P80 is given (common practice).
USUAL_SLOPE = 0.65
_NUMBER = r"(?:[0-9]+[- ])?[0-9]+/[0-9]+|[0-9]+(?:[.,][0-9]+)?|[.,][0-9]+"
_UNIT = r"(?P<unit{}>mm|um|microns?|cm|in\.?|inch|inches|\"|mesh|#|m)?"
_RANGE = re.compile(
    rf"(?P<sign>[-+])?\s*(?P<one>{_NUMBER})\s*{_UNIT.format(1)}\s*(?P<joint>\+|-|to|x)\s*"
    rf"(?P<two>{_NUMBER})\s*{_UNIT.format(2)}",
    re.I,
)
_ONE = re.compile(
    rf"(?P<what>[pkfd]\s?80\s*[:=]?\s*|80\s*%\s*(?:passing|-)\s*)?(?P<sign>-|<|minus )?\s*"
    rf"(?P<one>{_NUMBER})\s*{_UNIT.format(1)}",
    re.I,
)


@dataclass(frozen=True)
class WrittenSize:
    """A size as written: a pair of sieves, one size, or the size that 80 % passes [mm]."""

    pair_mm: tuple[float, float] | None = None
    single_mm: float | None = None
    p80_mm: float | None = None


class SizeProblem(Exception):  # noqa: N818 - never leaves testwork
    """A size that cannot be read: what was found, what is allowed, what to try, what to paste."""

    def __init__(self, found: str, allowed: str, try_this: str, paste: str = "") -> None:
        super().__init__(found)
        self.found, self.allowed, self.try_this, self.paste = found, allowed, try_this, paste


def read_size(text: str, spelling: str, answers: Answers, is_p80: bool = False) -> WrittenSize:
    """Return a size written in a cell.

    Parameters
    ----------
    text : str
    spelling : str
        Unit of the heading, for cells without one.
    answers : Answers
        For the series of mesh numbers.
    is_p80 : bool
        True where the heading says so.

    Returns
    -------
    WrittenSize

    Raises
    ------
    SizeProblem
        If it cannot be read.

    Examples
    --------
    >>> read_size("-12.5+9.5", "mm", Answers()).pair_mm
    (9.5, 12.5)
    >>> read_size("P80 75 um", "", Answers()).p80_mm
    0.075
    """
    clean = text.translate({0x2212: "-", 0x2013: "-", 0x00B5: "u", 0x03BC: "u"}).strip()
    if match := _RANGE.fullmatch(clean):
        units = [match["unit1"] or match["unit2"] or spelling, match["unit2"] or match["unit1"]]
        sizes = [
            _millimetres(match[name], unit or spelling, answers, text)
            for name, unit in zip(("one", "two"), units, strict=True)
        ]
        low, high = min(sizes), max(sizes)
        if low <= 0.0:
            raise _top_size(text)
        if low == high:
            raise SizeProblem(f"{text!r} has the same size twice", "two sieves", "-12.5+9.5 mm")
        return WrittenSize(pair_mm=(low, high))
    if match := _ONE.fullmatch(clean):
        size = _millimetres(match["one"], match["unit1"] or spelling, answers, text)
        if (match["what"] or is_p80) and size > 0.0:
            return WrittenSize(p80_mm=size)
        if match["sign"]:
            raise _top_size(text)
        if size <= 0.0:
            raise SizeProblem(f"{text!r} is no size", "a size above 0", "correct the cell")
        return WrittenSize(single_mm=size)
    raise SizeProblem(
        f"{text!r} is no size", "-12.5+9.5, P80 75 um, or one size", "or give a sieve table"
    )


def _top_size(text: str) -> SizeProblem:
    return SizeProblem(
        f"{text!r} is a top size; it does not say how much is finer",
        "two sieves, P80, or a sieve table",
        "give P80, or a sieve table for the test",
    )


def _millimetres(number: str, unit: str, answers: Answers, text: str) -> float:
    spelling = {"#": "mesh", '"': "in", "in.": "in", "inches": "in"}.get(unit.casefold(), unit)
    if not spelling:
        raise SizeProblem(f"{text!r} has no unit", "mm or um", 'write the heading as "size (mm)"')
    if spelling == "mesh":
        return _of_mesh(number, answers, text)
    try:
        return convert(_value(number), spelling, "mm")
    except UnitError as error:
        raise SizeProblem(error.found, error.allowed, error.try_this) from None


def _of_mesh(number: str, answers: Answers, text: str) -> float:
    if answers.mesh is None:
        raise SizeProblem(
            f"{text!r}: mesh of which series? 10 mesh is 2 mm US, 1.65 mm Tyler, 1.7 mm BSS",
            "US / Tyler / BSS",
            'write mesh = "US" under [sheets] in the settings (or Tyler, or BSS)',
            'sheets.mesh = "US"',
        )
    size = mesh_aperture_mm(answers.mesh, number)
    if size != size:
        found = f"{number!r} is no mesh of the {answers.mesh} series"
        raise SizeProblem(found, "a sieve of the series", "write the aperture in mm")
    return size


def _value(number: str) -> float:
    """A number, a fraction as 1/2, or both as 1-1/2."""
    parts = re.split(r"[- ]", number.replace(",", "."))
    total = 0.0
    for part in parts:
        above, _, below = part.partition("/")
        if below and float(below) == 0.0:
            raise SizeProblem(f"{number!r} is divided by zero", "a fraction such as 1/2", "")
        total += float(above) / (float(below) if below else 1.0)
    return total


def sizes_of_row(
    row: TestRow, settings: TestworkSettings, problems: list[Problem], file: str
) -> SizeDistribution:
    """Return the sizes of a test from its own row; P80 alone needs a slope, which is asked."""
    if row.size_mm is not None:
        return SizeDistribution.from_classes(list(row.size_mm), [1.0])
    if row.single_mm is not None:
        return SizeDistribution.single(row.single_mm)
    p80 = row.p80_mm or 1.0
    slope = settings.answers.size_slope
    if slope is None:
        problems.append(
            Problem(
                file,
                row.row,
                "P80",
                "ask",
                f"P80 alone is no size distribution: passing = 0.8 (size / {p80:g} mm)^"
                f"{USUAL_SLOPE:g} is taken meanwhile, the usual slope of crushed ore",
                "a sieve table, or the slope",
                "attach a sieve table, or write size_slope = 0.65 under [sheets] in the settings",
                "sheets.size_slope = 0.65",
            )
        )
    used = slope or USUAL_SLOPE
    return SizeDistribution.gates_gaudin_schuhmann(p80 * 0.8 ** (-1.0 / used), used)
