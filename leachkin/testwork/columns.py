"""What the columns of a sheet mean: names in any order, units from the headings."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from leachkin.errors import UnitError, nearest_names
from leachkin.files import Sheet
from leachkin.problems import Problem
from leachkin.testwork.answers import Answers
from leachkin.testwork.bases import Basis, as_element, as_reagent
from leachkin.testwork.settings import TestworkSettings
from leachkin.testwork.trade_names import Question, as_trade_name, plain_text
from leachkin.testwork.written_units import Heading, read_unit
from leachkin.units import convert, is_spelling, known_spellings, split_heading

FREE_TEXT = ("note", "remark", "comment")
_SYMBOLS = (
    "H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As Se "
    "Br Kr Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe Cs Ba La Ce Pr Nd Pm Sm Eu Gd Tb "
    "Dy Ho Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn Fr Ra Ac Th Pa U Np Pu"
)
ELEMENTS = frozenset(_SYMBOLS.split())
ANALYTE = r"(?P<analyte>[A-Z][a-z]?(?:[1-9]?[+-])?)"  #: an element, or an ion of it as Fe2+
_PARTS = r"(?:[A-Z][a-z]?[0-9]*|\((?:[A-Z][a-z]?[0-9]*)+\)[0-9]*)+"
#: An element, an ion, or a compound of a metal as U3O8 or CuSO4.5H2O.
ASSAYED = rf"(?P<analyte>[A-Z][a-z]?(?:[1-9]?[+-])?|{_PARTS}(?:\.[0-9]*{_PARTS})?)"
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
    in_words : bool
        True where the cells are words that may hold their own unit; the heading's unit is kept.
    """

    key: str
    heading: str
    units: tuple[str, ...] = ()
    names: tuple[str, ...] = ()
    needed: bool = False
    in_words: bool = False


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

    ``target`` is "" for text and bare numbers, else the unit that values are converted to; the
    converted number is multiplied by ``factor``, and ``added`` is added to it. ``series`` names
    the sieve series of mesh numbers.
    """

    position: int
    heading: str
    spelling: str
    target: str
    factor: float = 1.0
    series: str = ""
    added: float = 0.0

    def scale(self) -> float:
        """Return the factor to the target unit (not for temperatures)."""
        one = convert(1.0, self.spelling, self.target) if self.target else 1.0
        return one * self.factor


@dataclass(frozen=True)
class _Meaning:
    """A column that is known: its key, how to write it, its units, and the formula in its name."""

    key: str
    example: str
    units: tuple[str, ...]
    formula: str = ""
    in_words: bool = False


def resolve_columns(
    sheet: Sheet,
    fields: Sequence[Field],
    families: Sequence[Family],
    problems: list[Problem],
    settings: TestworkSettings | None = None,
    kind: str = "",
) -> dict[str, Use]:
    """Find what each column means; what cannot be used is left out and told in problems.

    Parameters
    ----------
    sheet : Sheet
    fields, families : sequence
    problems : list of Problem
        Added to.
    settings : TestworkSettings, optional
        For the metals, the reagent and the answers that units hang on.
    kind : str
        Name of the sheet, as "readings".

    Returns
    -------
    dict of key to Use
    """
    resolver = _Resolver(sheet, fields, families, problems, settings, kind)
    return resolver.resolved()


def of_family(uses: Mapping[str, Use], key: str) -> dict[str, Use]:
    """Return the columns of a family by element or formula."""
    start = f"{key}:"
    return {name[len(start) :]: use for name, use in uses.items() if name.startswith(start)}


def fold_heading(name: str) -> str:
    """Return a name without case, spaces, hyphens, underscores, dots and colons."""
    return re.sub(r"[\s_.:-]+", "", name.casefold())


class _Resolver:
    """Walks the headings of one sheet."""

    def __init__(
        self,
        sheet: Sheet,
        fields: Sequence[Field],
        families: Sequence[Family],
        problems: list[Problem],
        settings: TestworkSettings | None,
        kind: str,
    ) -> None:
        self.sheet, self.fields, self.families = sheet, fields, families
        self.problems, self.settings, self.kind = problems, settings, kind
        self.by_name: dict[str, list[Field]] = {}
        for field in fields:
            for name in _names_of(field):
                self.by_name.setdefault(fold_heading(name), []).append(field)
        self.uses: dict[str, Use] = {}
        self.converted: set[str] = set()
        self.seen: set[str] = set()

    def resolved(self) -> dict[str, Use]:
        for position, heading in enumerate(self.sheet.header):
            if heading.casefold().startswith(FREE_TEXT):
                continue
            self._read(position, heading)
        self.problems.extend(self._not_there())
        return self.uses

    def _read(self, position: int, heading: str) -> None:
        found = self._meaning_of(heading)
        if found is None:
            self.problems.append(self._unknown(heading))
            return
        meaning, spelling, question = found
        self.seen.add(meaning.key)
        if question is not None:
            self.problems.append(self._question(heading, question))
            return
        use = self._use(position, heading, meaning, spelling)
        if use is None:
            return
        key, use, converted = self._on_its_basis(meaning, use)
        key = f"{key}@{use.target}" if len(meaning.units) > 1 else key
        if key not in self.uses:
            self.uses[key] = use
            self.converted |= {key} if converted else set()
        elif converted or key in self.converted:
            if key in self.converted and not converted:
                self.uses[key], use = use, self.uses[key]
                self.converted.discard(key)
            self.problems.append(self._note(use.heading, "the same is in another column; not used"))
        else:
            self.problems.append(self._twice(heading, self.uses[key].heading))

    def _meaning_of(self, heading: str) -> tuple[_Meaning, str | None, Question | None] | None:
        without_unit: tuple[_Meaning, str | None, Question | None] | None = None
        for name, spelling in heading_candidates(heading):
            found = self._named(name, spelling)
            if found is None:
                continue
            if spelling or not found[0].units or found[0].units == ("",):
                return found[0], spelling, found[1]
            without_unit = without_unit or (found[0], spelling, found[1])
        return without_unit

    def _named(self, name: str, spelling: str | None) -> tuple[_Meaning, Question | None] | None:
        meaning = self._field(name, spelling) or self._family(name)
        if meaning is not None:
            return meaning, None
        if self.settings is None:
            return None
        trade, question = as_trade_name(name, self.settings, self.kind)
        meaning = self._family(trade) if trade != name else None
        return None if meaning is None else (meaning, question)

    def _field(self, name: str, spelling: str | None) -> _Meaning | None:
        """The field of that name; of several, the one that the unit fits."""
        fields = self.by_name.get(fold_heading(name), [])
        if not fields:
            return None
        fitting = [f for f in fields if unit_fits(spelling, f.units)] if len(fields) > 1 else fields
        chosen = (fitting or fields)[0]
        return _Meaning(chosen.key, chosen.heading, chosen.units, in_words=chosen.in_words)

    def _family(self, name: str) -> _Meaning | None:
        for family in self.families:
            match = re.fullmatch(family.pattern, " ".join(name.split()))
            if match and _symbols_known(match):
                whole = "whole" in match.groupdict()
                named = match.group(0) if whole else match.group(1)
                formula = next(
                    t for k, t in match.groupdict().items() if k in ("analyte", "formula") and t
                )
                if not self._is_assay(family, named, formula):
                    continue
                heading = family.heading.format(named)
                return _Meaning(f"{family.key}:{named}", heading, family.units, formula)
        return None

    def _is_assay(self, family: Family, named: str, formula: str) -> bool:
        """Whether a compound may stand where elements do: one whose metal is plain."""
        elements = set(re.findall(r"[A-Z][a-z]?", formula))
        if self.kind == "heads" or not family.key.startswith("assay") or len(elements) == 1:
            return True
        return self._as_element(named) is not None

    def _use(
        self, position: int, heading: str, meaning: _Meaning, spelling: str | None
    ) -> Use | None:
        if meaning.in_words:
            return Use(position, heading, spelling or "", "")
        if not meaning.units or meaning.units == ("",):
            return Use(position, heading, "", "")
        if not spelling:
            self.problems.append(self._no_unit(heading, meaning))
            return None
        answers = self.settings.answers if self.settings is not None else Answers()
        place = Heading(
            self.sheet.file, self.sheet.header_row, heading, meaning.key, meaning.formula, spelling
        )
        reading, problems = read_unit(place, meaning.units, answers)
        self.problems.extend(problems)
        if reading is None:
            return None
        return Use(
            position,
            heading,
            reading.spelling,
            reading.target,
            reading.factor,
            reading.series,
            reading.added,
        )

    def _on_its_basis(self, meaning: _Meaning, use: Use) -> tuple[str, Use, bool]:
        """A compound as its metal, another cyanide or lime as the campaign's reagent."""
        family, _, name = meaning.key.partition(":")
        basis: Basis | None = None
        if self.settings is not None and family in ("free", "added", "start"):
            basis = as_reagent(name, self.settings.reagent)
        elif family in ("assay", "made up", "start metal"):
            basis = self._as_element(name)
        if basis is None or basis.name == name:
            return meaning.key, use, False
        found = f"{name} is read as {basis.name}, 1 g as {basis.factor:.4g} g"
        self.problems.append(self._note(use.heading, found))
        return f"{family}:{basis.name}", replace(use, factor=use.factor * basis.factor), True

    def _as_element(self, name: str) -> Basis | None:
        """A compound as its metal; in the heads only where the campaign counts that metal."""
        metals = self.settings.metals if self.settings is not None else ()
        basis = as_element(name, metals)
        if basis is not None and self.kind == "heads" and basis.name not in metals:
            return None
        return basis

    def _note(self, heading: str, found: str) -> Problem:
        return Problem(self.sheet.file, self.sheet.header_row, heading, "note", found)

    def _question(self, heading: str, question: Question) -> Problem:
        place = Heading(self.sheet.file, self.sheet.header_row, heading, "", "", "")
        others = ", or ".join(question.choices[1:])
        return place.ask(
            f"{question.word!r} given as what? The column is not read before that is known",
            " / ".join(question.choices),
            question.paste,
            f"or {others}",
        )

    def _no_unit(self, heading: str, meaning: _Meaning) -> Problem:
        accepted = ", ".join(s for unit in meaning.units for s in known_spellings(unit)[:6])
        return Problem(
            self.sheet.file,
            self.sheet.header_row,
            heading,
            "stop",
            "the heading has no unit",
            accepted,
            f'write it as "{meaning.example}"',
        )

    def _twice(self, heading: str, first: str) -> Problem:
        return Problem(
            self.sheet.file,
            self.sheet.header_row,
            heading,
            "stop",
            f"it means the same as column {first!r}",
            "each quantity in one column",
            "begin one of the headings with 'note' to keep it out",
        )

    def _unknown(self, heading: str) -> Problem:
        known = [field.heading for field in self.fields]
        known += [f.heading.format(name) for f in self.families for name in f.examples]
        near = nearest_names(heading, known)
        if self.sheet.form:
            return Problem(
                self.sheet.file,
                self.sheet.header_row,
                heading,
                "note",
                "this column is not used",
                "",
                f"did you mean {' or '.join(near)}?" if near else "",
            )
        keep_out = f"begin it with 'note' to keep it out: \"note {heading}\""
        hint = f"did you mean {' or '.join(near)}? Or {keep_out}" if near else keep_out
        found = f"unknown column {heading!r}"
        where = (self.sheet.file, self.sheet.header_row, heading)
        return Problem(*where, "stop", found, ", ".join(known), hint)

    def _not_there(self) -> list[Problem]:
        if not self.sheet.header:
            return []
        return [
            Problem(
                self.sheet.file,
                self.sheet.header_row,
                "",
                "stop",
                f"there is no column {field.heading!r}",
                ", ".join(f.heading for f in self.fields if f.needed),
                f'add a column "{field.heading}"',
            )
            for field in self.fields
            if field.needed and field.key not in self.uses and field.key not in self.seen
        ]


def heading_candidates(heading: str) -> list[tuple[str, str | None]]:
    """Return how a heading may part into name and unit, the likeliest first.

    Examples
    --------
    >>> heading_candidates("Cu mg/L")[-1], heading_candidates("Charge g (dry)")[-1]
    (('Cu', 'mg/L'), ('Charge', 'g'))
    """
    text = plain_text(heading)
    name, spelling = split_heading(text)
    found: list[tuple[str, str | None]] = [(name, spelling)]
    if spelling is None and name.casefold().endswith("mesh"):
        found.append((name, "mesh"))
    extra = ""
    if spelling is not None and not is_spelling(spelling.partition(" ")[0]):
        extra = spelling
    bare = name if extra else text
    parts = [*_unit_at_the_end(bare)]
    if extra and extra.casefold() not in _NOT_DRY:
        found += [(f"{n} {extra}", s) for n, s in parts] + parts
    elif extra:
        found += [(f"{n} {extra}", s) for n, s in parts]
    else:
        found += parts
    against = [(re.sub(r"\s+(?:vs\.?|against)\s.*$", "", n), s) for n, s in found]
    return list(dict.fromkeys([*found, *against]))


_NOT_DRY = ("wet", "as received", "ar", "moist", "wmt")


def _unit_at_the_end(text: str) -> list[tuple[str, str | None]]:
    """A unit without brackets: behind the last space, comma or underscore."""
    found: list[tuple[str, str | None]] = []
    spaced = re.sub(r"_per_", "/", text)
    for separator in (" ", ", ", "_"):
        words = spaced.split(separator)
        for count in (2, 1):
            if len(words) <= count:
                continue
            unit = " ".join(words[-count:])
            if is_spelling(unit):
                found.append((separator.join(words[:-count]).strip(" ,_"), unit))
    if spaced.endswith("%") and len(spaced) > 1:
        found.append((spaced[:-1].strip(), "%"))
    if spaced.startswith("% ") or re.match(r"%[A-Z]", spaced):
        found.append((spaced[1:].strip(), "%"))
    return found


def _names_of(field: Field) -> tuple[str, ...]:
    return (split_heading(field.heading)[0], *field.names)


def unit_fits(spelling: str | None, units: tuple[str, ...]) -> bool:
    """Return True where a written unit converts to one of a field's units."""
    if not units or units == ("",):
        return spelling is None
    if spelling is None:
        return False
    for unit in units:
        try:
            convert(1.0, spelling, unit)
        except UnitError:
            continue
        return True
    return False


def _symbols_known(match: re.Match[str]) -> bool:
    """Whether every capital of the matched name begins the symbol of an element."""
    named = next(
        text for key, text in match.groupdict().items() if key in ("analyte", "formula") and text
    )
    return set(re.findall(r"[A-Z][a-z]?", named)) <= ELEMENTS
