"""The rate law of an ore: resistances against size, temperature, reagent and stirring.

``ln tau = ln tau_ref + Ea (1/RT - 1/RT_ref) - n ln(C/C_ref) + p ln(d/d_ref) - m ln(N/N_ref)``
for each resistance, an ultimate extraction by size, and a reference state. Every parameter has
the batch shape B: () for one set, (n,) for n draws.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.kinetics.box import DataBox
from leachkin.kinetics.ore_curve import OreCurve, node_times
from leachkin.kinetics.other_laws import (
    CLOCK_LAWS,
    ClockLaw,
    canonical_law,
    clock_conversion_and_sensitivities,
    law_terms,
)
from leachkin.kinetics.particle_law import ParticleLaw
from leachkin.kinetics.resistance import (
    NUMBERS,
    ClassConversions,
    Reference,
    Resistance,
    member,
)
from leachkin.problems import argument_error
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
__all__ = ["ClassConversions", "DataBox", "RateLaw", "Reference", "Resistance", "knot_weights"]
#: A strength below this share of the reference counts as this share: the clock all but stands.
LEAST_STRENGTH = 1e-9
#: Slopes at the nodes of a curve are those just before, where a class completes at a node.
_JUST_BEFORE = 1.0 - 1e-13
#: Orders and activation energies that differ by less are one [-, kJ/mol].
_SAME = 1e-9


@dataclass(frozen=True, eq=False)
class RateLaw:
    """The law of an ore: times, ultimate extraction, reference state, box of data.

    Attributes
    ----------
    name : str
        Law name, as "ash_layer+chemical", "series" or "first_order".
    resistances : tuple of Resistance
        The terms of the law.
    reference : Reference
    ultimate_size_mm : ndarray, shape (k,)
        Rising sizes at which the ultimate extraction is given.
    ultimate : ndarray, shape B + (k,)
        Linear in ln d between those sizes, flat outside; one size: a constant.
    shape_parameters : mapping of str to ndarray, shape B
    box : DataBox or None
        Conditions of the tests behind the law.
    lag_h : float or ndarray, shape B
        Equivalent hours before anything dissolves.

    Raises
    ------
    InputProblems
        If name and resistances disagree, or a parameter lies outside its range.

    Examples
    --------
    >>> law = RateLaw(
    ...     "chemical", (Resistance("chemical", np.log(10.0)),), Reference(), [1.0], [0.9]
    ... )
    >>> law.extraction([5.0, 10.0], SizeDistribution.single(1.0)).round(4).tolist()
    [0.7875, 0.9]
    """

    name: str
    resistances: tuple[Resistance, ...]
    reference: Reference
    ultimate_size_mm: Array
    ultimate: Array
    shape_parameters: Mapping[str, Array] = field(default_factory=dict)
    box: DataBox | None = None
    lag_h: Array | float = 0.0

    def __post_init__(self) -> None:
        name = canonical_law(self.name)
        kinds = tuple(resistance.kind for resistance in self.resistances)
        if sorted(kinds) != sorted(law_terms(name)):
            raise argument_error(
                "resistances", f"{', '.join(kinds)} for law {name}", ", ".join(law_terms(name))
            )
        sizes = np.atleast_1d(np.asarray(self.ultimate_size_mm, dtype=float))
        ultimate = np.asarray(self.ultimate, dtype=float)
        ultimate = ultimate[..., None] if ultimate.ndim == 0 else ultimate
        _check_ultimate(sizes, ultimate)
        lag = np.asarray(self.lag_h, dtype=float)
        if not np.all(np.isfinite(lag)) or np.any(lag < 0.0):
            raise argument_error("lag_h", f"{lag}", "finite, not below 0 h")
        shapes = {k: np.asarray(v, dtype=float) for k, v in self.shape_parameters.items()}
        values = (("name", name), ("ultimate_size_mm", sizes), ("ultimate", ultimate))
        for key, value in (*values, ("lag_h", lag), ("shape_parameters", shapes)):
            object.__setattr__(self, key, value)
        _ = self.batch_shape

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """Shape B of the parameters."""
        parts = [np.shape(getattr(r, name)) for r in self.resistances for name in NUMBERS]
        shapes = [np.shape(value) for value in self.shape_parameters.values()]
        return np.broadcast_shapes(*parts, *shapes, self.ultimate.shape[:-1], np.shape(self.lag_h))

    @property
    def is_clock(self) -> bool:
        """True for an empirical law of one clock."""
        return self.name in CLOCK_LAWS

    @property
    def order(self) -> Array | None:
        """Order in the reagent that all resistances share, shape B or (); None if they differ."""
        return self._common("order")

    def shared_clock(self, one_temperature: bool = True) -> bool:
        """Return whether one equivalent leach time serves all resistances.

        Parameters
        ----------
        one_temperature : bool
            False where the temperature changes: then the activation energies must agree too.
        """
        energy = self._common("activation_energy_kJ_per_mol")
        return self.order is not None and (one_temperature or energy is not None)

    def clock_rate(
        self, temperature_K: ArrayLike | None = None, reagent_g_per_L: ArrayLike | None = None
    ) -> Array:
        """Return equivalent hours (at the reference state) per hour at given conditions.

        Parameters
        ----------
        temperature_K, reagent_g_per_L : array_like, optional
            Any shape that broadcasts with B; the reference where left out.

        Raises
        ------
        InputProblems
            If the resistances share no clock under these conditions.
        """
        order, energy = self.order, self._common("activation_energy_kJ_per_mol")
        if order is None or (energy is None and temperature_K is not None):
            raise _no_clock()
        rate = order * self._ln_strength(reagent_g_per_L)
        if energy is not None:
            rate = rate - energy * self._thermal(temperature_K)
        return np.asarray(np.exp(rate))

    def times(
        self,
        size_mm: ArrayLike,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> ParticleLaw | ClockLaw:
        """Return the law of grains of given sizes under given conditions.

        Parameters
        ----------
        size_mm : array_like, shape (c,)
        temperature_K, reagent_g_per_L, stirring_rpm : array_like, shape () or B, optional
            The reference state where left out.

        Returns
        -------
        ParticleLaw or ClockLaw with times of shape B + (c,)
        """
        size = _above_zero("size_mm", np.atleast_1d(np.asarray(size_mm, dtype=float)))
        ln_size = np.log(size / self.reference.size_mm)
        thermal = np.asarray(self._thermal(temperature_K))[..., None]
        strength = np.asarray(self._ln_strength(reagent_g_per_L))[..., None]
        stirring = np.asarray(self._ln_stirring(stirring_rpm))[..., None]
        tau = {}
        for r in self.resistances:
            ln_tau, energy, order, p, m = (np.asarray(getattr(r, n))[..., None] for n in NUMBERS)
            tau[r.kind] = np.exp(
                ln_tau + energy * thermal - order * strength + p * ln_size - m * stirring
            )
        if "clock" in tau:
            shapes = {k: v[..., None] if v.ndim else v for k, v in self.shape_parameters.items()}
            return ClockLaw(self.name, tau["clock"], shapes)
        return ParticleLaw(**tau)

    def ultimate_at(self, size_mm: ArrayLike) -> Array:
        """Return the ultimate extraction of sizes (c,), shape B + (c,)."""
        size = _above_zero("size_mm", np.atleast_1d(np.asarray(size_mm, dtype=float)))
        return np.asarray(self.ultimate @ knot_weights(size, self.ultimate_size_mm).T)

    def conversion(
        self,
        time_h: ArrayLike,
        size_mm: ArrayLike,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> Array:
        """Return the conversion X under constant conditions.

        Parameters
        ----------
        time_h : array_like, shape (t,) or B + (t,)
        size_mm : array_like, shape (c,)
        temperature_K, reagent_g_per_L, stirring_rpm : array_like, shape () or B, optional

        Returns
        -------
        ndarray, shape B + (c, t)
        """
        law = self.times(size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
        found = law.conversion(self._class_times(time_h))
        return found if np.ndim(time_h) else found[..., 0]

    def extraction(
        self,
        time_h: ArrayLike,
        sizes: SizeDistribution,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> Array:
        """Return the extraction of all the metal under constant conditions, shape B + (t,)."""
        X = self.conversion(time_h, sizes.size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
        weight = self.class_weights(sizes)
        if np.ndim(time_h) == 0:
            return np.asarray(np.sum(weight * X, axis=-1))
        return np.asarray(np.sum(weight[..., None] * X, axis=-2))

    def extraction_and_sensitivities(
        self,
        time_h: ArrayLike,
        sizes: SizeDistribution,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> ClassConversions:
        """Return conversions by class with derivatives by ln tau and by shape parameters."""
        law = self.times(sizes.size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
        at = self._class_times(time_h)
        weight = self.class_weights(sizes)
        if isinstance(law, ParticleLaw):
            slopes = law.sensitivities(at)
            by_kind = dict(zip(("film", "ash_layer", "chemical"), slopes, strict=True))
            held: dict[str, Array] = {r.kind: by_kind[r.kind] for r in self.resistances}
            return ClassConversions(law.conversion(at), held, {}, weight)
        theta = at / law.tau[..., None]
        shapes = {k: v[..., None] if v.ndim else v for k, v in law.shape_parameters.items()}
        X, slope, by_shape = clock_conversion_and_sensitivities(self.name, theta, shapes)
        return ClassConversions(X, {"clock": -theta * slope}, by_shape, weight)

    def class_weights(self, sizes: SizeDistribution) -> Array:
        """Return metal share times ultimate extraction of each class, shape B + (c,)."""
        return sizes.metal_share * self.ultimate_at(sizes.size_mm)

    def ore_curve(self, sizes: SizeDistribution, temperature_K: float | None = None) -> OreCurve:
        """Return extraction against equivalent leach time at one temperature.

        Parameters
        ----------
        sizes : SizeDistribution
        temperature_K : float, optional
            Temperature of the curve; the reference where left out.

        Raises
        ------
        InputProblems
            If the resistances have different orders in the reagent: no single time serves them.
        """
        if self.order is None:
            raise _no_clock()
        temperature = self.reference.temperature_K if temperature_K is None else temperature_K
        law = self.times(sizes.size_mm, temperature)
        nodes = node_times(float(np.max(law.complete_at) + np.max(self.lag_h)))
        weight = self.class_weights(sizes)
        extraction = self.extraction(nodes, sizes, temperature)
        root = np.sqrt(nodes)
        rate = law.rate_of_time(self._class_times(nodes[1:] * _JUST_BEFORE))
        later = 2.0 * root[1:] * np.sum(weight[..., None] * rate, axis=-2)
        near = np.array([1.0, 4.0]) * 1e-6 * nodes[1]
        early = self.extraction(near, sizes, temperature) / np.sqrt(near)
        start = np.maximum(2.0 * early[..., :1] - early[..., 1:], 0.0)  # of E = a q + b q^2: a
        return OreCurve(
            nodes,
            extraction,
            np.broadcast_to(np.sum(weight, axis=-1), self.batch_shape),
            float(temperature),
            self.reference.reagent_g_per_L,
            self.order,
            np.concatenate([start, later], axis=-1),
        )

    def initial_depth(self, sizes: SizeDistribution) -> Array:
        """Return the state of fresh grains, zeros of shape B + (c,)."""
        return np.zeros((*self.batch_shape, sizes.classes))

    def advance(
        self,
        depth: ArrayLike,
        hours: ArrayLike,
        sizes: SizeDistribution,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> Array:
        """Return the state of the grains after some hours under constant conditions.

        Parameters
        ----------
        depth : array_like, shape B + (c,)
            Core depth 1 - (1-X)^(1/3) from 0 to 1; of a one-clock law the reading of its clock.
        hours : array_like, shape () or B
        sizes : SizeDistribution
        temperature_K, reagent_g_per_L, stirring_rpm : array_like, shape () or B, optional

        Returns
        -------
        ndarray, shape B + (c,)

        Notes
        -----
        ``z -> depth(time(z) + dt)``: exact while the conditions hold, second order in a changing
        history with the conditions of the middle of each step.
        """
        if np.any(np.asarray(self.lag_h) > 0.0):
            raise argument_error(
                "lag_h",
                "a law with a lag has no state of its grains",
                "lag 0",
                "start the history when the lag is over",
            )
        law = self.times(sizes.size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
        more = np.asarray(hours, dtype=float)
        if not np.all(np.isfinite(more)) or np.any(more < 0.0):
            raise argument_error("hours", f"{more}", "finite, not below 0 h")
        return law.advanced(depth, more[..., None])

    def extraction_of_depth(self, depth: ArrayLike, sizes: SizeDistribution) -> Array:
        """Return the extraction of all the metal, shape B, of grains at a depth B + (c,)."""
        X = self.times(sizes.size_mm).conversion_of_depth(depth)
        return np.asarray(np.sum(self.class_weights(sizes) * X, axis=-1))

    def select(self, index: int) -> RateLaw:
        """Return one member of a batch; parameters without a batch stay."""
        return replace(
            self,
            resistances=tuple(r.select(index) for r in self.resistances),
            ultimate=member(self.ultimate, index, 1),
            shape_parameters={k: member(v, index, 0) for k, v in self.shape_parameters.items()},
            lag_h=member(self.lag_h, index, 0),
        )

    def _class_times(self, time_h: ArrayLike) -> Array:
        """Times less the lag, with an axis for the classes: (1, t) or B + (1, t)."""
        at = np.atleast_1d(np.asarray(time_h, dtype=float))
        if not np.all(np.isfinite(at)) or np.any(at < 0.0):
            raise argument_error("time_h", "a time below 0 or not finite", "finite, from 0 h up")
        late = np.asarray(self.lag_h)
        after = np.maximum(at - (late[..., None] if late.ndim else late), 0.0)
        return np.asarray(after[..., None, :])

    def _common(self, name: str) -> Array | None:
        values = [np.asarray(getattr(r, name)) for r in self.resistances]
        same = all(np.all(np.abs(v - values[0]) <= _SAME) for v in values[1:])
        return values[0] if same else None

    def _thermal(self, temperature_K: ArrayLike | None) -> Array | float:
        """1/(R T) - 1/(R T_ref) [mol/kJ]."""
        if temperature_K is None:
            return 0.0
        temperature = _above_zero("temperature_K", np.asarray(temperature_K, dtype=float))
        return (
            1e3
            / GAS_CONSTANT_J_per_mol_K
            * (1.0 / temperature - 1.0 / self.reference.temperature_K)
        )

    def _ln_strength(self, reagent_g_per_L: ArrayLike | None) -> Array | float:
        if reagent_g_per_L is None:
            return 0.0
        strength = np.asarray(reagent_g_per_L, dtype=float)
        if not np.all(np.isfinite(strength)) or np.any(strength < 0.0):
            raise argument_error("reagent_g_per_L", f"{strength}", "finite, not below 0 g/L")
        share = np.maximum(strength / self.reference.reagent_g_per_L, LEAST_STRENGTH)
        return np.asarray(np.log(share))

    def _ln_stirring(self, stirring_rpm: ArrayLike | None) -> Array | float:
        if stirring_rpm is None or self.reference.stirring_rpm is None:
            return 0.0
        speed = _above_zero("stirring_rpm", np.asarray(stirring_rpm, dtype=float))
        return np.asarray(np.log(speed / self.reference.stirring_rpm))


def knot_weights(size_mm: Array, knot_size_mm: Array) -> Array:
    """Return weights (c, k) of interpolation linear in ln d between knots, flat outside."""
    knots = np.log(knot_size_mm)
    return np.stack(
        [np.interp(np.log(size_mm), knots, unit) for unit in np.eye(knots.size)], axis=-1
    )


def _above_zero(name: str, value: Array) -> Array:
    if not np.all(np.isfinite(value)) or np.any(value <= 0.0):
        raise argument_error(name, f"{value}", "finite, above 0")
    return value


def _check_ultimate(size_mm: Array, ultimate: Array) -> None:
    _above_zero("ultimate_size_mm", size_mm)
    if np.any(np.diff(size_mm) <= 0.0):
        raise argument_error("ultimate_size_mm", f"{size_mm.tolist()}", "rising sizes")
    if ultimate.shape[-1] != size_mm.size:
        raise argument_error(
            "ultimate", f"{ultimate.shape[-1]} values", f"one for each of {size_mm.size} sizes"
        )
    if not np.all(np.isfinite(ultimate)) or np.any(ultimate < 0.0):
        raise argument_error("ultimate", f"{ultimate}", "finite fractions, none below 0")


def _no_clock() -> Exception:
    return argument_error(
        "law",
        "its resistances differ in reagent order, or in activation energy under a changing "
        "temperature: no single equivalent leach time serves them",
        "one order, and one temperature or one activation energy",
        "follow the grains step by step: law.advance or extraction_along",
    )
