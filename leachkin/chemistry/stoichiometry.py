"""Mass ratios of reactions, from moles and molar masses; a table of the uses that have a name."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache

from leachkin.chemistry.formulas import molar_mass
from leachkin.constants import NORMAL_MOLAR_VOLUME_m3_per_mol
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.result_table import Column, ResultTable
from leachkin.tables import read_table


@dataclass(frozen=True)
class StoichiometricUse:
    """A named use of a reagent.

    Attributes
    ----------
    use : str
        Name, as ``"H2SO4 per Cu"``.
    reagent, per : str
        Formulas.
    reagent_moles, per_moles : float
        Moles of each in the reaction.
    reaction : str
    source, status : str
        Keys of the table.
    """

    use: str
    reagent: str
    reagent_moles: float
    per: str
    per_moles: float
    reaction: str
    source: str
    status: str

    @property
    def kg_per_kg(self) -> float:
        """Mass of reagent per mass of the other [kg/kg]."""
        return factor(self.reagent, self.per, self.reagent_moles, self.per_moles)


def factor(reagent: str, per: str, moles_reagent: float = 1.0, moles_per: float = 1.0) -> float:
    """Return the mass of a reagent per mass of what it reacts with [kg/kg].

    Parameters
    ----------
    reagent, per : str
        Formulas.
    moles_reagent, moles_per : float
        Moles of each in the reaction, above 0.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        If a formula cannot be read or the moles are not positive numbers.

    Examples
    --------
    >>> round(factor("H2SO4", "Cu"), 3)
    1.543
    >>> round(factor("NaOH", "Al2O3", 2), 3)
    0.785
    """
    for name, moles in (("moles_reagent", moles_reagent), ("moles_per", moles_per)):
        if not (math.isfinite(moles) and moles > 0.0):
            raise argument_error(name, f"{moles}", "a number above 0", "moles of the reaction")
    return moles_reagent * molar_mass(reagent) / (moles_per * molar_mass(per))


def stoichiometric_use(use: str) -> StoichiometricUse:
    """Return the named use.

    Parameters
    ----------
    use : str
        A name of the table, as ``"NaCN per Cu, Cu(CN)3 2-"``.

    Returns
    -------
    StoichiometricUse

    Raises
    ------
    InputProblems
        If the name is unknown; the nearest ones are given.
    """
    uses = _uses()
    if use not in uses:
        raise InputProblems([unknown_name("stoichiometric use", use, uses, column="use")])
    return uses[use]


def named_factor(use: str) -> float:
    """Return the factor of a named use [kg/kg].

    Parameters
    ----------
    use : str
        A name of the table.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        If the name is unknown; the nearest ones are given.

    Examples
    --------
    >>> round(named_factor("Fe per Cu"), 3)
    0.879
    """
    return stoichiometric_use(use).kg_per_kg


def stoichiometric_uses() -> tuple[StoichiometricUse, ...]:
    """Return every named use, in the order of the table."""
    return tuple(_uses().values())


def stoichiometry_table() -> ResultTable:
    """Return the named uses with their factors as a table."""
    columns = (
        Column("use", "Use"),
        Column("kg_per_kg", "Factor", "kg/kg", 4),
        Column("reaction", "Reaction"),
        Column("source", "Source"),
    )
    records = (
        {"use": u.use, "kg_per_kg": u.kg_per_kg, "reaction": u.reaction, "source": u.source}
        for u in stoichiometric_uses()
    )
    return ResultTable.from_records("stoichiometry", columns, records)


def electron_factor(metal: str, metal_electrons: float, taker: str, electrons: float) -> float:
    """Return the mass of dissolving metal that supplies what a taker of electrons needs [kg/kg].

    Parameters
    ----------
    metal : str
        Formula of the metal that dissolves.
    metal_electrons : float
        Electrons it gives up per mole.
    taker : str
        Formula of what is reduced, on the basis of its mass in the solution.
    electrons : float
        Electrons each mole of it takes.

    Returns
    -------
    float

    Examples
    --------
    >>> round(electron_factor("Fe", 2, "O2", 4), 3)
    3.491
    """
    return factor(metal, taker, electrons, metal_electrons)


def hydrogen_Nm3_per_kg(metal: str, metal_electrons: float = 2.0) -> float:
    """Return the hydrogen made when a kilogram of metal dissolves in acid or water [Nm3/kg].

    Parameters
    ----------
    metal : str
    metal_electrons : float
        Electrons the metal gives up per mole; two make one molecule of hydrogen.

    Returns
    -------
    float
        Volume at 0 degC and 1 atm.

    Examples
    --------
    >>> round(hydrogen_Nm3_per_kg("Fe"), 3)
    0.401
    """
    moles_per_kg = 1000.0 / molar_mass(metal) * metal_electrons / 2.0
    return moles_per_kg * NORMAL_MOLAR_VOLUME_m3_per_mol


@cache
def _uses() -> dict[str, StoichiometricUse]:
    return {
        row.text("use"): StoichiometricUse(
            row.text("use"),
            row.text("reagent"),
            row.number("reagent_moles"),
            row.text("per"),
            row.number("per_moles"),
            row.text("reaction"),
            row.text("source"),
            row.text("status"),
        )
        for row in read_table("stoichiometry").rows
    }
