"""Units that need more than a factor: tons, mesh, normality, per cent of a solution, electrodes."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from leachkin.errors import UnitError
from leachkin.problems import Problem, unit_problem
from leachkin.tables import read_table
from leachkin.testwork.answers import MESH_SERIES, TONS, Answers
from leachkin.testwork.bases import grams_per_mole
from leachkin.testwork.records import Array
from leachkin.units import convert

#: A spelling with the ton left open, and what it is for each ton.
_PER_TON = {
    **dict.fromkeys(("oz/t", "opt", "oz/ton"), ("ozt/st", "ozt/t", "ozt/lt")),
    **dict.fromkeys(("lb/t", "lb/ton"), ("lb/st", "lb/tonne", "lb/lt")),
    "ton": ("st", "t", "lt"),
}
_BY_MASS = {"%": 10.0, "wt%": 10.0, "mass%": 10.0, "ppm": 1e-3, "mg/kg": 1e-3, "g/kg": 1.0}
#: Target of a potential: millivolts against the standard hydrogen electrode.
SHE_MV = "mV against SHE"
_BY_VOLUME = {"%w/v": 10.0, "g/100mL": 10.0}
_ELECTRODE_WORDS = {
    "she": "SHE",
    "nhe": "SHE",
    "hydrogen": "SHE",
    "sce": "SCE",
    "calomel": "SCE",
    "saturatedcalomel": "SCE",
}


@dataclass(frozen=True)
class UnitReading:
    """How the numbers of a column become numbers in its target unit.

    Attributes
    ----------
    spelling, target : str
        For the conversion by the table of units; the same where nothing is to convert.
    factor : float
        By which the converted number is multiplied.
    series : str
        Sieve series where the numbers are mesh numbers.
    added : float
        What is added to the converted number.
    """

    spelling: str
    target: str
    factor: float = 1.0
    series: str = ""
    added: float = 0.0


@dataclass(frozen=True)
class Heading:
    """A heading as it is read: where it stands, what it is of and in which unit."""

    file: str
    row: int
    column: str
    key: str
    formula: str
    spelling: str

    def ask(self, found: str, allowed: str, paste: str, meaning: str = "") -> Problem:
        """Return a question that a line of the settings answers."""
        table, _, line = paste.partition(" | ")
        try_this = f"write {line} under [{table}] in the settings" + (
            f" ({meaning})" if meaning else ""
        )
        return Problem(
            self.file, self.row, self.column, "ask", found, allowed, try_this, f"{table}.{line}"
        )


def read_unit(
    heading: Heading, targets: tuple[str, ...], answers: Answers
) -> tuple[UnitReading | None, list[Problem]]:
    """Return how a column is read into the first target that its unit fits.

    Parameters
    ----------
    heading : Heading
    targets : tuple of str
    answers : Answers

    Returns
    -------
    reading : UnitReading or None
        None where it cannot be read without an answer, or at all.
    problems : list of Problem
    """
    errors: list[UnitError] = []
    if targets == (SHE_MV,):
        return _eh(heading, answers)
    for target in targets:
        try:
            convert(1.0, heading.spelling, target)
        except UnitError as error:
            errors.append(error)
        else:
            return UnitReading(heading.spelling, target), []
    for target in targets:
        for special in _SPECIAL:
            found = special(heading, target, answers)
            if found is not None:
                return found
    place = {"file": heading.file, "column": heading.column}
    return None, [unit_problem(errors[0], row=heading.row, **place)]


Found = tuple[UnitReading | None, list[Problem]]


def _per_ton(heading: Heading, target: str, answers: Answers) -> Found | None:
    bare = re.sub(r"\s", "", heading.spelling)
    if bare not in _PER_TON:
        return None
    meant = dict(zip(TONS, _PER_TON[bare], strict=True))
    try:
        sizes = {ton: convert(1.0, spelling, target) for ton, spelling in meant.items()}
    except UnitError:
        return None
    if answers.ton is not None:
        return UnitReading(meant[answers.ton], target), []
    shown = "g/t" if bare.startswith("o") else target
    allowed = "; ".join(
        f'ton = "{ton}" is {convert(sizes[ton], target, shown):.5g} {shown}' for ton in TONS
    )
    found = f"{heading.spelling!r}: which ton? The column is not read before that is known"
    return None, [heading.ask(found, allowed, 'sheets | ton = "short"', "or metric, or long")]


def _molar(heading: Heading, target: str, answers: Answers) -> Found | None:
    del answers
    if heading.spelling not in ("M", "N") or target != "g/L" or not heading.formula:
        return None
    grams = grams_per_mole(heading.formula, heading.spelling)
    if grams is None:
        return None
    found = f"1 {heading.spelling} {heading.formula} is read as {grams:.5g} g/L"
    note = Problem(heading.file, heading.row, heading.column, "note", found)
    return UnitReading(target, target, grams), [note]


def _by_mass(heading: Heading, target: str, answers: Answers) -> Found | None:
    bare = re.sub(r"[\s]", "", heading.spelling)
    if target != "g/L":
        return None
    if bare in _BY_VOLUME:
        return UnitReading(target, target, _BY_VOLUME[bare]), []
    if bare not in _BY_MASS:
        return None
    density = answers.solution_density_g_per_mL
    reading = UnitReading(target, target, _BY_MASS[bare] * (density or 1.0))
    if density is not None:
        return reading, []
    found = (
        f"{heading.spelling!r} of a solution is by mass: read at a density of 1 g/mL meanwhile; "
        f"at 1.1 g/mL it would be 10 % more"
    )
    allowed = "g/L, mg/L, or the density of the solutions"
    return reading, [heading.ask(found, allowed, 'sheets | solution_density = "1.00 g/mL"')]


def _mesh(heading: Heading, target: str, answers: Answers) -> Found | None:
    if heading.spelling.casefold() not in ("mesh", "#") or target != "mm":
        return None
    if answers.mesh is not None:
        return UnitReading(target, target, series=answers.mesh), []
    ten = ", ".join(f"{mesh_aperture_mm(s, '10'):.3g} mm {s}" for s in MESH_SERIES)
    found = f"'mesh' of which series? 10 mesh is {ten}. The column is not read before that is known"
    ask = heading.ask(found, " / ".join(MESH_SERIES), 'sheets | mesh = "US"', "or Tyler, or BSS")
    return None, [ask]


def _by_stock(heading: Heading, target: str, answers: Answers) -> Found | None:
    """A reagent added by volume: grams by the strength of the stock solution."""
    if target != "g" or not heading.key.startswith("added"):
        return None
    try:
        litres = convert(1.0, heading.spelling, "L")
    except UnitError:
        return None
    strength = answers.stock_solutions.get(heading.formula)
    if strength is not None:
        return UnitReading(target, target, litres * strength), []
    found = f"{heading.formula} was added by volume; how strong was it? Not read before that"
    line = f'{_bare(heading.formula)} = "1804 g/L"'
    meaning = "sulphuric acid of 98 % and 1.84 g/mL" if heading.formula == "H2SO4" else "yours"
    if heading.formula != "H2SO4":
        line = f'{_bare(heading.formula)} = "100 g/L"'
    allowed = "grams of 100 % reagent, or the strength of what was added"
    return None, [heading.ask(found, allowed, f"sheets.stock_solutions | {line}", meaning)]


def _bare(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else f'"{name}"'


def _eh(heading: Heading, answers: Answers) -> Found:
    unit, written = _split_electrode(heading.spelling)
    in_name = _electrode_in_name(heading.column.partition("(")[0])
    electrode = _electrode(written or in_name) or answers.electrode
    try:
        scale = convert(1.0, unit, "mV")
    except UnitError as error:
        place = {"file": heading.file, "column": heading.column}
        return None, [unit_problem(error, row=heading.row, **place)]
    offset = electrode_offsets_mV().get(electrode or "", 0.0)
    reading = UnitReading("mV", "mV", scale, added=offset)
    if electrode is not None and electrode in electrode_offsets_mV():
        return reading, []
    silver = _silver_offsets()
    found = "Eh against which electrode? Read as against SHE meanwhile"
    if (written or in_name) and electrode is None:
        low, high = min(silver.values()), max(silver.values())
        found = (
            f"Ag/AgCl with which filling? It is {low:g} to {high:g} mV against SHE; read as "
            f"{silver['Ag/AgCl 3 M']:g} mV meanwhile"
        )
        reading = replace(reading, added=silver["Ag/AgCl 3 M"])
    allowed = " / ".join(electrode_offsets_mV())
    return reading, [heading.ask(found, allowed, 'sheets | electrode = "Ag/AgCl 3 M"')]


def _silver_offsets() -> Mapping[str, float]:
    return {k: v for k, v in electrode_offsets_mV().items() if k.startswith("Ag")}


def _split_electrode(text: str) -> tuple[str, str]:
    """A unit or a name, and the electrode written behind it."""
    parts = re.split(r"\s+|,\s*", text.strip(), maxsplit=1)
    if len(parts) == 1:
        return text.strip(), ""
    rest = re.sub(r"^(?:vs\.?|v\.?|against|to)\s+", "", parts[1].strip("() "))
    return parts[0], rest


def _electrode_in_name(name: str) -> str:
    """What stands behind "vs" or "against" in a heading, or an electrode at its end."""
    if match := re.search(r"\b(?:vs\.?|against)\s+(.+?)\s*$", name):
        return re.sub(r"\s+m?V$", "", match[1])
    words = re.sub(r"\s+m?V\s*$", "", name.strip()).split(maxsplit=1)
    return words[1] if len(words) > 1 and _electrode(words[1]) else ""


def _electrode(text: str) -> str | None:
    """The name of an electrode in the table, None where it does not say one."""
    folded = re.sub(r"[\s,()-]+", "", text.casefold())
    for name in electrode_offsets_mV():
        if folded == re.sub(r"[\s,()-]+", "", name.casefold()):
            return name
    folded = folded.replace("kcl", "").replace("sat.", "saturated").replace("sat'd", "saturated")
    for name in electrode_offsets_mV():
        if folded == re.sub(r"[\s,()-]+", "", name.casefold()):
            return name
    return _ELECTRODE_WORDS.get(folded.replace("electrode", ""))


_SPECIAL: tuple[Callable[[Heading, str, Answers], Found | None], ...] = (
    _per_ton,
    _molar,
    _by_mass,
    _mesh,
    _by_stock,
)


@lru_cache(maxsize=1)
def electrode_offsets_mV() -> Mapping[str, float]:
    """Return the potential of each reference electrode against SHE at 25 degC [mV]."""
    rows = read_table("reference_electrodes").rows
    return {row.text("electrode"): row.number("against_she_mV") for row in rows}


@lru_cache(maxsize=1)
def _apertures() -> Mapping[tuple[str, str], float]:
    return {
        (row.text("series"), row.text("mesh")): row.number("aperture_mm")
        for row in read_table("mesh_series").rows
    }


def mesh_aperture_mm(series: str, mesh: str) -> float:
    """Return the aperture of a mesh number [mm], NaN where the series has none.

    Examples
    --------
    >>> mesh_aperture_mm("US", "10"), mesh_aperture_mm("BSS", "10")
    (2.0, 1.7)
    """
    return _apertures().get((series, mesh), float("nan"))


def known_meshes(series: str) -> list[str]:
    """Return the mesh numbers of a series."""
    return [mesh for name, mesh in _apertures() if name == series]


def apertures_of(series: str, meshes: Array) -> Array:
    """Return apertures [mm] for mesh numbers, 0 for 0 (the pan), NaN where the series has none."""
    return np.array([mesh_aperture_mm(series, f"{m:g}") if m else 0.0 for m in meshes])
