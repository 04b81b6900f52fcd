"""The mixed potential of metal in a liquor: which sink takes what, at one place and one moment.

At one potential the current of the dissolving metal is that of all that is reduced [wagner1938]:
metal ions, ferric iron and oxygen as fast as they arrive, hydrogen by its own slowness. It explains
sinks and ranks them; it sets no budget until it is fitted to a barren of the site.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.current_balance import Balance, Electrode, Reduction, balance_currents
from leachkin.cementation.electrode import ElectrodeKinetics, electrode_kinetics
from leachkin.cementation.liquor_state import LiquorState, liquor_state, thermal_V
from leachkin.cementation.solution import Precipitant, Solution
from leachkin.chemistry import (
    diffusion_coefficient_m2_per_s,
    log10_water_product,
    molar_mass,
    standard_potential,
    transfer_ratio,
)
from leachkin.constants import FARADAY_C_per_mol
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]
Transport = ArrayLike | Mapping[str, ArrayLike]

_L_PER_m3 = 1e3
_LN10 = float(np.log(10.0))
#: What every result that was not fitted to a site has to say.
NO_BUDGET = (
    "The mixed potential explains and ranks the sinks. It sets no budget: it was not fitted to a "
    "barren of this site, so the demand rests on the sinks as measured."
)
#: Supply of cyanide and hydroxide for each electron of zinc that they hold in solution.
_LIGANDS_PER_ELECTRON = 2.0


@dataclass(frozen=True)
class MixedPotential:
    """Currents at one place of a vessel.

    Attributes
    ----------
    potential_V : ndarray, shape B
    anodic_A_per_m2 : ndarray, shape B
        Of the dissolving precipitant.
    currents_A_per_m2 : mapping of str to ndarray, shape B
        By sink: each metal, "Fe3+", "O2", "hydrogen".
    imbalance : ndarray, shape B
        Of the currents, over the anodic one.
    steps : int
    state : LiquorState
    precipitant : Precipitant
    kinetics : ElectrodeKinetics
    transport_m_per_s : mapping of str to ndarray
        Transfer coefficient of each species.
    notes : tuple of str
    """

    potential_V: Array
    anodic_A_per_m2: Array
    currents_A_per_m2: Mapping[str, Array]
    imbalance: Array
    steps: int
    state: LiquorState
    precipitant: Precipitant
    kinetics: ElectrodeKinetics
    transport_m_per_s: Mapping[str, Array] = field(default_factory=dict)
    notes: tuple[str, ...] = ()

    @property
    def shares(self) -> dict[str, Array]:
        """Share of the precipitant's electrons that each sink takes, shape B."""
        return {
            name: np.divide(
                current,
                self.anodic_A_per_m2,
                out=np.zeros_like(self.anodic_A_per_m2),
                where=self.anodic_A_per_m2 > 0.0,
            )
            for name, current in self.currents_A_per_m2.items()
        }

    @property
    def precipitant_g_per_h_m2(self) -> Array:
        """Precipitant that dissolves, shape B."""
        electrons = self.precipitant.electrons(self.state.medium)
        grams = molar_mass(self.precipitant.metal) / (electrons * FARADAY_C_per_mol)
        return np.asarray(3600.0 * grams * self.anodic_A_per_m2)

    @property
    def metal_g_per_h_m2(self) -> dict[str, Array]:
        """Metal put out, by metal, shape B."""
        return {
            name: np.asarray(
                3600.0
                * molar_mass(name)
                / (ion.electrons * FARADAY_C_per_mol)
                * self.currents_A_per_m2[name]
            )
            for name, ion in self.state.metals.items()
        }

    @property
    def factor_kg_per_kg(self) -> Array:
        """Precipitant per metal put out; infinite where none is, shape B."""
        metal = sum(self.metal_g_per_h_m2.values(), np.zeros_like(self.anodic_A_per_m2))
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(metal > 0.0, self.precipitant_g_per_h_m2 / metal, np.inf)

    def table(self) -> ResultTable:
        """Return the sinks by share, largest first; of a batch, the medians."""
        columns = (
            Column("sink", "Sink"),
            Column("current_A_per_m2", "Current", "A/m2", 3),
            Column("share", "Share of the precipitant", "%", 3),
        )
        records = [
            {
                "sink": name,
                "current_A_per_m2": float(np.median(self.currents_A_per_m2[name])),
                "share": 100.0 * float(np.median(share)),
            }
            for name, share in self.shares.items()
        ]
        records.sort(key=lambda record: -float(record["share"]))  # type: ignore[arg-type]
        caption = (
            f"Mixed potential {float(np.median(self.potential_V)):.3f} V; "
            f"{float(np.median(self.factor_kg_per_kg)):.3g} kg/kg at this place. {NO_BUDGET}"
        )
        return ResultTable.from_records("mixed_potential", columns, records, caption)


def mixed_potential(
    solution: Solution,
    precipitant: Precipitant,
    transport_m_per_s: Transport,
    kinetics: ElectrodeKinetics | None = None,
    *,
    dissolved_g_per_L: ArrayLike = 0.0,
    activities: bool = True,
) -> MixedPotential:
    """Return the potential of a precipitant in a solution and the current of every sink.

    Parameters
    ----------
    solution : Solution
        May hold arrays, shape B. What was not measured takes no part, and the result says so.
    precipitant : Precipitant
    transport_m_per_s : array_like or mapping of str to array_like
        Transfer coefficient: one for all species, or by species (``"Cu2+"``, ``"Fe3+"``, ``"O2"``,
        ``"H+"``, ``"HSO4-"``, ``"CN-"``, ``"OH-"``, complexes); those left out by the two-thirds
        power of their diffusion coefficients.
    kinetics : ElectrodeKinetics, optional
        From the table, mostly from memory, where left out.
    dissolved_g_per_L : array_like, shape B
        Precipitant dissolved so far.
    activities : bool
        By Davies' equation; False takes concentrations for activities.

    Returns
    -------
    MixedPotential

    Raises
    ------
    InputProblems
        If a number has no meaning, a species is unknown, or the precipitant is not used in the
        medium.

    Examples
    --------
    1 g/L of copper with 2 g/L of ferric iron at pH 2, equal transfer: the iron factor there.

    >>> liquor = Solution({"Cu": 1.0}, ferric_g_per_L=2.0, oxygen_mg_per_L=0.0, pH=2.0)
    >>> found = mixed_potential(liquor, Precipitant("iron"), 1e-5)
    >>> round(float(found.factor_kg_per_kg), 1)
    1.9
    """
    state = liquor_state(solution, precipitant, dissolved_g_per_L, activities)
    held = kinetics or usual_kinetics(solution, precipitant)
    speeds = transport_of(state, transport_m_per_s)
    shape, electrode = electrode_of(state, held, speeds)
    balance = balance_currents(electrode)
    notes = (*state.notes, *_not_measured(solution))
    return _result(state, precipitant, held, speeds, shape, balance, notes)


def deposit_of(solution: Solution, precipitant: Precipitant) -> dict[str, float]:
    """Return the metals that may make the deposit, by what the solution holds (medians)."""
    return {
        metal: float(np.median(solution.grade(metal)))
        for metal in solution.metals
        if metal != precipitant.metal
    }


def usual_kinetics(solution: Solution, precipitant: Precipitant) -> ElectrodeKinetics:
    """Return the kinetics of the table for a precipitant and the deposit of a solution."""
    deposit = deposit_of(solution, precipitant)
    return electrode_kinetics(precipitant, deposit, medium=solution.kind)


def transport_of(state: LiquorState, given: Transport) -> dict[str, Array]:
    """Return the transfer coefficient of every species of a state [m/s].

    Raises
    ------
    InputProblems
        If one is not above 0, or a species is not in the solution.
    """
    needed = _species(state)
    if not isinstance(given, Mapping):
        return dict.fromkeys(needed, _positive("transport_m_per_s", given))
    for name in given:
        if name not in needed:
            raise InputProblems([unknown_name("species", name, needed, column="transport_m_per_s")])
    if not given:
        raise argument_error("transport_m_per_s", "an empty mapping", "one species at least")
    first = next(iter(given))
    known = {name: _positive(f"transport_m_per_s[{name!r}]", k) for name, k in given.items()}
    return {
        name: known[name]
        if name in known
        else np.asarray(known[first] * transfer_ratio(name, first, state.temperature_K))
        for name in needed
    }


def electrode_of(
    state: LiquorState, kinetics: ElectrodeKinetics, speeds: Mapping[str, Array]
) -> tuple[tuple[int, ...], Electrode]:
    """Return the batch shape and the electrode, everything flat."""
    thermal = thermal_V(state.temperature_K)
    limits = {
        name: _limit(ion.electrons, speeds[ion.ion], ion.mol_per_L)
        for name, ion in state.metals.items()
    }
    hydrogen = _hydrogen(state, kinetics, speeds, thermal)
    oxygen_V = standard_potential("O2,H+/H2O", state.temperature_K) + _acidity_V(state, thermal)
    own = state.precipitant
    # the metal dissolves along one line whatever its ion stands at: the exchange current follows
    slope = np.asarray(kinetics.dissolution_slope_V) / _LN10
    exchange = kinetics.dissolution_A_per_m2 * np.exp(
        (own.potential.value_V - own.standard_V) / slope
    )
    parts: dict[str, ArrayLike] = {
        "thermal_V": thermal,
        "anode_V": own.potential.value_V,
        "anode_A_per_m2": exchange,
        "anode_slope_V": slope,
        "anode_limit_A_per_m2": _anode_limit(state, speeds),
        **hydrogen,
        "hydrogen_slope_V": np.asarray(kinetics.hydrogen_slope_V) / _LN10,
        "oxygen_limit_A_per_m2": _limit(4, speeds["O2"], state.oxygen_mol_per_L),
        "oxygen_A_per_m2": kinetics.oxygen_A_per_m2,
        "oxygen_V": oxygen_V,
        "oxygen_slope_V": np.asarray(kinetics.oxygen_slope_V) / _LN10,
    }
    pairs = [
        (limits[name], ion.electrons, ion.potential.value_V) for name, ion in state.metals.items()
    ]
    if state.medium == "acid":
        ferric = standard_potential("Fe3+/Fe2+", state.temperature_K)
        pairs.append((_limit(1, speeds["Fe3+"], state.ferric_mol_per_L), 1, np.asarray(ferric)))
    shape = np.broadcast_shapes(
        *(np.shape(part) for part in parts.values()), *(np.shape(limit) for limit, _, _ in pairs)
    )

    def flat(value: ArrayLike) -> Array:
        return np.broadcast_to(np.asarray(value, dtype=np.float64), shape).reshape(-1).copy()

    reductions = tuple(Reduction(flat(i), n, flat(V)) for i, n, V in pairs)
    electrode = Electrode(
        **{name: flat(part) for name, part in parts.items()},
        anode_electrons=state.precipitant.electrons,
        reductions=reductions,
    )
    return shape, electrode


def _hydrogen(
    state: LiquorState, kinetics: ElectrodeKinetics, speeds: Mapping[str, Array], thermal: float
) -> dict[str, ArrayLike]:
    """Acid up to its supply, and water without end, on one Tafel line each."""
    if state.pH is None:
        none = np.zeros(())
        return {
            "hydrogen_acid_A_per_m2": none,
            "hydrogen_water_A_per_m2": none,
            "hydrogen_limit_A_per_m2": none,
        }
    slope = np.asarray(kinetics.hydrogen_slope_V) / _LN10
    exchange = kinetics.hydrogen_A_per_m2
    at_water = _LN10 * thermal * log10_water_product(state.temperature_K)
    supply = _limit(1, speeds["H+"], state.hydrogen_mol_per_L) + _limit(
        1, speeds["HSO4-"], state.bisulphate_mol_per_L
    )
    return {
        "hydrogen_acid_A_per_m2": exchange * np.exp(_acidity_V(state, thermal) / slope),
        "hydrogen_water_A_per_m2": exchange * np.exp(at_water / slope),
        "hydrogen_limit_A_per_m2": supply,
    }


def _acidity_V(state: LiquorState, thermal: float) -> Array:
    """Potential of hydrogen at 1 atm."""
    acidity = np.zeros(()) if state.pH is None else state.pH
    return np.asarray(-_LN10 * thermal * acidity)


def _anode_limit(state: LiquorState, speeds: Mapping[str, Array]) -> ArrayLike:
    """What cyanide and hydroxide can hold in solution of the dissolving metal."""
    if state.medium != "cyanide":
        return np.inf
    supply = _limit(1, speeds["CN-"], state.cyanide_mol_per_L) + _limit(
        1, speeds["OH-"], state.hydroxide_mol_per_L
    )
    return np.where(supply > 0.0, supply / _LIGANDS_PER_ELECTRON, np.inf)


def _limit(electrons: int, speed: Array, mol_per_L: Array) -> Array:
    return np.asarray(electrons * FARADAY_C_per_mol * speed * mol_per_L * _L_PER_m3)


def _species(state: LiquorState) -> tuple[str, ...]:
    names = [ion.ion for ion in state.metals.values()]
    names += ["O2", "H+", "HSO4-"]
    names += ["CN-", "OH-"] if state.medium == "cyanide" else ["Fe3+"]
    for name in names:
        diffusion_coefficient_m2_per_s(name)
    return tuple(dict.fromkeys(names))


def _result(
    state: LiquorState,
    precipitant: Precipitant,
    kinetics: ElectrodeKinetics,
    speeds: Mapping[str, Array],
    shape: tuple[int, ...],
    balance: Balance,
    notes: tuple[str, ...],
) -> MixedPotential:
    names = [*state.metals, *(["Fe3+"] if state.medium == "acid" else [])]
    currents = {name: balance.reductions_A_per_m2[i].reshape(shape) for i, name in enumerate(names)}
    currents["O2"] = balance.oxygen_A_per_m2.reshape(shape)
    currents["hydrogen"] = balance.hydrogen_A_per_m2.reshape(shape)
    return MixedPotential(
        balance.potential_V.reshape(shape),
        balance.anodic_A_per_m2.reshape(shape),
        currents,
        balance.imbalance.reshape(shape),
        balance.steps,
        state,
        precipitant,
        kinetics,
        speeds,
        tuple(dict.fromkeys(notes)),
    )


def _not_measured(solution: Solution) -> list[str]:
    notes = []
    if solution.kind == "acid" and solution.ferric_g_per_L is None:
        notes.append("ferric iron not measured: it takes no part here, and it often is the largest")
    if solution.oxygen_mg_per_L is None:
        notes.append("dissolved oxygen not measured: it takes no part here")
    return notes


def _positive(name: str, values: ArrayLike) -> Array:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(
            name, f"{array.min():g} m/s", "above 0 m/s", "1e-5 m/s is usual for moving liquor"
        )
    return array
