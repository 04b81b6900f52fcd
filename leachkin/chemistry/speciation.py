"""Which species a solution holds: cyanide and hydroxo complexes, sulphate; in batches."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry.activity import (
    davies_holds,
    davies_log10_gamma,
    davies_remark,
    ionic_strength_mol_per_L,
)
from leachkin.chemistry.aqueous_constants import (
    charges_of,
    checked_constants,
    known_components,
    log10_beta_at,
    log10_water_product,
    solubility_products,
    species_of,
)
from leachkin.chemistry.cyanide import StabilityConstant, check_pH
from leachkin.chemistry.mass_balances import Balanced, solve_mass_balances
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

#: A total of zero stands as this in the balances [mol/L]; results give exact zeros.
_TRACE_mol_per_L = 1e-25
_LN10 = float(np.log(10.0))
#: The ionic strength has settled when it moves by less than this [mol/L].
STRENGTH_TOLERANCE = 1e-9
MOST_ROUNDS = 60


@dataclass(frozen=True)
class Speciation:
    """The species of a solution.

    Attributes
    ----------
    species : tuple of str
        Free components first, then what they form; OH- among them.
    concentration_mol_per_L, activity : ndarray, shape B + (s,)
    pH : ndarray, shape B
    temperature_K : ndarray, shape B
    ionic_strength_mol_per_L : ndarray, shape B
        With ions of charge one for what the charges lack.
    activities_hold : ndarray of bool, shape B
        Whether Davies' equation holds at that ionic strength.
    converged : ndarray of bool, shape B
    warnings : tuple of str
    sources : tuple of str
    """

    species: tuple[str, ...]
    concentration_mol_per_L: Array
    activity: Array
    pH: Array
    temperature_K: Array
    ionic_strength_mol_per_L: Array
    activities_hold: NDArray[np.bool_]
    converged: NDArray[np.bool_]
    warnings: tuple[str, ...] = ()
    sources: tuple[str, ...] = ()

    def of(self, species: str) -> Array:
        """Return the concentration of a species [mol/L], shape B.

        Raises
        ------
        InputProblems
            If it is not in the solution; the nearest are named.
        """
        return np.asarray(self.concentration_mol_per_L[..., self._position(species)])

    def activity_of(self, species: str) -> Array:
        """Return the activity of a species, shape B; errors as :meth:`of`."""
        return np.asarray(self.activity[..., self._position(species)])

    def table(self) -> ResultTable:
        """Return the species as a table; of a batch, the medians."""
        columns = (
            Column("species", "Species"),
            Column("concentration_mol_per_L", "Concentration", "mol/L", 3),
            Column("activity", "Activity", "", 3),
        )
        records = [
            {
                "species": name,
                "concentration_mol_per_L": float(np.median(self.of(name))),
                "activity": float(np.median(self.activity_of(name))),
            }
            for name in self.species
        ]
        caption = f"pH {float(np.median(self.pH)):.3g}"
        return ResultTable.from_records("speciation", columns, records, caption)

    def _position(self, species: str) -> int:
        if species not in self.species:
            raise InputProblems([unknown_name("species", species, self.species, column="species")])
        return self.species.index(species)


def speciate(
    totals_mol_per_L: Mapping[str, ArrayLike],
    pH: ArrayLike | None = None,
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K,
    *,
    constants: Mapping[str, float] | None = None,
    activities: bool = True,
    other_ions_mol_per_L: ArrayLike = 0.0,
) -> Speciation:
    """Return the species of a solution from the totals of its components.

    Parameters
    ----------
    totals_mol_per_L : mapping of str to array_like, shape B
        By component: ``"CN-"``, ``"Cu+"``, ``"Ag+"``, ``"Au+"``, ``"Zn2+"``, ``"Cd2+"``,
        ``"Ni2+"``, ``"SO4 2-"``, ``"Fe3+"``; and ``"H+"`` where no pH is given: acid hydrogen in
        all, two for each sulphuric acid.
    pH : array_like, shape B, optional
        0 to 14, as an activity.
    temperature_K : array_like, shape B
        Moves each constant by its enthalpy.
    constants : mapping of str to float, optional
        log10 beta at 25 degC by species, in place of the table's.
    activities : bool
        False takes concentrations for activities.
    other_ions_mol_per_L : array_like, shape B
        Ionic strength of ions that take no part.

    Returns
    -------
    Speciation

    Raises
    ------
    InputProblems
        If a component is unknown, a total is negative, or neither pH nor H+ is given.

    Examples
    --------
    Half a gram of sodium cyanide a litre at pH 10:

    >>> found = speciate({"CN-": 0.0102}, pH=10.0, activities=False)
    >>> round(float(found.of("HCN") / 0.0102), 3)
    0.14
    """
    task = _Task.of(totals_mol_per_L, pH, temperature_K, checked_constants(constants))
    other = np.asarray(other_ions_mol_per_L, dtype=np.float64)
    strength = np.zeros(task.shape)
    start: Array | None = None
    found = None
    for _ in range(MOST_ROUNDS):
        found = solve_mass_balances(task.ln_constants(strength), task.matrix, task.totals, start)
        c = task.all_species(found, strength)
        now = task.strength(c, other)
        settled = np.abs(now - strength) <= STRENGTH_TOLERANCE * (1.0 + now)
        if not activities or settled.all():
            break
        strength, start = now, found.ln_components
    assert found is not None  # noqa: S101 - the loop runs at least once
    return task.result(found, strength, activities, other)


@dataclass(frozen=True)
class _Task:
    """Totals, matrix and constants of one speciation, broadcast to one shape."""

    components: tuple[str, ...]
    formed: tuple[StabilityConstant, ...]
    totals: Array
    pH: Array | None
    temperature_K: Array
    given: Mapping[str, float]
    shape: tuple[int, ...]
    zero: NDArray[np.bool_]

    @classmethod
    def of(
        cls,
        totals: Mapping[str, ArrayLike],
        pH: ArrayLike | None,
        temperature_K: ArrayLike,
        given: Mapping[str, float],
    ) -> _Task:
        names = _checked_names(totals, pH)
        acidity = None if pH is None else check_pH(pH)
        temperature = check_temperature(temperature_K)
        values = [np.asarray(totals[name], dtype=np.float64) for name in names]
        for name, value in zip(names, values, strict=True):
            if not np.all(np.isfinite(value) & (value >= 0.0)):
                raise argument_error(
                    f"totals_mol_per_L[{name!r}]", f"{value.min():g} mol/L", "0 mol/L or more"
                )
        extra = () if acidity is None else (acidity.shape,)
        shape = np.broadcast_shapes(temperature.shape, *extra, *(v.shape for v in values))
        stacked = np.stack([np.broadcast_to(v, shape) for v in values], axis=-1)
        return cls(
            tuple(names),
            species_of(names),
            np.maximum(stacked, _TRACE_mol_per_L),
            None if acidity is None else np.broadcast_to(acidity, shape),
            np.broadcast_to(temperature, shape),
            given,
            shape,
            stacked == 0.0,
        )

    @property
    def names(self) -> tuple[str, ...]:
        """Species in the balances: components, then what they form, then OH- where H+ floats."""
        water = ("OH-",) if self.pH is None else ()
        return (*self.components, *(one.species for one in self.formed), *water)

    @property
    def matrix(self) -> Array:
        """Components in each species, shape (s, c)."""
        rows = [np.eye(len(self.components))]
        rows += [self._row({one.ion: 1, one.ligand: one.ligands})[None] for one in self.formed]
        if self.pH is None:
            rows.append(self._row({"OH-": 1})[None])
        return np.concatenate(rows)

    def _row(self, parts: Mapping[str, int]) -> Array:
        row = np.zeros(len(self.components))
        for name, count in parts.items():
            if name in self.components:
                row[self.components.index(name)] += count
            elif name == "OH-" and "H+" in self.components:
                row[self.components.index("H+")] -= count
        return row

    def ln_constants(self, strength: Array) -> Array:
        """Conditional constants on concentrations, shape B + (s,)."""
        water = log10_water_product(self.temperature_K)
        columns = [np.zeros(self.shape)] * len(self.components)
        columns += [self._log10_constant(one, strength, water) for one in self.formed]
        if self.pH is None:
            gamma = self._gamma(("H+", "OH-"), strength)
            columns.append(water - gamma[..., 0] - gamma[..., 1])
        return np.asarray(_LN10 * np.stack(columns, axis=-1))

    def _log10_constant(self, one: StabilityConstant, strength: Array, water: Array) -> Array:
        """log10 of the species over its free components, those held by the pH folded in."""
        value = log10_beta_at(one, self.temperature_K, self.given.get(one.species))
        gamma = self._gamma((one.species, "H+"), strength)
        value = value - gamma[..., 0]
        for name, count in ((one.ion, 1), (one.ligand, one.ligands)):
            if name in self.components:
                value = value + count * self._gamma((name,), strength)[..., 0]
            elif name == "H+":
                value = value - self._acidity
            elif name == "OH-" and self.pH is not None:
                value = value + count * (water + self._acidity)
            elif name == "OH-":
                value = value + count * (water - gamma[..., 1])
        return np.asarray(value)

    @property
    def _acidity(self) -> Array:
        """The pH where it is held."""
        return self.pH if self.pH is not None else np.zeros(self.shape)

    def _gamma(self, species: tuple[str, ...], strength: Array) -> Array:
        return davies_log10_gamma(
            charges_of(species), strength[..., None], self.temperature_K[..., None]
        )

    def all_species(self, found: Balanced, strength: Array) -> dict[str, Array]:
        """Concentrations by species, H+ and OH- among them."""
        c = {name: found.species[..., i] for i, name in enumerate(self.names)}
        if self.pH is not None:
            gamma = self._gamma(("H+", "OH-"), strength)
            water = log10_water_product(self.temperature_K)
            c["H+"] = 10.0 ** (-self.pH - gamma[..., 0])
            c["OH-"] = 10.0 ** (water + self.pH - gamma[..., 1])
        return c

    def strength(self, c: Mapping[str, Array], other: Array) -> Array:
        """Ionic strength, ions of charge one making up what the charges lack, shape B."""
        charges = charges_of(tuple(c))
        stacked = np.stack(list(c.values()), axis=-1)
        lack = np.abs(stacked @ charges)
        return np.asarray(ionic_strength_mol_per_L(stacked, charges) + 0.5 * lack + other)

    def result(
        self, found: Balanced, strength: Array, activities: bool, other: Array
    ) -> Speciation:
        c = self.all_species(found, strength)
        names = tuple(c)
        stacked = np.stack([c[name] for name in names], axis=-1)
        stacked = np.where(self._absent(names), 0.0, stacked)
        gamma = self._gamma(names, strength) if activities else np.zeros_like(stacked)
        now = self.strength(c, other)
        activity = stacked * 10.0**gamma
        acidity = self.pH
        if acidity is None:
            acidity = -np.log10(activity[..., names.index("H+")])
        warnings = (davies_remark(now),) if activities and davies_remark(now) else ()
        return Speciation(
            names,
            stacked,
            activity,
            acidity,
            self.temperature_K,
            now,
            davies_holds(now),
            found.converged,
            (*warnings, *self._held()),
            tuple(dict.fromkeys(("nbs1982_crc", *(one.source for one in self.formed)))),
        )

    def _absent(self, names: tuple[str, ...]) -> NDArray[np.bool_]:
        """Species that hold a component whose total is zero, shape B + (s,)."""
        absent = np.zeros((*self.shape, len(names)), dtype=bool)
        for row, name in zip(self.matrix, self.names, strict=True):
            absent[..., names.index(name)] = (self.zero & (row > 0)).any(axis=-1)
        return absent

    def _held(self) -> tuple[str, ...]:
        if np.all(self.temperature_K == STANDARD_TEMPERATURE_K):
            return ()
        names = [one.species for one in self.formed if one.dH_kJ_per_mol is None]
        if not names:
            return ()
        return (f"constants held at 25 degC, no enthalpy known: {', '.join(names)}",)


def saturation_indices(found: Speciation) -> dict[str, tuple[Array, Array, Array]]:
    """Return log10 of the ion product over the solubility product of every solid that may form.

    Parameters
    ----------
    found : Speciation

    Returns
    -------
    dict of str to (value, low, high), each ndarray of shape B
        By solid; above 0 it may precipitate. Low and high take the range of the product.
    """
    indices = {}
    for solid, products in solubility_products().items():
        one = products[0]
        if one.ion not in found.species or one.ligand not in found.species:
            continue
        with np.errstate(divide="ignore"):
            product = np.log10(found.activity_of(one.ion)) + one.ligands * np.log10(
                found.activity_of(one.ligand)
            )
        lowest = min(p.low for p in products)
        highest = max(p.high for p in products)
        indices[solid] = (product - one.log10_Ksp, product - highest, product - lowest)
    return indices


def _checked_names(totals: Mapping[str, ArrayLike], pH: ArrayLike | None) -> list[str]:
    known = known_components()
    for name in totals:
        if name not in known:
            raise InputProblems([unknown_name("component", name, known, column="totals_mol_per_L")])
    if pH is None and "H+" not in totals:
        raise argument_error("pH", "no pH and no H+", "one of the two", 'totals["H+"] of all acid')
    return [name for name in totals if not (name == "H+" and pH is not None)]
