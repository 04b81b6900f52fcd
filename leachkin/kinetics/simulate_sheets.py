"""Simulated tests as the sheets that a laboratory would send, to plan with and to try things on."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.files import whole_directory, write_csv, write_text
from leachkin.kinetics.simulate import Noise, SimulatedTest
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
#: What a laboratory writes down.
DIGITS = 6
DEFAULT_DOMAIN = "ore"
#: Mass of a sieved sample [g].
SIEVED_g = 1000.0


def simulated_sheets(
    tests: Sequence[SimulatedTest], metal: str = "Cu", reagent: str | None = "H2SO4"
) -> dict[str, ResultTable]:
    """Return the sheets of simulated tests by name: tests, readings, heads, closeout, sieves.

    Parameters
    ----------
    tests : sequence of SimulatedTest
        Of ``simulate_tests``.
    metal : str
        What dissolves, by its symbol.
    reagent : str or None
        By its formula; without one strength is not written.

    Returns
    -------
    dict of str to ResultTable
        Columns as in the reference of the sheets. ``sieves`` only where a charge has more than one
        size. Numbers to six digits.

    Raises
    ------
    InputProblems
        Without tests, or where size classes have no edges and cannot get any.
    """
    if not tests:
        raise argument_error("tests", "none", "at least one simulated test")
    records = {
        "tests": [_test_record(test) for test in tests],
        "readings": [record for test in tests for record in _reading_records(test)],
        "heads": _head_records(tests),
        "closeout": [_closeout_record(test) for test in tests],
        "sieves": [record for test in tests for record in _sieve_records(test)],
    }
    columns = _columns(metal, reagent)
    return {
        name: ResultTable.from_records(name, _used(columns[name], rows), rows)
        for name, rows in records.items()
        if rows
    }


def write_simulated(
    tests: Sequence[SimulatedTest],
    folder: str | Path,
    *,
    noise: Noise | None = None,
    metal: str = "Cu",
    reagent: str | None = "H2SO4",
    title: str = "Simulated tests",
    overwrite: bool = False,
) -> Path:
    """Write simulated tests as a campaign: the sheets as CSV, and ``campaign.toml`` beside them.

    Parameters
    ----------
    tests, metal, reagent
        As in ``simulated_sheets``.
    folder : str or Path
        New or empty; written whole or not at all.
    noise : Noise, optional
        What the tests were simulated with: it becomes the stated precision.
    title : str
    overwrite : bool
        Replace an earlier campaign of the same kind.

    Returns
    -------
    Path
        The campaign file.

    Raises
    ------
    InputProblems
        As in ``simulated_sheets``, and for a folder that may not be used.
    """
    sheets = simulated_sheets(tests, metal, reagent)
    settings = _settings(sheets, noise or Noise(), metal, reagent, title)
    with whole_directory(folder, overwrite, marker="campaign.toml") as part:
        for name, table in sheets.items():
            write_csv(table, part / f"{name}.csv")
        write_text(settings, part / "campaign.toml")
    return Path(folder) / "campaign.toml"


def _settings(
    sheets: dict[str, ResultTable], noise: Noise, metal: str, reagent: str | None, title: str
) -> str:
    quoted = title.replace("\\", "/").replace('"', "'").replace("\n", " ")
    lines = ["format = 1", "[campaign]", f'title = "{quoted}"', f'metals = ["{metal}"]']
    lines += [f'reagent = "{reagent}"'] if reagent else []
    lines += ["[tables]", *(f'{name} = "{name}.csv"' for name in sheets), "[precision]"]
    for name in ("solution", "tail", "head", "residue"):
        value = getattr(noise, name)
        lines += [f'{name} = "{100.0 * value:.6g} %"'] if value > 0.0 else []
    return "\n".join(lines)


def _columns(metal: str, reagent: str | None) -> dict[str, list[Column]]:
    strength = f"start {reagent}" if reagent else ""
    grade = Column("grade", metal, "%")
    tests = [
        Column("test", "test"),
        Column("domain", "domain"),
        Column("kind", "kind"),
        Column("solids", "dry solids", "g"),
        Column("solution", "solution", "mL"),
        Column("size", "size", "mm"),
        Column("temperature", "temperature", "degC"),
        Column("strength", strength, "g/L"),
        Column("aliquots", "aliquots"),
        Column("stirring", "stirring", "rpm"),
    ]
    readings = [
        Column("test", "test"),
        Column("time", "time", "h"),
        Column("aliquot", "aliquot", "mL"),
        Column("metal", metal, "g/L"),
        Column("temperature", "temperature", "degC"),
        Column("free", f"free {reagent}", "g/L"),
        Column("added", f"{reagent} added", "g"),
    ]
    without = ("strength", "free", "added") if reagent is None else ()
    return {
        "tests": [column for column in tests if column.key not in without],
        "readings": [column for column in readings if column.key not in without],
        "heads": [Column("domain", "domain"), grade],
        "closeout": [
            Column("test", "test"),
            Column("product", "product"),
            Column("mass", "mass", "g"),
            grade,
        ],
        "sieves": [
            Column("test", "test"),
            Column("aperture", "aperture", "mm"),
            Column("retained", "retained", "g"),
            grade,
        ],
    }


def _used(columns: list[Column], records: list[dict[str, Any]]) -> list[Column]:
    """Columns that hold something, and those of species that only these readings have."""
    known = {column.key for column in columns}
    others = dict.fromkeys(key for record in records for key in record if key not in known)
    added = [Column(key, key, "" if key == "pH" else "g/L") for key in others]
    return [c for c in (*columns, *added) if any(r.get(c.key) is not None for r in records)]


def _rounded(value: float) -> float:
    return float(f"{value:.{DIGITS}g}")


def _domain(test: SimulatedTest) -> str:
    return test.bottle.domain or DEFAULT_DOMAIN


def _test_record(test: SimulatedTest) -> dict[str, Any]:
    bottle = test.bottle
    single = bottle.sizes.classes == 1
    return {
        "test": bottle.name,
        "domain": _domain(test),
        "kind": "bottle roll",
        "solids": bottle.solids_g,
        "solution": bottle.solution_mL,
        "size": _rounded(float(bottle.sizes.size_mm[0])) if single else None,
        "temperature": _rounded(bottle.temperature_K - ZERO_CELSIUS_K),
        "strength": bottle.reagent_g_per_L,
        "aliquots": bottle.aliquots,
        "stirring": bottle.stirring_rpm,
    }


def _reading_records(test: SimulatedTest) -> Iterator[dict[str, Any]]:
    bottle, course = test.bottle, test.history
    logged: dict[str, Array] = {}
    if course is not None:
        read = {"temperature": course.temperature_K - ZERO_CELSIUS_K, **course.others}
        logged = {k: np.interp(bottle.time_h, course.time_h, v) for k, v in read.items()}
    for i, time in enumerate(bottle.time_h.tolist()):
        record = {
            "test": bottle.name,
            "time": time,
            "aliquot": bottle.aliquot_mL,
            "metal": _rounded(float(test.solution_g_per_L[i])),
            "free": _rounded(float(test.free_reagent_g_per_L[i])),
        }
        if bottle.strength_is_held:
            record["added"] = _rounded(float(test.reagent_added_g[i]))
        yield record | {name: _rounded(float(values[i])) for name, values in logged.items()}


def _head_records(tests: Sequence[SimulatedTest]) -> list[dict[str, Any]]:
    heads = {_domain(test): test.head_assay_kg_per_t for test in tests}
    return [{"domain": d, "grade": _rounded(0.1 * head)} for d, head in heads.items()]


def _closeout_record(test: SimulatedTest) -> dict[str, Any]:
    return {
        "test": test.bottle.name,
        "product": "residue",
        "mass": _rounded(test.residue_g),
        "grade": _rounded(0.1 * test.tail_kg_per_t),
    }


def _sieve_records(test: SimulatedTest) -> Iterator[dict[str, Any]]:
    """Coarse to fine, from the sieve that everything passes; a class without width is the pan."""
    sizes = test.bottle.sizes
    if sizes.classes == 1:
        return
    order = np.argsort(sizes.size_mm)[::-1]
    mass, metal = sizes.mass_share[order], sizes.metal_share[order]
    edges = _edges(sizes, order)
    assayed = not np.allclose(mass, metal, rtol=1e-9)
    yield {"test": test.bottle.name, "aperture": float(edges[0]), "retained": 0.0} | (
        {"grade": 0.0} if assayed else {}
    )
    for i, lower in enumerate(edges[1:].tolist()):
        record = {
            "test": test.bottle.name,
            "aperture": 0.0 if lower == edges[i] else lower,
            "retained": SIEVED_g * float(mass[i]),
        }
        if assayed:
            share = float(metal[i] / mass[i]) if mass[i] > 0.0 else 0.0
            record["grade"] = 0.1 * test.head_assay_kg_per_t * share
        yield record


def _edges(sizes: SizeDistribution, order: NDArray[np.intp]) -> Array:
    """Edges coarse to fine whose geometric means are the sizes of the classes."""
    if sizes.edges_mm is not None:
        return np.sort(sizes.edges_mm)[::-1]
    size = sizes.size_mm[order]
    edges = [float(size[0] * np.sqrt(size[0] / size[1]))]
    for each in size.tolist():
        edges.append(each * each / edges[-1])
    found = np.array(edges)
    if not np.all(np.diff(found) < 0.0):
        raise argument_error(
            "sizes", "classes without edges, unevenly spaced", "SizeDistribution.from_classes"
        )
    return found
