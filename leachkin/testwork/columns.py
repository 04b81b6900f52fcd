"""What the columns of a sheet mean: names in any order, units from the headings."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from leachkin.errors import UnitError, nearest_names
from leachkin.files import Sheet
from leachkin.problems import Problem, unit_problem
from leachkin.units import convert, known_spellings, split_heading

FREE_TEXT = ("note", "remark", "comment")
_SYMBOLS = (
    "H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As Se "
    "Br Kr Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe Cs Ba La Ce Pr Nd Pm Sm Eu Gd Tb "
    "Dy Ho Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn Fr Ra Ac Th Pa U Np Pu"
)
ELEMENTS = frozenset(_SYMBOLS.split())
ANALYTE = r"(?P<analyte>[A-Z][a-z]?(?:[1-9]?[+-])?)"  #: an element, or an ion of it as Fe2+
FORMULA = r"(?P<formula>(?:[A-Z][a-z]?[0-9]*|\((?:[A-Z][a-z]?[0-9]*)+\)[0-9]*)+)"


@dataclass(frozen=True)
class Field:
    """A column with a fixed name.

    Attributes
    ----------
    key : str
    heading : str
        How to write it, with a usual unit, as ``"time (h)"``.
    units : tuple of str
        Target units, the first that fits; empty for text, ("",) for a bare number.
    names : tuple of str
        Other names that are read.
    needed : bool
    """

    key: str
    heading: str
    units: tuple[str, ...] = ()
    names: tuple[str, ...] = ()
    needed: bool = False


@dataclass(frozen=True)
class Family:
    """Columns named after an element or a formula.

    ``key`` begins the key of each, as ``assay:Cu``; ``heading`` has ``{}`` for the name.
    """

    key: str
    heading: str
    pattern: str
    units: tuple[str, ...]
    examples: tuple[str, ...]


@dataclass(frozen=True)
class Use:
    """What a column of a sheet is used for.

    ``target`` is "" for text and bare numbers, else the unit that values are converted to.
    """

    position: int
    heading: str
    spelling: str
    target: str

    def scale(self) -> float:
        """Return the factor to the target unit (not for temperatures)."""
        return convert(1.0, self.spelling, self.target) if self.target else 1.0


def resolve_columns(
    sheet: Sheet, fields: Sequence[Field], families: Sequence[Family], problems: list[Problem]
) -> dict[str, Use]:
    """Find what each column means; what cannot be used is left out and told in problems.

    Parameters
    ----------
    sheet : Sheet
    fields, families : sequence
    problems : list of Problem
        Added to.

    Returns
    -------
    dict of key to Use
    """
    by_name = {_folded(name): f for f in fields for name in _names_of(f)}
    uses: dict[str, Use] = {}
    for position, heading in enumerate(sheet.header):
        if heading.casefold().startswith(FREE_TEXT):
            continue
        name, spelling = split_heading(heading)
        meaning = _meaning(name, by_name, families)
        if meaning is None:
            problems.append(_unknown(sheet, heading, fields, families))
            continue
        key, example, units = meaning
        use, problem = _use(sheet, position, spelling, units, example)
        if use is not None and (key := _keyed(key, use, units)) in uses:
            problem = _twice(sheet, heading, uses[key].heading)
        if problem is not None:
            problems.append(problem)
        elif use is not None:
            uses[key] = use
    problems.extend(_not_there(sheet, fields, uses))
    return uses


def of_family(uses: Mapping[str, Use], key: str) -> dict[str, Use]:
    """Return the columns of a family by element or formula."""
    start = f"{key}:"
    return {name[len(start) :]: use for name, use in uses.items() if name.startswith(start)}


def _folded(name: str) -> str:
    return re.sub(r"[\s_-]+", "", name.casefold())


def _names_of(field: Field) -> tuple[str, ...]:
    return (split_heading(field.heading)[0], *field.names)


def _meaning(
    name: str, by_name: Mapping[str, Field], families: Sequence[Family]
) -> tuple[str, str, tuple[str, ...]] | None:
    field = by_name.get(_folded(name))
    if field is not None:
        return field.key, field.heading, field.units
    for family in families:
        match = re.fullmatch(family.pattern, " ".join(name.split()))
        if match and _symbols_known(match):
            named = match.group(0) if "whole" in match.groupdict() else match.group(1)
            return f"{family.key}:{named}", family.heading.format(named), family.units
    return None


def _symbols_known(match: re.Match[str]) -> bool:
    """Whether every capital of the matched name begins the symbol of an element."""
    named = next(
        text for key, text in match.groupdict().items() if key in ("analyte", "formula") and text
    )
    return set(re.findall(r"[A-Z][a-z]?", named)) <= ELEMENTS


def _use(
    sheet: Sheet, position: int, spelling: str | None, units: tuple[str, ...], example: str
) -> tuple[Use | None, Problem | None]:
    heading = sheet.header[position]
    if not units or units == ("",):
        return Use(position, heading, "", ""), None
    if not spelling:
        accepted = ", ".join(s for unit in units for s in known_spellings(unit)[:6])
        problem = Problem(
            sheet.file,
            sheet.header_row,
            heading,
            "stop",
            "the heading has no unit",
            accepted,
            f'write it as "{example}"',
        )
        return None, problem
    errors = []
    for target in units:
        try:
            convert(1.0, spelling, target)
        except UnitError as error:
            errors.append(error)
            continue
        return Use(position, heading, spelling, target), None
    where = {"file": sheet.file, "column": heading}
    return None, unit_problem(errors[0], row=sheet.header_row, **where)


def _keyed(key: str, use: Use, units: tuple[str, ...]) -> str:
    """Where a family takes two kinds of unit, the second kind has its own key."""
    return f"{key}@{use.target}" if len(units) > 1 else key


def _twice(sheet: Sheet, heading: str, first: str) -> Problem:
    return Problem(
        sheet.file,
        sheet.header_row,
        heading,
        "stop",
        f"it means the same as column {first!r}",
        "each quantity in one column",
        "begin one of the headings with 'note' to keep it out",
    )


def _unknown(
    sheet: Sheet, heading: str, fields: Sequence[Field], families: Sequence[Family]
) -> Problem:
    known = [field.heading for field in fields]
    known += [family.heading.format(name) for family in families for name in family.examples]
    near = nearest_names(heading, known)
    keep_out = f"begin it with 'note' to keep it out: \"note {heading}\""
    hint = f"did you mean {' or '.join(near)}? Or {keep_out}" if near else keep_out
    found = f"unknown column {heading!r}"
    return Problem(sheet.file, sheet.header_row, heading, "stop", found, ", ".join(known), hint)


def _not_there(sheet: Sheet, fields: Sequence[Field], uses: Mapping[str, Use]) -> list[Problem]:
    if not sheet.header:
        return []
    written = {_folded(split_heading(heading)[0]) for heading in sheet.header}
    return [
        Problem(
            sheet.file,
            sheet.header_row,
            "",
            "stop",
            f"there is no column {field.heading!r}",
            ", ".join(f.heading for f in fields if f.needed),
            f'add a column "{field.heading}"',
        )
        for field in fields
        if field.needed
        and field.key not in uses
        and not any(_folded(name) in written for name in _names_of(field))
    ]
