"""Cells: a couple that gains electrons, one that gives them, and what follows for equilibrium."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.potentials import Potential, potential_by_source, potentials_of
from leachkin.chemistry.thermodynamics import (
    check_temperature,
    gibbs_from_potential,
    ln_equilibrium_constant,
)
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    FARADAY_C_per_mol,
    GAS_CONSTANT_J_per_mol_K,
)
from leachkin.problems import argument_error


@dataclass(frozen=True)
class Cell:
    """Two couples against each other at standard activities.

    Attributes
    ----------
    cathode, anode : str
        Couple that gains electrons and couple that gives them.
    cathode_V, anode_V : float
        Standard potentials at the temperature.
    cathode_electrons, anode_electrons : int
        Electrons of each couple as written.
    temperature_K : float
    low_V, high_V : float
        Range of the voltage over the sources at 298.15 K; equal where potentials were given.
    sources : tuple of str
    notes : tuple of str
    """

    cathode: str
    anode: str
    cathode_V: float
    anode_V: float
    cathode_electrons: int
    anode_electrons: int
    temperature_K: float
    low_V: float
    high_V: float
    sources: tuple[str, ...] = ()
    notes: tuple[str, ...] = field(default=())

    @property
    def voltage(self) -> float:
        """Cathode less anode potential [V]."""
        return self.cathode_V - self.anode_V

    @property
    def feasible(self) -> bool:
        """Whether the anode metal is the baser one, so that the reaction runs by itself."""
        return self.voltage > 0.0

    @property
    def electrons(self) -> int:
        """Electrons of the reaction in smallest whole numbers."""
        return math.lcm(self.cathode_electrons, self.anode_electrons)

    @property
    def gibbs_kJ_per_mol(self) -> float:
        """Gibbs energy of the reaction in smallest whole numbers."""
        return float(gibbs_from_potential(self.voltage, self.electrons))

    @property
    def ln_K(self) -> float:
        """Natural logarithm of the equilibrium constant."""
        return float(ln_equilibrium_constant(self.voltage, self.electrons, self.temperature_K))

    @property
    def equilibrium_constant(self) -> float:
        """Equilibrium constant; infinite where it is beyond a float."""
        return math.exp(self.ln_K) if self.ln_K < 709.0 else math.inf

    def residual_mol_per_L(self, anode_ion_mol_per_L: ArrayLike) -> NDArray[np.float64]:
        """Return what is left of the cathode's ion when the cell has run down [mol/L].

        Parameters
        ----------
        anode_ion_mol_per_L : array_like, shape B
            Ion of the dissolving metal, above 0, taken as its activity.

        Returns
        -------
        ndarray, shape B
            Both potentials equal; ligands that stand equally on both sides cancel.

        Raises
        ------
        InputProblems
            If a concentration is not above 0.
        """
        return residual_mol_per_L(
            self.voltage,
            self.cathode_electrons,
            self.anode_electrons,
            anode_ion_mol_per_L,
            self.temperature_K,
        )


def cell(cathode: str, anode: str, temperature_K: float = STANDARD_TEMPERATURE_K) -> Cell:
    """Return the cell of two couples at standard activities.

    Parameters
    ----------
    cathode, anode : str
        The couple that gains electrons and the one that gives them.
    temperature_K : float
        250 to 650 K.

    Returns
    -------
    Cell
        With the range of its voltage over the sources. A couple whose source gives no
        temperature coefficient is held at 298.15 K and the cell says so.

    Raises
    ------
    InputProblems
        If a couple is unknown; the nearest ones are given.

    Examples
    --------
    >>> round(cell("Cu2+/Cu", "Fe2+/Fe").voltage, 3)
    0.748
    """
    gains, gives = potential_by_source(cathode), potential_by_source(anode)
    cathode_V, cathode_note = _at(gains, temperature_K)
    anode_V, anode_note = _at(gives, temperature_K)
    upper, lower = potentials_of(cathode), potentials_of(anode)
    return Cell(
        cathode=gains.couple,
        anode=gives.couple,
        cathode_V=cathode_V,
        anode_V=anode_V,
        cathode_electrons=gains.electrons,
        anode_electrons=gives.electrons,
        temperature_K=float(temperature_K),
        low_V=upper.low_V - lower.high_V,
        high_V=upper.high_V - lower.low_V,
        sources=tuple(dict.fromkeys((gains.source, gives.source))),
        notes=cathode_note + anode_note,
    )


def cell_from_potentials(
    cathode_V: float,
    anode_V: float,
    electrons: int,
    temperature_K: float = STANDARD_TEMPERATURE_K,
    cathode_electrons: int | None = None,
    anode_electrons: int | None = None,
) -> Cell:
    """Return the cell of two potentials given as numbers.

    Parameters
    ----------
    cathode_V, anode_V : float
        Standard potentials.
    electrons : int
        Electrons of the reaction, 1 or more.
    temperature_K : float
        250 to 650 K.
    cathode_electrons, anode_electrons : int, optional
        Electrons of each couple as written, where they differ from those of the reaction.

    Returns
    -------
    Cell

    Raises
    ------
    InputProblems
        If a number is not finite or electrons is below 1.

    Examples
    --------
    >>> zinc_copper = cell_from_potentials(0.34, -0.76, 2)
    >>> round(zinc_copper.ln_K, 1)
    85.6
    """
    check_temperature(temperature_K)
    for name, potential in (("cathode_V", cathode_V), ("anode_V", anode_V)):
        if not math.isfinite(potential):
            raise argument_error(name, f"{potential}", "a finite potential in V", "")
    if electrons < 1:
        raise argument_error("electrons", f"{electrons}", "1 or more", "electrons of the reaction")
    voltage = cathode_V - anode_V
    return Cell(
        cathode="given",
        anode="given",
        cathode_V=cathode_V,
        anode_V=anode_V,
        cathode_electrons=cathode_electrons or electrons,
        anode_electrons=anode_electrons or electrons,
        temperature_K=float(temperature_K),
        low_V=voltage,
        high_V=voltage,
    )


def residual_mol_per_L(
    voltage_V: ArrayLike,
    cathode_electrons: int,
    anode_electrons: int,
    anode_ion_mol_per_L: ArrayLike,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
) -> NDArray[np.float64]:
    """Return the concentration of the nobler ion in equilibrium with the baser metal [mol/L].

    Parameters
    ----------
    voltage_V : array_like, shape B
        Standard voltage of the cell.
    cathode_electrons, anode_electrons : int
        Electrons of each couple as written.
    anode_ion_mol_per_L : array_like, shape B
        Above 0.
    temperature_K : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``a_c = a_a^(n_c/n_a) exp(-n_c F E / (R T))``.

    Raises
    ------
    InputProblems
        If a concentration is not above 0 or the temperature has no meaning.

    Examples
    --------
    Copper over iron at 0.05 mol/L of dissolved iron:

    >>> float(residual_mol_per_L(0.78, 2, 2, 0.05)) < 1e-25
    True
    """
    ion = np.asarray(anode_ion_mol_per_L, dtype=np.float64)
    if not np.all(np.isfinite(ion) & (ion > 0.0)):
        raise argument_error(
            "anode_ion_mol_per_L",
            f"{ion.min():g} mol/L",
            "above 0 mol/L",
            "the dissolved precipitant in the barren",
        )
    temperature = check_temperature(temperature_K)
    drive = FARADAY_C_per_mol * np.asarray(voltage_V) / (GAS_CONSTANT_J_per_mol_K * temperature)
    ln_residual = cathode_electrons * (np.log(ion) / anode_electrons - drive)
    return np.asarray(np.exp(np.clip(ln_residual, -700.0, 700.0)))


def _at(potential: Potential, temperature_K: float) -> tuple[float, tuple[str, ...]]:
    check_temperature(temperature_K)
    if potential.dE0_dT_mV_per_K is None and temperature_K != STANDARD_TEMPERATURE_K:
        note = (
            f"{potential.couple} held at its value for 298.15 K: "
            f"{potential.source} gives no temperature coefficient"
        )
        return potential.E0_V, (note,)
    return potential.at(temperature_K), ()
