"""Formulas read as element counts and charge, and molar masses from standard atomic weights."""

from __future__ import annotations

import re
from functools import cache

from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.tables import read_table

#: A subscript above this is taken for a subscript run into a charge, as in "SO42-".
_LARGEST_SUBSCRIPT = 30
_TOKEN = re.compile(r"([A-Z][a-z]?)|(\()|(\))|(\d+)")
_SPACED_CHARGE = re.compile(r"^(.*\S)[\s^]+(\d*)([+-])$")
_ION_OF_ELEMENT = re.compile(r"^([A-Z][a-z]?)(\d*)([+-])$")
_PLAIN_CHARGE = re.compile(r"^(.+?)([+-])$")
_SIGN_FIRST = re.compile(r"^(.*?)([+-])(\d)$")


def parse_formula(formula: str) -> dict[str, float]:
    """Return how many atoms of each element a formula holds.

    Parameters
    ----------
    formula : str
        As ``"H2SO4"``, ``"Ca(OH)2"``, ``"CuSO4.5H2O"``, ``"Cu2+"``, ``"Ag(CN)2-"`` or
        ``"Cu(CN)3 2-"``: a charge above one stands after a space, except on a bare element.

    Returns
    -------
    dict of str to float

    Raises
    ------
    InputProblems
        If the text is not a formula or names an unknown element (with the nearest ones).

    Examples
    --------
    >>> parse_formula("Ca(OH)2")
    {'Ca': 1.0, 'O': 2.0, 'H': 2.0}
    """
    return dict(_parsed(formula)[0])


def charge_of(formula: str) -> int:
    """Return the charge of a species.

    Parameters
    ----------
    formula : str
        As in :func:`parse_formula`.

    Returns
    -------
    int

    Raises
    ------
    InputProblems
        As :func:`parse_formula`.

    Examples
    --------
    >>> charge_of("Cu2+"), charge_of("Ag(CN)2-"), charge_of("Cu(CN)3 2-"), charge_of("H2O")
    (2, -1, -2, 0)
    """
    return _parsed(formula)[1]


def molar_mass(formula: str) -> float:
    """Return the molar mass of a formula [g/mol].

    Parameters
    ----------
    formula : str
        As in :func:`parse_formula`. The mass of electrons is left out.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        As :func:`parse_formula`.

    Notes
    -----
    Standard atomic weights [ciaaw2021], sulfur 32.06.

    Examples
    --------
    >>> round(molar_mass("H2SO4"), 3)
    98.072
    """
    masses = _atomic_masses()
    return float(sum(masses[element] * count for element, count in _parsed(formula)[0].items()))


def canonical_species(text: str) -> str:
    """Return a species as the tables write it: ``"Cu+2"`` becomes ``"Cu2+"``.

    Examples
    --------
    >>> canonical_species("Cu+2"), canonical_species("Cu(CN)3-2"), canonical_species(" Fe ")
    ('Cu2+', 'Cu(CN)3 2-', 'Fe')
    """
    species = re.sub(r"[\s^]+", " ", text.strip())
    match = _SIGN_FIRST.match(species)
    if match is None:
        return species
    body, sign, digit = match.groups()
    if digit == "1":
        return f"{body}{sign}"
    space = "" if re.fullmatch(r"[A-Z][a-z]?", body) else " "
    return f"{body}{space}{digit}{sign}"


@cache
def _parsed(formula: str) -> tuple[dict[str, float], int]:
    body, charge = _split_charge(formula.strip())
    counts: dict[str, float] = {}
    for part in re.split(r"[.·*]", body):
        multiplier, rest = _leading_number(part, formula)
        for element, count in _count(rest, formula).items():
            counts[element] = counts.get(element, 0.0) + multiplier * count
    known = _atomic_masses()
    for element in counts:
        if element not in known:
            raise InputProblems([unknown_name("element", element, known, column="formula")])
    return counts, charge


def _split_charge(text: str) -> tuple[str, int]:
    for pattern in (_SPACED_CHARGE, _ION_OF_ELEMENT):
        match = pattern.match(text)
        if match is not None:
            body, digits, sign = match.groups()
            return body, int(digits or 1) * (1 if sign == "+" else -1)
    match = _PLAIN_CHARGE.match(text)
    if match is not None:
        return match.group(1), 1 if match.group(2) == "+" else -1
    return text, 0


def _leading_number(part: str, formula: str) -> tuple[float, str]:
    match = re.match(r"^(\d+)(.+)$", part)
    if match is not None:
        return float(match.group(1)), match.group(2)
    if not part:
        raise _not_a_formula(formula)
    return 1.0, part


def _count(body: str, formula: str) -> dict[str, float]:
    stack: list[dict[str, float]] = [{}]
    last: dict[str, float] = {}
    position = 0
    while position < len(body):
        match = _TOKEN.match(body, position)
        if match is None:
            raise _not_a_formula(formula)
        position = match.end()
        element, opening, closing, digits = match.groups()
        if opening:
            stack.append({})
            last = {}
            continue
        if digits:
            _add(stack[-1], last, _subscript(digits, formula) - 1.0)
            last = {}
            continue
        if closing and (len(stack) < 2 or not stack[-1]):
            raise _not_a_formula(formula)
        last = stack.pop() if closing else {element: 1.0}
        _add(stack[-1], last, 1.0)
    if len(stack) != 1:
        raise _not_a_formula(formula)
    return stack[0]


def _subscript(digits: str, formula: str) -> float:
    number = int(digits)
    if not 1 <= number <= _LARGEST_SUBSCRIPT:
        raise argument_error(
            "formula",
            f"{formula!r} has the subscript {digits}",
            f"subscripts of 1 to {_LARGEST_SUBSCRIPT}, a charge after a space",
            'write a charge after a space, as "SO4 2-"',
        )
    return float(number)


def _add(counts: dict[str, float], more: dict[str, float], times: float) -> None:
    for element, count in more.items():
        counts[element] = counts.get(element, 0.0) + times * count


def _not_a_formula(formula: str) -> InputProblems:
    return argument_error(
        "formula",
        f"{formula!r} cannot be read",
        "element symbols with numbers and brackets, as H2SO4 or Ca(OH)2",
        "look at capital letters and brackets",
    )


@cache
def _atomic_masses() -> dict[str, float]:
    rows = read_table("atomic_masses").rows
    return {row.text("element"): row.number("mass_g_per_mol") for row in rows}
