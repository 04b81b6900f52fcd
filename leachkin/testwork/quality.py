"""Duplicates, standards and blanks of a laboratory, and the precision that duplicates show."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from leachkin.errors import UnitError
from leachkin.files import parse_numeral
from leachkin.files.numerals import DecimalMark
from leachkin.problems import Problem
from leachkin.testwork.precision_estimate import DuplicatePrecision, precision_of_squares
from leachkin.testwork.records import Array
from leachkin.units import convert

_BLANK = re.compile(r"\b(?:blank|blk|method blank|reagent blank)\b", re.I)
_STANDARD = re.compile(r"\b(?:standard|std|crm|reference material|control)\b", re.I)
_TAIL = re.compile(r"\b(?:residue|tails?|tailings?)\b", re.I)
_DUPLICATE = re.compile(r"\b(?:dup|duplicate|repeat|rpt|replicate)\b", re.I)


@dataclass(frozen=True)
class QualityRecord:
    """One assay of a blank, a standard or a duplicate, as it stands in the file.

    Attributes
    ----------
    kind : str
        "blank", "standard" or "duplicate".
    sample, analyte, text, unit, expected : str
        As written; ``expected`` is the certified value of a standard.
    file : str
    row : int
    decimal : "." or ","
    job, date : str
        As written; "" where the file has no such column.
    """

    kind: str
    sample: str
    analyte: str
    text: str
    unit: str
    expected: str
    file: str
    row: int
    decimal: DecimalMark = "."
    job: str = ""
    date: str = ""

    @property
    def is_below(self) -> bool:
        """True for "<x"."""
        return self.text.strip().startswith(("<", "\u2264"))

    @property
    def certified(self) -> float | None:
        """The certified value of a standard, in the unit of the assay; None without one."""
        return _number(self.expected, self.decimal)

    def value(self, target: str) -> float | None:
        """Return the assay in a unit; None where it is no number or the unit does not fit."""
        try:
            return convert(parse_numeral(self.text, self.decimal), self.unit, target)
        except (ValueError, UnitError):
            return None


def kind_of_sample(kind: str, sample: str) -> str:
    """Return "blank", "standard", "duplicate" or "" by the type given, else by the name.

    Examples
    --------
    >>> kind_of_sample("CRM", "X1"), kind_of_sample("", "Reagent blank 2"), kind_of_sample("", "B1")
    ('standard', 'blank', '')
    """
    for text in (kind, sample):
        for name, pattern in (
            ("blank", _BLANK),
            ("standard", _STANDARD),
            ("duplicate", _DUPLICATE),
        ):
            if text and pattern.search(text.replace("_", " ")):
                return name
    return ""


def precision_of_pairs(first: Array, second: Array) -> DuplicatePrecision | None:
    """Return the precision of one assay from pairs of duplicates, by maximum likelihood.

    The difference of a pair is normal with variance 2 (floor + proportional * mean)^2. With few
    pairs the floor is held at 0.

    Parameters
    ----------
    first, second : ndarray, shape (n,)
        Assays of the same samples, in one unit.

    Returns
    -------
    DuplicatePrecision or None
        None with fewer than three pairs above 0, or where no pair differs.

    Examples
    --------
    >>> import numpy as np
    >>> found = precision_of_pairs(np.full(4, 1.0), np.full(4, 1.02))
    >>> round(found.proportional, 4)
    0.014
    """
    one, other = np.asarray(first, dtype=float), np.asarray(second, dtype=float)
    good = np.isfinite(one + other) & (one + other > 0.0)
    mean, difference = 0.5 * (one + other)[good], (one - other)[good]
    return precision_of_squares(mean, 0.5 * difference**2, np.ones(mean.size))


@dataclass(frozen=True)
class DuplicatePair:
    """Two assays of one sample; ``kind`` is "solution", "head" or "tail" as in the precision."""

    kind: str
    first: QualityRecord
    second: QualityRecord


def sample_without_mark(sample: str) -> str:
    """Return the name of a sample without the word that marks it as a duplicate.

    Examples
    --------
    >>> sample_without_mark("B40-24h dup")
    'B40-24h'
    """
    return _DUPLICATE.sub("", sample.replace("_", " ")).strip(" -:#")


def kind_of_pair(sample: str, first: QualityRecord, second: QualityRecord) -> str:
    """Return "solution", "tail" or "head" for a pair, by its unit and its name."""
    if first.value("g/L") is not None and second.value("g/L") is not None:
        return "solution"
    return "tail" if _TAIL.search(sample) else "head"


_UNITS = {"solution": "g/L", "head": "kg/t", "tail": "kg/t"}


def pair_values(pairs: Sequence[DuplicatePair], kind: str) -> tuple[Array, Array]:
    """Return the assays of the pairs of a kind [g/L or kg/t], those left out that are no numbers.

    Returns
    -------
    first, second : ndarray, shape (n,)
    """
    unit = _UNITS[kind]
    both = [(p.first.value(unit), p.second.value(unit)) for p in pairs if p.kind == kind]
    known = [pair for pair in both if None not in pair]
    array = np.array(known, dtype=float).reshape(len(known), 2)
    return array[:, 0], array[:, 1]


def quality_notes(
    records: Sequence[QualityRecord], pairs: Sequence[DuplicatePair], file: str
) -> list[Problem]:
    """Return what blanks, standards and duplicates say, with the precision to paste."""
    found = []
    for kind, unit in _UNITS.items():
        precision = precision_of_pairs(*pair_values(pairs, kind))
        if precision is not None:
            text = f"{100.0 * precision.proportional:.2g} %"
            if precision.floor > 0.0:
                text += f" + {precision.floor:.2g} {unit}"
            words = f"{precision.pairs} pairs of {kind} assays agree with one standard deviation"
            line = f'precision.{kind} = "{text}"'
            try_this = f'write {kind} = "{text}" under [precision] in the settings'
            found.append(Problem(file, None, "", "note", f"{words} of {text}", "", try_this, line))
    if standards := [r for r in records if r.kind == "standard"]:
        found.append(Problem(file, standards[0].row, "", "note", _of_standards(standards)))
    if blanks := [r for r in records if r.kind == "blank"]:
        words = ", ".join(f"{r.sample} {r.analyte} {r.text} {r.unit}" for r in blanks[:6])
        found.append(Problem(file, blanks[0].row, "", "note", f"{len(blanks)} blanks: {words}"))
    return found


def _of_standards(standards: Sequence[QualityRecord]) -> str:
    words = []
    for record in standards:
        value, expected = record.value(record.unit), record.certified
        if value is not None and expected:
            off = 100.0 * (value / expected - 1.0)
            words.append(f"{record.sample} {record.analyte} {off:+.1f} %")
    told = f", off the certified value by: {', '.join(words[:8])}" if words else ""
    return f"{len(standards)} assays of standards{told}"


def _number(text: str, decimal: DecimalMark) -> float | None:
    try:
        return parse_numeral(text, decimal)
    except ValueError:
        return None
