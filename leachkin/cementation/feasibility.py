"""Which metals a precipitant can put out of solution, and what equilibrium leaves of them."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from leachkin.cementation.solution import Precipitant, Solution, metal_couples
from leachkin.chemistry import Cell, cell, molar_mass
from leachkin.errors import InputProblems
from leachkin.problems import Problem, unknown_name
from leachkin.result_table import Column, ResultTable


@dataclass(frozen=True)
class Feasibility:
    """One metal against the precipitant.

    Attributes
    ----------
    metal : str
    cell : Cell
        With both potentials and the range over the sources.
    residual_mol_per_L, residual_g_per_L : float or None
        What equilibrium leaves, the ion of the precipitant at what dissolves; None where
        nothing dissolves.
    verdict : str
        "feasible", "infeasible", or "depends on the source of the potentials".
    note : str
    """

    metal: str
    cell: Cell
    residual_mol_per_L: float | None
    residual_g_per_L: float | None
    verdict: str
    note: str = ""


def feasibility(
    solution: Solution,
    precipitant: Precipitant,
    metals: Iterable[str] | None = None,
    dissolved_mol_per_L: float | None = None,
) -> tuple[Feasibility, ...]:
    """Return the metals of a solution against a precipitant, noblest first.

    Parameters
    ----------
    solution : Solution
    precipitant : Precipitant
    metals : iterable of str, optional
        By default those of the solution.
    dissolved_mol_per_L : float, optional
        Ion of the precipitant in the barren; without it no residual.

    Returns
    -------
    tuple of Feasibility

    Raises
    ------
    InputProblems
        If a metal is unknown in this medium or the precipitant is not used in it.

    Notes
    -----
    Standard potentials of the default sources at the temperature of the solution, concentrations
    for activities. In cyanide the couples are of 1 mol/L ligand; between gold or silver and zinc
    the ligand cancels.

    Examples
    --------
    >>> iron = Precipitant("iron")
    >>> [f.verdict for f in feasibility(Solution({"Cu": 2.0, "Zn": 1.0}), iron)]
    ['feasible', 'infeasible']
    """
    known = metal_couples(solution.kind)
    anode = precipitant.couple(solution.kind)
    found = []
    for metal in solution.metals if metals is None else metals:
        if metal not in known:
            what = f"metal in a solution of the kind {solution.kind!r}:"
            raise InputProblems([unknown_name(what, metal, known, column="metals")])
        pair = cell(known[metal].text("couple"), anode, solution.temperature_K)
        found.append(_judged(metal, pair, dissolved_mol_per_L, known[metal].text("note")))
    return tuple(sorted(found, key=lambda item: -item.cell.cathode_V))


def refuse_infeasible(found: Iterable[Feasibility], precipitant: Precipitant) -> None:
    """Raise the problem of every metal that is baser than the precipitant, with both potentials.

    Parameters
    ----------
    found : iterable of Feasibility
    precipitant : Precipitant

    Raises
    ------
    InputProblems
        If one of them is infeasible.
    """
    problems = [
        Problem(
            "",
            None,
            "precipitant",
            "stop",
            f"{precipitant.kind} cannot put out {item.metal}: {item.cell.cathode} stands at "
            f"{item.cell.cathode_V:.3f} V, {item.cell.anode} at {item.cell.anode_V:.3f} V",
            "a precipitant baser than the metal",
            f"leave {item.metal} in solution (recovery 0) or take another precipitant",
        )
        for item in found
        if not item.cell.feasible
    ]
    if problems:
        raise InputProblems(problems)


def feasibility_table(found: Iterable[Feasibility]) -> ResultTable:
    """Return the metals against the precipitant as a table."""
    columns = (
        Column("metal", "Metal"),
        Column("couple", "Couple"),
        Column("metal_V", "Potential of the metal", "V", 4),
        Column("precipitant_V", "Potential of the precipitant", "V", 4),
        Column("voltage_V", "Voltage", "V", 3),
        Column("low_V", "Lowest by source", "V", 3),
        Column("high_V", "Highest by source", "V", 3),
        Column("residual_g_per_L", "Equilibrium residual", "g/L", 2),
        Column("verdict", "Verdict"),
        Column("sources", "Sources"),
        Column("note", "Note"),
    )
    records = (
        {
            "metal": item.metal,
            "couple": item.cell.cathode,
            "metal_V": item.cell.cathode_V,
            "precipitant_V": item.cell.anode_V,
            "voltage_V": item.cell.voltage,
            "low_V": item.cell.low_V,
            "high_V": item.cell.high_V,
            "residual_g_per_L": item.residual_g_per_L,
            "verdict": item.verdict,
            "sources": ", ".join(item.cell.sources),
            "note": "; ".join(filter(None, (item.note, *item.cell.notes))),
        }
        for item in found
    )
    return ResultTable.from_records("cementation_feasibility", columns, records)


def _judged(metal: str, pair: Cell, dissolved: float | None, note: str) -> Feasibility:
    residual = None
    if dissolved is not None and np.isfinite(dissolved) and dissolved > 0.0:
        residual = float(pair.residual_mol_per_L(dissolved))
    verdict = "feasible" if pair.feasible else "infeasible"
    if pair.low_V <= 0.0 < pair.high_V:
        verdict = "depends on the source of the potentials"
    grams = None if residual is None else residual * molar_mass(metal)
    return Feasibility(metal, pair, residual, grams, verdict, note)
