"""What a column is given as, against what the campaign counts in: cyanide, lime, oxides, salts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from leachkin.chemistry import molar_mass, parse_formula
from leachkin.errors import InputProblems

#: Formulas of one family and how many of what counts each holds.
_CYANIDES = {"NaCN": 1, "KCN": 1, "CN": 1, "HCN": 1, "Ca(CN)2": 2}
_LIMES = {"CaO": 1, "Ca(OH)2": 1}
#: Equivalents a mole, in acid and base titration (cyanide: of CN).
_EQUIVALENTS = {
    "H2SO4": 2, "HCl": 1, "HNO3": 1, "HClO4": 1, "NaOH": 1, "KOH": 1, "NH3": 1, "Na2CO3": 2,
    "Ca(OH)2": 2, "CaO": 2, "CaCO3": 2, **_CYANIDES,
}  # fmt: skip
#: Elements that do not make a compound a compound of theirs.
_PARTNERS = frozenset({"O", "H"})


@dataclass(frozen=True)
class Basis:
    """A formula counted as another: grams of ``name`` in a gram of what was written."""

    name: str
    factor: float


def as_reagent(formula: str, reagent: str | None) -> Basis:
    """Return a formula as the campaign's reagent where they count the same thing.

    Examples
    --------
    >>> basis = as_reagent("KCN", "NaCN")
    >>> basis.name, round(basis.factor, 3)
    ('NaCN', 0.753)
    >>> as_reagent("CaO", "NaCN")
    Basis(name='CaO', factor=1.0)
    """
    if not reagent or formula == reagent:
        return Basis(formula, 1.0)
    for family in (_CYANIDES, _LIMES):
        if formula in family and reagent in family:
            per_gram = family[formula] / molar_mass(formula)
            return Basis(reagent, per_gram * molar_mass(reagent) / family[reagent])
    return Basis(formula, 1.0)


def as_element(formula: str, metals: Sequence[str]) -> Basis | None:
    """Return a compound as its metal; None where it is an element already or names no one metal.

    Parameters
    ----------
    formula : str
        As ``"U3O8"``.
    metals : sequence of str
        The campaign's metals: one of them in the formula is the one meant. Without any, the one
        element beside oxygen and hydrogen is.

    Examples
    --------
    >>> basis = as_element("U3O8", ["U"])
    >>> basis.name, round(basis.factor, 4)
    ('U', 0.848)
    >>> as_element("Cu", ["Cu"]) is None
    True
    """
    if formula in _EQUIVALENTS or formula.endswith(("+", "-")):
        return None
    try:
        counts = parse_formula(formula)
        total = molar_mass(formula)
    except InputProblems:
        return None
    if len(counts) < 2:
        return None
    named = [element for element in counts if element in metals]
    if not named:
        named = [element for element in counts if element not in _PARTNERS]
    if len(named) != 1:
        return None
    return Basis(named[0], counts[named[0]] * molar_mass(named[0]) / total)


def grams_per_mole(formula: str, spelling: str) -> float | None:
    """Return grams a mole ("M") or an equivalent ("N"); None where it is not known.

    Examples
    --------
    >>> round(grams_per_mole("H2SO4", "N"), 2)
    49.04
    """
    try:
        mass = molar_mass(formula)
    except InputProblems:
        return None
    if spelling == "M":
        return mass
    equivalents = _EQUIVALENTS.get(formula)
    return None if equivalents is None else mass / equivalents
