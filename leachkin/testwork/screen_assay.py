"""Heads by screen assay: the coarse part assayed whole, the fine part by replicates.

With coarse metal (nuggets) a small pulp does not hold its share of it. The coarse part of a
screened sample is assayed to the last gram, the fine part by splits, and the head is the mean by
mass.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import Problem
from leachkin.testwork.cells import CellReader
from leachkin.testwork.records import Array, Head
from leachkin.testwork.settings import TestworkSettings

_COARSE = ("plus", "+", "coarse", "oversize", "over")
_FINE = ("minus", "-", "\u2212", "fine", "undersize", "under")


@dataclass(frozen=True)
class Screens:
    """The screen fractions of a heads sheet: by row, +1 coarse, -1 fine, 0 for a plain assay."""

    part: NDArray[np.int64]
    mass_g: Array
    file: str

    def has_any(self, rows: Sequence[int]) -> bool:
        """Return True where one of the rows is a screen fraction."""
        return bool(self.part[list(rows)].any())

    def head(
        self,
        rows: Sequence[int],
        numbers: tuple[int, ...],
        read: tuple[str, Array, NDArray[np.int64]],
        settings: TestworkSettings,
        problems: list[Problem],
    ) -> Head | None:
        """Return the head of one screened sample; None, with a problem, where a part lacks.

        Parameters
        ----------
        rows : sequence of int
            Rows of the sheet, from 0.
        numbers : tuple of int
            The same as a person counts.
        read : (analyte, assays, bounds)
            Of the whole sheet.
        settings : TestworkSettings
        problems : list of Problem
            Added to.
        """
        name, assays, bounds = read
        at = np.array(rows)
        there = (bounds[at] == 0) & ~np.isnan(assays[at])
        if not there.any():
            return None
        parts = []
        for sign in (1, -1):
            chosen = at[there & (self.part[at] == sign)]
            mass = self.mass_g[chosen]
            if not chosen.size or np.isnan(mass).all():
                problems.append(self._lacks(sign, name, numbers))
                return None
            parts.append(_part(assays[chosen], float(np.nanmean(mass)), sign, name, settings))
        (coarse, coarse_sd, coarse_g), (fine, fine_sd, fine_g) = parts
        total = coarse_g + fine_g
        mean = (coarse_g * coarse + fine_g * fine) / total
        sd = float(np.hypot(coarse_g * coarse_sd, fine_g * fine_sd)) / total
        scatter = settings.precision_of("head", name)[1] * mean
        return Head(mean, sd, 1, scatter, (mean,), (sd,), numbers[:1])

    def _lacks(self, sign: int, name: str, numbers: tuple[int, ...]) -> Problem:
        which = "coarse" if sign > 0 else "fine"
        return Problem(
            self.file,
            numbers[0],
            "screen fraction",
            "ask",
            f"the screen assay has no {which} fraction with mass and {name}; it is not used",
            "a plus and a minus fraction, each with its mass and assay",
            "fill in both rows",
        )


def _part(
    assays: Array, mass_g: float, sign: int, name: str, settings: TestworkSettings
) -> tuple[float, float, float]:
    """Mean, its standard deviation and the mass of one fraction."""
    mean = float(assays.mean())
    sd = float(settings.sd("head", mean, name)) / np.sqrt(assays.size)
    if sign < 0 and assays.size > 1 and assays.std(ddof=1) > 0.0:
        sd = float(assays.std(ddof=1)) / np.sqrt(assays.size)
    return mean, float(sd), mass_g


def read_screens(reader: CellReader) -> Screens:
    """Return the screen fractions of a heads sheet."""
    mass = reader.numbers("screened")
    signs = [_sign(text) for text in reader.texts("screen")]
    for i, (sign, text) in enumerate(zip(signs, reader.texts("screen"), strict=True)):
        if text and sign == 0:
            reader.problems.append(_no_fraction(reader, i, text))
    empty = np.full(len(signs), np.nan)
    return Screens(
        np.array(signs, dtype=np.int64), empty if mass is None else mass, reader.sheet.file
    )


def _sign(text: str) -> int:
    folded = text.casefold().strip()
    for sign, words in ((1, _COARSE), (-1, _FINE)):
        if any(folded == word or folded.startswith(f"{word} ") for word in words):
            return sign
        if len(folded) > 1 and folded[0] in words and folded[1].isdigit():
            return sign
    return 0


def _no_fraction(reader: CellReader, i: int, text: str) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        reader.uses["screen"].heading,
        "ask",
        f"{text!r} is no screen fraction; the row counts as a plain assay",
        "plus or minus",
        'write "plus" for what stays on the screen and "minus" for what passes',
    )
