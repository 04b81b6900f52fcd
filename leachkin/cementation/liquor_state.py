"""A solution as the metal in it meets it: ions, their activities, and the potentials they set."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.middle import middle
from leachkin.cementation.solution import Precipitant, Solution, metal_couples
from leachkin.chemistry import (
    PotentialRange,
    charge_of,
    complexed_potential,
    davies_log10_gamma,
    davies_remark,
    electrons_of,
    formation_constants,
    hcn_share,
    ion_of,
    is_complex,
    log10_beta_at,
    log10_water_product,
    molar_mass,
    potential_range,
    sulphuric_species,
)
from leachkin.constants import GAS_CONSTANT_J_per_mol_K

Array = NDArray[np.float64]

#: What is absent has this activity, so that its potential is far below all others.
TRACE_mol_per_L = 1e-30
#: A metal counts as just dissolving where its ion stands at this, the convention of corrosion.
JUST_DISSOLVING_mol_per_L = 1e-6
ROUNDS = 40
_LN10 = float(np.log(10.0))


@dataclass(frozen=True)
class MetalIon:
    """A metal of the solution as it stands there.

    Attributes
    ----------
    metal, couple, ion : str
    electrons : int
        Each mole takes.
    mol_per_L, activity : ndarray, shape B
    potential : PotentialRange
        At that activity, with the spread of the sources.
    standard_V : ndarray, shape B
        At activity 1 of it, with the ligand as it is.
    """

    metal: str
    couple: str
    ion: str
    electrons: int
    mol_per_L: Array
    activity: Array
    potential: PotentialRange
    standard_V: Array


@dataclass(frozen=True)
class LiquorState:
    """Ions, activities and potentials of a solution.

    Attributes
    ----------
    medium : str
    temperature_K : float
    metals : mapping of str to MetalIon
        Without that of the precipitant.
    precipitant : MetalIon
        Ion of the precipitant, at least just dissolving.
    ferric_mol_per_L, oxygen_mol_per_L : ndarray, shape B
        Zero where not measured.
    hydrogen_mol_per_L, bisulphate_mol_per_L : ndarray, shape B
    pH : ndarray, shape B, or None
        None where neither acid nor pH is known.
    cyanide_mol_per_L, hydroxide_mol_per_L : ndarray, shape B
    ionic_strength_mol_per_L : ndarray, shape B
    notes : tuple of str
    """

    medium: str
    temperature_K: float
    metals: Mapping[str, MetalIon]
    precipitant: MetalIon
    ferric_mol_per_L: Array
    oxygen_mol_per_L: Array
    hydrogen_mol_per_L: Array
    bisulphate_mol_per_L: Array
    pH: Array | None
    cyanide_mol_per_L: Array
    hydroxide_mol_per_L: Array
    ionic_strength_mol_per_L: Array
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class _Acid:
    """Hydrogen of a liquor and what it comes with."""

    hydrogen: Array
    bisulphate: Array
    sulphate: Array
    pH: Array | None
    strength: Array


def liquor_state(
    solution: Solution,
    precipitant: Precipitant,
    dissolved_g_per_L: ArrayLike = 0.0,
    activities: bool = True,
) -> LiquorState:
    """Return the ions of a solution with their activities and potentials.

    Parameters
    ----------
    solution : Solution
        May hold arrays, shape B.
    precipitant : Precipitant
    dissolved_g_per_L : array_like, shape B
        Precipitant that has dissolved already, beside what the solution brings.
    activities : bool
        By Davies' equation; False takes concentrations for activities.

    Returns
    -------
    LiquorState

    Raises
    ------
    InputProblems
        If the precipitant is not used in the medium of the solution.
    """
    anode = precipitant.couple(solution.kind)
    moles = {
        metal: solution.grade(metal) / molar_mass(metal)
        for metal in solution.metals
        if metal != precipitant.metal
    }
    own = _own_ion(solution, precipitant, dissolved_g_per_L)
    if solution.kind == "cyanide":
        return _cyanide_state(solution, anode, precipitant.metal, moles, own, activities)
    return _acid_state(solution, anode, precipitant.metal, moles, own, activities)


def _own_ion(solution: Solution, precipitant: Precipitant, dissolved: ArrayLike) -> Array:
    """Ion of the precipitant in the solution [mol/L]."""
    metal = precipitant.metal
    grams = np.asarray(dissolved, dtype=np.float64)
    if metal in solution.metals:
        grams = grams + solution.grade(metal)
    elif metal == "Fe" and solution.iron_g_per_L is not None:
        ferric = solution.ferric_g_per_L if solution.ferric_g_per_L is not None else 0.0
        grams = grams + np.maximum(np.asarray(solution.iron_g_per_L) - np.asarray(ferric), 0.0)
    return np.maximum(grams / molar_mass(metal), JUST_DISSOLVING_mol_per_L)


def _acid_state(
    solution: Solution,
    anode: str,
    metal: str,
    moles: Mapping[str, Array],
    own: Array,
    activities: bool,
) -> LiquorState:
    kelvin = float(solution.temperature_K)
    couples = metal_couples("acid")
    ions = {name: ion_of(couples[name].text("couple")) for name in moles}
    ferric = _grams(solution.ferric_g_per_L) / molar_mass("Fe")
    cations = [(charge_of(ions[name]), c) for name, c in moles.items()]
    cations += [(3, ferric), (charge_of(ion_of(anode)), own)]
    acid = _acid_of(solution, cations, kelvin, activities)

    def made(name: str, couple: str, c: Array) -> MetalIon:
        ion = ion_of(couple)
        gamma = _gamma(charge_of(ion), acid.strength, kelvin, activities)
        activity = np.maximum(c, TRACE_mol_per_L) * gamma
        return MetalIon(
            name, couple, ion, electrons_of(couple), c, activity,
            potential_range(couple, activity, 1.0, kelvin),
            potential_range(couple, 1.0, 1.0, kelvin).value_V,
        )  # fmt: skip

    metals = {name: made(name, couples[name].text("couple"), c) for name, c in moles.items()}
    water = 10.0 ** log10_water_product(kelvin)
    hydroxide = water / np.maximum(acid.hydrogen, TRACE_mol_per_L)
    if acid.pH is None:
        hydroxide = np.zeros_like(hydroxide)
    return LiquorState(
        "acid",
        kelvin,
        metals,
        made(metal, anode, own),
        ferric,
        _oxygen(solution),
        acid.hydrogen,
        acid.bisulphate,
        acid.pH,
        np.zeros(()),
        hydroxide,
        acid.strength,
        tuple(_acid_notes(solution, acid, activities)),
    )


def _acid_of(
    solution: Solution, cations: list[tuple[int, Array]], kelvin: float, activities: bool
) -> _Acid:
    """Hydrogen, bisulphate and ionic strength, the metals standing as sulphates."""
    charge = sum(z * c for z, c in cations) + np.zeros(())
    square = sum(z * z * c for z, c in cations) + np.zeros(())
    other = 0.5 * np.asarray(charge, dtype=np.float64)
    if solution.acid_g_per_L is None:
        return _acid_of_pH(solution, square, other, kelvin, activities)
    moles = _grams(solution.acid_g_per_L) / molar_mass("H2SO4")
    ln_K = -_LN10 * log10_beta_at(formation_constants()["HSO4-"][0], kelvin)
    shift: Array = np.zeros(())
    strength = np.zeros(np.broadcast_shapes(moles.shape, other.shape))
    for _ in range(ROUNDS):
        H, HSO4, SO4 = sulphuric_species(moles, other, ln_K + shift)
        now = 0.5 * (square + H + HSO4 + 4.0 * SO4)
        if not activities or np.all(np.abs(now - strength) <= 1e-10 * (1.0 + now)):
            break
        strength = now
        # gamma(HSO4-) / (gamma(H+) gamma(SO4 2-)): charges 1 - 1 - 4
        shift = _LN10 * davies_log10_gamma(2, strength, kelvin) * -1.0
    strength = np.asarray(0.5 * (square + H + HSO4 + 4.0 * SO4))
    gamma = _gamma(1, strength, kelvin, activities)
    with np.errstate(divide="ignore"):
        acidity = -np.log10(np.maximum(H * gamma, np.sqrt(10.0 ** log10_water_product(kelvin))))
    return _Acid(H, HSO4, SO4, acidity, strength)


def _acid_of_pH(
    solution: Solution, square: Array, other: Array, kelvin: float, activities: bool
) -> _Acid:
    strength = np.asarray(0.5 * (square + 4.0 * other))
    if solution.pH is None:
        none = np.zeros(())
        return _Acid(none, none, other, None, strength)
    acidity = np.asarray(solution.pH, dtype=np.float64)
    for _ in range(ROUNDS if activities else 1):
        hydrogen = 10.0**-acidity / _gamma(1, strength, kelvin, activities)
        now = 0.5 * (square + 4.0 * other) + hydrogen
        if np.all(np.abs(now - strength) <= 1e-10 * (1.0 + now)):
            break
        strength = now
    return _Acid(hydrogen, np.zeros(()), other, acidity, np.asarray(strength))


def _cyanide_state(
    solution: Solution,
    anode: str,
    metal: str,
    moles: Mapping[str, Array],
    own: Array,
    activities: bool,
) -> LiquorState:
    kelvin = float(solution.temperature_K)
    couples = metal_couples("cyanide")
    free = _grams(solution.free_cyanide_g_per_L) / molar_mass("CN")
    share = np.zeros(()) if solution.pH is None else hcn_share(solution.pH, kelvin)
    hydroxide = np.zeros(())
    if solution.pH is not None:
        hydroxide = 10.0 ** (log10_water_product(kelvin) + np.asarray(solution.pH, dtype=float))
    cyanide = free * (1.0 - share)
    known = solution.free_cyanide_g_per_L is not None
    all_moles = [*((couples[m].text("couple"), c) for m, c in moles.items()), (anode, own)]
    charged = sum(0.5 * z * (z + 1.0) * c for z, c in ((_size(one), c) for one, c in all_moles))
    strength = np.asarray(cyanide + hydroxide + charged + np.zeros(()))
    ligand = np.maximum(cyanide, TRACE_mol_per_L) * _gamma(1, strength, kelvin, activities)
    if not known:
        ligand = np.ones(())

    def made(name: str, couple: str, c: Array) -> MetalIon:
        gamma = _gamma(_size(couple), strength, kelvin, activities)
        activity = np.maximum(c, TRACE_mol_per_L) * gamma * complex_share(ion_of(couple), ligand)
        if is_complex(couple):
            found = complexed_potential(couple, activity, ligand, kelvin)
            standard = complexed_potential(couple, 1.0, ligand, kelvin)
        else:
            found = potential_range(couple, activity / ligand ** _ligands(couple), 1.0, kelvin)
            standard = potential_range(couple, 1.0 / ligand ** _ligands(couple), 1.0, kelvin)
        return MetalIon(
            name, couple, ion_of(couple), electrons_of(couple), c, activity, found,
            standard.value_V,
        )  # fmt: skip

    metals = {name: made(name, couples[name].text("couple"), c) for name, c in moles.items()}
    none = np.zeros(())
    hydrogen = none if solution.pH is None else 10.0 ** -np.asarray(solution.pH, dtype=float)
    return LiquorState(
        "cyanide",
        kelvin,
        metals,
        made(metal, anode, own),
        none,
        _oxygen(solution),
        hydrogen,
        none,
        None if solution.pH is None else np.asarray(solution.pH, dtype=np.float64),
        cyanide,
        hydroxide,
        strength,
        tuple(_cyanide_notes(solution, strength, activities)),
    )


def complex_share(species: str, ligand_activity: ArrayLike) -> Array:
    """Return the share of a metal that stands as one of its complexes.

    Parameters
    ----------
    species : str
        As ``"Cu(CN)3 2-"``; 1 for a species without constants.
    ligand_activity : array_like, shape B

    Returns
    -------
    ndarray, shape B
        ``beta_p L^p / (1 + sum(beta L^n))`` over the complexes of the same ion and ligand.

    Examples
    --------
    >>> round(float(complex_share("Cu(CN)3 2-", 0.003)), 2)
    0.91
    """
    constants = formation_constants()
    if species not in constants:
        return np.ones(np.shape(ligand_activity))
    own = constants[species][0]
    ln_ligand = np.log(np.asarray(ligand_activity, dtype=np.float64))
    terms = {
        name: _LN10 * found[0].log10_beta + found[0].ligands * ln_ligand
        for name, found in constants.items()
        if (found[0].ion, found[0].ligand) == (own.ion, own.ligand)
    }
    highest = np.maximum(np.max(np.stack(list(terms.values())), axis=0), 0.0)
    total = np.exp(-highest) + sum(np.exp(term - highest) for term in terms.values())
    return np.asarray(np.exp(terms[species] - highest) / total)


def _grams(value: ArrayLike | None) -> Array:
    return np.zeros(()) if value is None else np.asarray(value, dtype=np.float64)


def _oxygen(solution: Solution) -> Array:
    return _grams(solution.oxygen_mg_per_L) / 1e3 / molar_mass("O2")


def _gamma(charge: int, strength: Array, kelvin: float, activities: bool) -> Array:
    if not activities:
        return np.ones(())
    return np.asarray(10.0 ** davies_log10_gamma(charge, strength, kelvin))


def _size(couple: str) -> int:
    return abs(charge_of(ion_of(couple)))


def _ligands(couple: str) -> int:
    """Cyanide in a complex that the tables know by its potential only."""
    digits = couple.partition("(CN)")[2][:1]
    return int(digits) if digits.isdigit() else 1


def _acid_notes(solution: Solution, acid: _Acid, activities: bool) -> list[str]:
    notes = []
    if acid.pH is None:
        notes.append("neither free acid nor pH is known: no hydrogen is counted")
    elif solution.acid_g_per_L is not None and solution.pH is not None:
        stated, found = middle(solution.pH), middle(acid.pH)
        if abs(stated - found) > 0.3:
            notes.append(
                f"pH {stated:.2f} is stated and the free acid gives {found:.2f}: the acid is used"
            )
    notes += [remark] if activities and (remark := davies_remark(acid.strength)) else []
    return notes


def _cyanide_notes(solution: Solution, strength: Array, activities: bool) -> list[str]:
    notes = []
    if solution.free_cyanide_g_per_L is None:
        notes.append("free cyanide is not known: potentials stand at 1 mol/L of it")
    if solution.pH is None:
        notes.append("pH is not known: all free cyanide is taken as CN-, no water is reduced")
    notes += [remark] if activities and (remark := davies_remark(strength)) else []
    return notes


def thermal_V(kelvin: float) -> float:
    """Return R T / F [V]."""
    from leachkin.constants import FARADAY_C_per_mol

    return GAS_CONSTANT_J_per_mol_K * kelvin / FARADAY_C_per_mol
