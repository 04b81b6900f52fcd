"""The couples of a solution in order of potential: what goes down first, and what is left of it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.liquor_state import LiquorState, MetalIon, liquor_state, thermal_V
from leachkin.cementation.middle import middle
from leachkin.cementation.solution import Precipitant, Solution, metal_couples
from leachkin.chemistry import molar_mass, potential_range
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

#: Oxygen of air, and hydrogen at 1 atm: the states that potentials of gases refer to.
_AIR_SATURATED_mol_per_L = 8.26e-3 / 31.998
_OXYGEN_OF_AIR_atm = 0.2095


@dataclass(frozen=True)
class CoupleInSolution:
    """One couple at what the solution holds.

    Attributes
    ----------
    couple : str
    role : str
        "metal", "precipitant", "oxidant" or "hydrogen".
    concentration_g_per_L : float or None
    potential_V, low_V, high_V : float
        By the default source, and over all of them.
    verdict : str
        Against the precipitant: "put out", "stays", "depends on the source", or for oxidants and
        hydrogen "dissolves the precipitant".
    residual_g_per_L, residual_low_g_per_L, residual_high_g_per_L : float or None
        Metal left where both potentials are equal; the range is that of the sources.
    note : str
    """

    couple: str
    role: str
    concentration_g_per_L: float | None
    potential_V: float
    low_V: float
    high_V: float
    verdict: str = ""
    residual_g_per_L: float | None = None
    residual_low_g_per_L: float | None = None
    residual_high_g_per_L: float | None = None
    note: str = ""


@dataclass(frozen=True)
class SolutionOrder:
    """The couples of a solution, noblest first.

    Attributes
    ----------
    rows : tuple of CoupleInSolution
    ionic_strength_mol_per_L : float
    pH : float or None
    notes : tuple of str
        Where activities end, and what was not known.
    """

    rows: tuple[CoupleInSolution, ...]
    ionic_strength_mol_per_L: float
    pH: float | None
    notes: tuple[str, ...]

    @property
    def metals(self) -> tuple[str, ...]:
        """Metals in the order in which they go down."""
        return tuple(row.couple.split("/")[1] for row in self.rows if row.role == "metal")

    def of(self, metal: str) -> CoupleInSolution:
        """Return the row of a metal.

        Raises
        ------
        InputProblems
            If the solution does not hold it.
        """
        for row in self.rows:
            if row.role in ("metal", "precipitant") and row.couple.split("/")[1] == metal:
                return row
        raise argument_error("metal", metal, ", ".join(self.metals))

    def table(self) -> ResultTable:
        """Return the couples as a table."""
        columns = (
            Column("couple", "Couple"),
            Column("role", "Part"),
            Column("concentration_g_per_L", "In solution", "g/L", 4),
            Column("potential_V", "Potential there", "V", 4),
            Column("low_V", "Lowest by source", "V", 4),
            Column("high_V", "Highest by source", "V", 4),
            Column("verdict", "Against the precipitant"),
            Column("residual_g_per_L", "Equilibrium leaves", "g/L", 2),
            Column("residual_high_g_per_L", "At most, by source", "g/L", 2),
            Column("note", "Note"),
        )
        records = ({c.key: getattr(row, c.key) for c in columns} for row in self.rows)
        caption = (
            f"Potentials at the activities of this solution (ionic strength "
            f"{self.ionic_strength_mol_per_L:.2g} mol/L), noblest first; equilibrium says what can "
            "happen, not how fast"
        )
        return ResultTable.from_records("cementation_order", columns, records, caption)


def solution_order(
    solution: Solution,
    precipitant: Precipitant,
    dissolved_g_per_L: ArrayLike = 0.0,
    activities: bool = True,
) -> SolutionOrder:
    """Return the couples of a solution in order of potential, against a precipitant.

    Parameters
    ----------
    solution : Solution
        Of draws, the medians.
    precipitant : Precipitant
    dissolved_g_per_L : array_like
        Precipitant that dissolves on the way: the barren's gain. Its ion, with what the solution
        brings, sets the precipitant's potential and so the residuals.
    activities : bool
        By Davies' equation; False takes concentrations for activities.

    Returns
    -------
    SolutionOrder

    Raises
    ------
    InputProblems
        If the precipitant is not used in the medium of the solution.

    Examples
    --------
    >>> liquor = Solution({"Cd": 0.35, "Cu": 0.55, "Zn": 140.0}, pH=4.0)
    >>> solution_order(liquor, Precipitant("zinc dust")).metals
    ('Cu', 'Cd')
    """
    state = liquor_state(solution, precipitant, dissolved_g_per_L, activities)
    rows = [_precipitant_row(state, precipitant)]
    rows += [_metal_row(state, ion) for ion in state.metals.values() if np.any(ion.mol_per_L > 0)]
    rows += _other_rows(state)
    rows.sort(key=lambda row: -row.potential_V)
    acidity = None if state.pH is None else float(np.median(state.pH))
    return SolutionOrder(
        tuple(rows), float(np.median(state.ionic_strength_mol_per_L)), acidity, state.notes
    )


def equilibrium_residual_g_per_L(ion: MetalIon, potential_V: ArrayLike, kelvin: float) -> Array:
    """Return the metal left in solution where its potential is that of the precipitant [g/L].

    Parameters
    ----------
    ion : MetalIon
    potential_V : array_like, shape B
        Of the precipitant.
    kelvin : float

    Returns
    -------
    ndarray, shape B
        The activity that a fall of the potential leaves, over the same activity coefficient,
        with the same ligand.
    """
    fall = ion.electrons * (np.asarray(potential_V) - ion.potential.value_V) / thermal_V(kelvin)
    grams = ion.mol_per_L * molar_mass(ion.metal)
    return np.asarray(grams * np.exp(np.clip(fall, -700.0, 700.0)))


def _metal_row(state: LiquorState, ion: MetalIon) -> CoupleInSolution:
    own, kelvin = state.precipitant.potential, state.temperature_K
    found = ion.potential
    low, high = middle(found.low_V), middle(found.high_V)
    verdict = "put out" if middle(found.value_V) > middle(own.value_V) else "stays"
    if low <= middle(own.high_V) and high >= middle(own.low_V):
        verdict = "depends on the source"
    # what the sources leave open: the metal at its lowest against the precipitant at its highest
    shift = ion.electrons / thermal_V(kelvin)
    residual = equilibrium_residual_g_per_L(ion, own.value_V, kelvin)
    worst = shift * ((found.value_V - found.low_V) + (own.high_V - own.value_V))
    best = shift * ((found.value_V - found.high_V) + (own.low_V - own.value_V))
    grams = middle(ion.mol_per_L) * molar_mass(ion.metal)
    ends = [middle(residual * np.exp(np.clip(end, -700.0, 700.0))) for end in (best, worst)]
    note = metal_couples(state.medium)[ion.metal].text("note")
    return CoupleInSolution(
        found.couple,
        "metal",
        grams,
        middle(found.value_V),
        low,
        high,
        verdict,
        min(middle(residual), grams),
        min(ends[0], grams),
        min(ends[1], grams),
        "; ".join(filter(None, (note, *found.notes))),
    )


def _precipitant_row(state: LiquorState, precipitant: Precipitant) -> CoupleInSolution:
    own = state.precipitant
    return CoupleInSolution(
        own.couple,
        "precipitant",
        middle(own.mol_per_L) * molar_mass(precipitant.metal),
        middle(own.potential.value_V),
        middle(own.potential.low_V),
        middle(own.potential.high_V),
        note="; ".join(own.potential.notes),
    )


def _other_rows(state: LiquorState) -> Iterator[CoupleInSolution]:
    kelvin = state.temperature_K
    own = middle(state.precipitant.potential.value_V)
    if np.any(state.ferric_mol_per_L > 0.0):
        found = potential_range("Fe3+/Fe2+", 1.0, 1.0, kelvin)
        grams = middle(state.ferric_mol_per_L) * molar_mass("Fe")
        yield _oxidant(found.couple, "oxidant", grams, _ends(found), own, "at as much Fe2+ as Fe3+")
    if state.pH is None:
        return
    hydrogen = 10.0 ** -np.asarray(state.pH)
    found = potential_range("H+/H2", hydrogen**2, 1.0, kelvin)
    yield _oxidant(found.couple, "hydrogen", None, _ends(found), own, "at 1 atm of hydrogen")
    if np.any(state.oxygen_mol_per_L > 0.0):
        pressure = _OXYGEN_OF_AIR_atm * state.oxygen_mol_per_L / _AIR_SATURATED_mol_per_L
        found = potential_range("O2,H+/H2O", pressure * hydrogen**4, 1.0, kelvin)
        grams = middle(state.oxygen_mol_per_L) * molar_mass("O2")
        yield _oxidant(found.couple, "oxidant", grams, _ends(found), own, "")


def _ends(found: object) -> tuple[float, float, float]:
    return tuple(middle(getattr(found, name)) for name in ("value_V", "low_V", "high_V"))  # type: ignore[return-value]


def _oxidant(
    couple: str,
    role: str,
    grams: float | None,
    ends: tuple[float, float, float],
    own: float,
    note: str,
) -> CoupleInSolution:
    verdict = "dissolves the precipitant" if ends[0] > own else "takes no part"
    return CoupleInSolution(couple, role, grams, *ends, verdict, note=note)
