"""Sinks along a vessel, from feed to barren, by the mixed potential; and its fit to a site."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.electrode import ElectrodeKinetics
from leachkin.cementation.mixed_potential import (
    NO_BUDGET,
    MixedPotential,
    Transport,
    mixed_potential,
    usual_kinetics,
)
from leachkin.cementation.solution import Precipitant, Solution
from leachkin.chemistry import electron_factor, molar_mass
from leachkin.constants import FARADAY_C_per_mol, NORMAL_MOLAR_VOLUME_m3_per_mol
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]

STEPS = 60
_L_PER_m3 = 1e3


@dataclass(frozen=True)
class MixedCourse:
    """What happens along a vessel in plug flow; the last axis is the way, t points.

    Attributes
    ----------
    metal : str
        The one whose barren ends the way.
    contact_s_per_m : ndarray, shape B + (t,)
        Area of precipitant times time over volume of liquor.
    metals_g_per_L : mapping of str to ndarray, shape B + (t,)
    ferric_g_per_L, oxygen_mg_per_L : ndarray, shape B + (t,)
    acid_taken_g_per_L : ndarray, shape B + (t,)
        As H2SO4, by hydrogen and by oxygen.
    potential_V : ndarray, shape B + (t,)
    taken_kg_per_m3 : mapping of str to ndarray, shape B + (t,)
        Precipitant taken so far, by sink.
    reached : bool
        False where the metal stopped short of the barren: its current came to an end.
    fitted : bool
        True where it was fitted to a barren of the site.
    precipitant : Precipitant
    kinetics : ElectrodeKinetics
    notes : tuple of str
    """

    metal: str
    contact_s_per_m: Array
    metals_g_per_L: Mapping[str, Array]
    ferric_g_per_L: Array
    oxygen_mg_per_L: Array
    acid_taken_g_per_L: Array
    potential_V: Array
    taken_kg_per_m3: Mapping[str, Array]
    reached: bool
    fitted: bool
    precipitant: Precipitant
    kinetics: ElectrodeKinetics
    notes: tuple[str, ...] = ()

    @property
    def net_kg_per_m3(self) -> Array:
        """Precipitant dissolved over the whole way, shape B."""
        return np.asarray(sum(taken[..., -1] for taken in self.taken_kg_per_m3.values()))

    @property
    def factor_kg_per_kg(self) -> Array:
        """Precipitant per metal put out over the whole way, shape B."""
        out = sum(g[..., 0] - g[..., -1] for g in self.metals_g_per_L.values())
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(out > 0.0, self.net_kg_per_m3 / out, np.inf)

    @property
    def shares(self) -> dict[str, Array]:
        """Share of the precipitant that each sink took over the whole way, shape B."""
        net = self.net_kg_per_m3
        return {
            name: np.divide(taken[..., -1], net, out=np.zeros_like(net), where=net > 0.0)
            for name, taken in self.taken_kg_per_m3.items()
        }

    @property
    def hydrogen_Nm3_per_m3(self) -> Array:
        """Hydrogen over the whole way, at 0 degC and 1 atm, shape B."""
        moles = self.taken_kg_per_m3["hydrogen"][..., -1] * 1e3 / molar_mass(self.precipitant.metal)
        return np.asarray(moles * NORMAL_MOLAR_VOLUME_m3_per_mol)

    @property
    def remark(self) -> str:
        """What the figures may be used for."""
        if self.fitted:
            return "Fitted to a barren of this site: it stands for that vessel and that liquor."
        return NO_BUDGET

    def sink_table(self) -> ResultTable:
        """Return the sinks of the whole way, largest first; of a batch, the medians."""
        columns = (
            Column("sink", "Sink"),
            Column("taken_kg_per_m3", f"{self.precipitant.kind.capitalize()} taken", "kg/m3", 3),
            Column("share", "Share", "%", 3),
        )
        records = [
            {
                "sink": name,
                "taken_kg_per_m3": float(np.median(taken[..., -1])),
                "share": 100.0 * float(np.median(self.shares[name])),
            }
            for name, taken in self.taken_kg_per_m3.items()
        ]
        records.sort(key=lambda record: -float(record["share"]))  # type: ignore[arg-type]
        return ResultTable.from_records("cementation_mixed_sinks", columns, records, self.remark)

    def way_table(self, rows: int = 11) -> ResultTable:
        """Return the way from feed to barren in some rows; of a batch, the medians."""
        acid = (
            Column("ferric_g_per_L", "Fe3+ left", "g/L", 3),
            Column("acid_taken_g_per_L", "Acid taken", "g/L", 3),
        )
        columns = (
            Column("contact_s_per_m", "Contact, area times time over volume", "s/m", 3),
            Column("metal_g_per_L", f"{self.metal} left", "g/L", 4),
            *(acid if "Fe3+" in self.taken_kg_per_m3 else ()),
            Column("potential_V", "Mixed potential", "V", 4),
            *(
                Column(f"taken_{name}", f"To {name} so far", "kg/m3", 3)
                for name in self.taken_kg_per_m3
            ),
        )
        points = np.unique(np.linspace(0, self.contact_s_per_m.shape[-1] - 1, rows).astype(int))
        series = {
            "contact_s_per_m": self.contact_s_per_m,
            "metal_g_per_L": self.metals_g_per_L[self.metal],
            "ferric_g_per_L": self.ferric_g_per_L,
            "acid_taken_g_per_L": self.acid_taken_g_per_L,
            "potential_V": self.potential_V,
            **{f"taken_{name}": taken for name, taken in self.taken_kg_per_m3.items()},
        }
        records = [
            {key: float(np.median(np.atleast_1d(v[..., i]))) for key, v in series.items()}
            for i in points
        ]
        return ResultTable.from_records("cementation_mixed_way", columns, records, self.remark)


@dataclass(frozen=True)
class _Now:
    """The liquor at one point of the way; g/L, shape B."""

    metals: Mapping[str, Array]
    ferric: Array
    oxygen: Array
    acid: Array | None
    dissolved: Array


def mixed_course(
    solution: Solution,
    precipitant: Precipitant,
    transport_m_per_s: Transport,
    barren_g_per_L: Mapping[str, float],
    kinetics: ElectrodeKinetics | None = None,
    *,
    steps: int = STEPS,
    activities: bool = True,
) -> MixedCourse:
    """Return the sinks along a vessel in plug flow, from feed to a barren of one metal.

    Parameters
    ----------
    solution : Solution
        The feed, arrays of shape B. Acid falls as it is taken where it is known in g/L; a pH
        alone is held, as are pH and free cyanide of a cyanide solution.
    precipitant : Precipitant
    transport_m_per_s : array_like or mapping
        As in :func:`mixed_potential`; held along the way.
    barren_g_per_L : mapping of str to float
        One metal and what is left of it at the end, above 0 and below the feed.
    kinetics : ElectrodeKinetics, optional
    steps : int
        Of equal fall of the logarithm of that metal.
    activities : bool

    Returns
    -------
    MixedCourse

    Raises
    ------
    InputProblems
        If the barren has no meaning, or as :func:`mixed_potential`.

    Examples
    --------
    >>> liquor = Solution({"Cu": 2.0}, ferric_g_per_L=0.5, acid_g_per_L=2.0, oxygen_mg_per_L=6.0)
    >>> way = mixed_course(liquor, Precipitant("iron"), 1e-5, {"Cu": 0.1})
    >>> bool(0.879 < way.factor_kg_per_kg < 1.5)
    True
    """
    metal, depth = _end(solution, barren_g_per_L)
    held = kinetics or usual_kinetics(solution, precipitant)
    walk = _Walk(solution, precipitant, transport_m_per_s, held, metal, activities)
    return walk.along(np.full(steps, depth / steps))


def _end(solution: Solution, barren: Mapping[str, float]) -> tuple[str, float]:
    if len(barren) != 1:
        raise argument_error("barren_g_per_L", f"{len(barren)} metals", "one", '{"Cu": 0.05}')
    metal, left = next(iter(barren.items()))
    if metal not in solution.metals:
        raise argument_error("barren_g_per_L", metal, ", ".join(solution.metals))
    feed = float(np.min(solution.grade(metal)))
    if not 0.0 < left < feed:
        raise argument_error(
            "barren_g_per_L", f"{left:g} g/L of {feed:g} g/L {metal}", "above 0 and below the feed"
        )
    return metal, float(np.log(feed / left))


class _Walk:
    """Steps of a course: each by the currents at its middle."""

    def __init__(
        self,
        solution: Solution,
        precipitant: Precipitant,
        transport: Transport,
        kinetics: ElectrodeKinetics,
        metal: str,
        activities: bool,
    ) -> None:
        self.solution = solution
        self.precipitant = precipitant
        self.transport = transport
        self.kinetics = kinetics
        self.metal = metal
        self.activities = activities
        self.grams_per_A = molar_mass(precipitant.metal) / (
            precipitant.electrons(solution.kind) * FARADAY_C_per_mol
        )

    def currents(self, now: _Now) -> MixedPotential:
        """Currents in the liquor as it is now."""
        here = replace(
            self.solution,
            metals={**self.solution.metals, **now.metals},
            ferric_g_per_L=None if self.solution.ferric_g_per_L is None else now.ferric,
            iron_g_per_L=None,
            oxygen_mg_per_L=None if self.solution.oxygen_mg_per_L is None else 1e3 * now.oxygen,
            acid_g_per_L=now.acid,
        )
        return mixed_potential(
            here,
            self.precipitant,
            self.transport,
            self.kinetics,
            dissolved_g_per_L=now.dissolved,
            activities=self.activities,
        )

    def start(self) -> _Now:
        """The feed."""
        given = self.solution
        zero = np.zeros(())

        def grams(value: ArrayLike | None) -> Array:
            return zero if value is None else np.asarray(value, dtype=np.float64)

        own = self.precipitant.metal
        ferrous = np.maximum(grams(given.iron_g_per_L) - grams(given.ferric_g_per_L), 0.0)
        return _Now(
            {m: given.grade(m) for m in given.metals if m != own},
            grams(given.ferric_g_per_L),
            grams(given.oxygen_mg_per_L) / 1e3,
            None if given.acid_g_per_L is None else grams(given.acid_g_per_L),
            ferrous if own == "Fe" else zero,
        )

    def rates(self, found: MixedPotential, now: _Now) -> dict[str, Array]:
        """Fall of the logarithm of each reactant for a unit of contact [m/s]."""
        ions = found.state.metals
        moles = {name: (ions[name].electrons, now.metals[name] / molar_mass(name)) for name in ions}
        if found.state.medium == "acid":
            moles["Fe3+"] = (1, now.ferric / molar_mass("Fe"))
        moles["O2"] = (4, now.oxygen / molar_mass("O2"))
        return {
            name: _per_mole(found.currents_A_per_m2[name], n, c) for name, (n, c) in moles.items()
        }

    def moved(
        self, now: _Now, found: MixedPotential, rates: Mapping[str, Array], contact: Array
    ) -> _Now:
        """The liquor after a contact at these currents and rates [s/m]."""
        left = {name: np.exp(-np.clip(k * contact, 0.0, 700.0)) for name, k in rates.items()}
        ferric = now.ferric * left.get("Fe3+", np.ones(()))
        dissolved = self.grams_per_A * found.anodic_A_per_m2 * contact / _L_PER_m3
        if self.precipitant.metal == "Fe":
            dissolved = dissolved + (now.ferric - ferric)
        acid = now.acid
        if acid is not None:
            acid = np.maximum(acid - _acid_of(found, contact), 0.0)
        return _Now(
            {name: grams * left.get(name, np.ones(())) for name, grams in now.metals.items()},
            ferric,
            now.oxygen * left["O2"],
            acid,
            now.dissolved + dissolved,
        )

    def along(self, falls: Array) -> MixedCourse:
        """The whole way, in steps of the logarithm of the leading metal."""
        now = self.start()
        found = self.currents(now)
        zero = np.zeros(found.potential_V.shape)
        points, contacts, potentials, acids = [now], [zero], [found.potential_V], [zero]
        hydrogen, reached = [zero], True
        for fall in falls:
            rates = self.rates(found, now)
            half = self._contact(rates, 0.5 * fall)
            reached = bool(np.all(np.isfinite(half)))
            if not reached:
                break
            middle = self.moved(now, found, rates, half)
            at_middle = self.currents(middle)
            rates = self.rates(at_middle, middle)
            step = self._contact(rates, fall)
            reached = bool(np.all(np.isfinite(step)))
            if not reached:
                break
            now = self.moved(now, at_middle, rates, step)
            found = self.currents(now)
            gas = at_middle.currents_A_per_m2["hydrogen"]
            hydrogen.append(hydrogen[-1] + self.grams_per_A * gas * step / _L_PER_m3)
            points.append(now)
            contacts.append(contacts[-1] + step)
            potentials.append(found.potential_V)
            acids.append(acids[-1] + _acid_of(at_middle, step))
        taken = self._taken(points, found, hydrogen)
        return self._result(points, contacts, potentials, acids, taken, reached, found.notes)

    def _taken(
        self, points: list[_Now], found: MixedPotential, hydrogen: list[Array]
    ) -> dict[str, list[Array]]:
        """Precipitant to each sink so far [kg/m3]: what is gone from the liquor, by its electrons.

        So that metal, ferric iron and oxygen balance whatever the steps are.
        """
        own, given = self.precipitant.metal, self.precipitant.electrons(self.solution.kind)
        taken: dict[str, list[Array]] = {}
        for name, ion in found.state.metals.items():
            factor = electron_factor(own, given, name, ion.electrons)
            taken[name] = [factor * (points[0].metals[name] - p.metals[name]) for p in points]
        if found.state.medium == "acid":
            factor = electron_factor(own, given, "Fe", 1)
            taken["Fe3+"] = [factor * (points[0].ferric - p.ferric) for p in points]
        factor = electron_factor(own, given, "O2", 4)
        taken["O2"] = [factor * (points[0].oxygen - p.oxygen) for p in points]
        return taken | {"hydrogen": hydrogen}

    def _contact(self, rates: Mapping[str, Array], fall: float) -> Array:
        rate = rates[self.metal]
        endless = np.full(rate.shape, np.inf)
        return np.asarray(np.divide(fall, rate, out=endless, where=rate > 0.0))

    def _result(
        self,
        points: list[_Now],
        contacts: list[Array],
        potentials: list[Array],
        acids: list[Array],
        taken: Mapping[str, list[Array]],
        reached: bool,
        notes: tuple[str, ...],
    ) -> MixedCourse:
        def along(values: list[Array]) -> Array:
            return np.stack(np.broadcast_arrays(*values), axis=-1)

        said = list(notes)
        if not reached:
            said.append(f"{self.metal} comes to an end before this barren: its potential is met")
        if self.solution.acid_g_per_L is None and self.solution.kind == "acid":
            said.append("free acid in g/L is not known: the pH is held along the way")
        return MixedCourse(
            self.metal,
            along(contacts),
            {name: along([p.metals[name] for p in points]) for name in points[0].metals},
            along([p.ferric for p in points]),
            1e3 * along([p.oxygen for p in points]),
            along(acids),
            along(potentials),
            {name: along(values) for name, values in taken.items()},
            reached,
            False,
            self.precipitant,
            self.kinetics,
            tuple(said),
        )


def _per_mole(current: Array, electrons: int, mol_per_L: Array) -> Array:
    charge = electrons * FARADAY_C_per_mol * mol_per_L * _L_PER_m3
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(charge > 0.0, current / charge, 0.0)


def _acid_of(found: MixedPotential, contact: Array) -> Array:
    """Acid that hydrogen and oxygen take over a contact, as H2SO4 [g/L]; none from cyanide."""
    if found.state.medium != "acid":
        return np.zeros(np.shape(contact))
    current = found.currents_A_per_m2["hydrogen"] + found.currents_A_per_m2["O2"]
    moles = current * contact / (2.0 * FARADAY_C_per_mol) / _L_PER_m3
    return np.asarray(moles * molar_mass("H2SO4"))
