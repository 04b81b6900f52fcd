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
from leachkin.kinetics.drive import LEAST_STRENGTH, Drive
from leachkin.kinetics.ore_curve import OreCurve, node_times
from leachkin.kinetics.ore_terms import check_terms, effective_hours, hours_until
from leachkin.kinetics.other_laws import (
    CLOCK_LAWS,
    ClockLaw,
    canonical_law,
    law_terms,
)
from leachkin.kinetics.particle_law import ParticleLaw
from leachkin.kinetics.rate_law_checks import (
    above_zero,
    check_slow,
    check_ultimate,
    knot_weights,
    linear_weights,
    no_clock,
)
from leachkin.kinetics.resistance import NUMBERS, Reference, Resistance, member
from leachkin.problems import argument_error
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
__all__ = ["DataBox", "RateLaw", "Reference", "Resistance", "knot_weights"]
#: Slopes at the nodes of a curve are those just before, where a class completes at a node.
_JUST_BEFORE = 1.0 - 1e-13
#: Orders and activation energies that differ by less are one [-, kJ/mol].
_SAME = 1e-9
#: A curve that fades ends where its rate has fallen to exp(-this).
_FADED = 30.0
#: Numbers of shape B beside the resistances.
_TERMS = ("lag_h", "soluble_share", "fade_per_h", "slow_share")


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
    soluble_share : float or ndarray, shape B
        Share of the leachable metal that dissolves at once.
    fade_per_h : float or ndarray, shape B
        Rate at which the surface passivates: the clock slows as exp(-fade x equivalent hours).
    drive : Drive or None
        What advances the clock; None is a power of the reagent strength, by resistance.
    slow : RateLaw or None
        Law of a second, slower fraction of the leachable metal; its own ultimate is not used.
    slow_share : float or ndarray, shape B
        Share of the leachable metal in that fraction.
    ultimate_temperature_K : ndarray, shape (k,), or None
        Rising temperatures where the ultimate is given by temperature and not by size: linear
        between them, flat outside.

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
    soluble_share: Array | float = 0.0
    fade_per_h: Array | float = 0.0
    drive: Drive | None = None
    slow: RateLaw | None = None
    slow_share: Array | float = 0.0
    ultimate_temperature_K: Array | None = None

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
        check_ultimate(sizes, ultimate, self.ultimate_temperature_K)
        numbers = {key: np.asarray(getattr(self, key), dtype=float) for key in _TERMS}
        check_terms(*(numbers[key] for key in _TERMS[:3]))
        check_slow(self.slow, numbers["slow_share"])
        shapes = {k: np.asarray(v, dtype=float) for k, v in self.shape_parameters.items()}
        values = (("name", name), ("ultimate_size_mm", sizes), ("ultimate", ultimate))
        for key, value in (*values, *numbers.items(), ("shape_parameters", shapes)):
            object.__setattr__(self, key, value)
        _ = self.batch_shape

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """Shape B of the parameters."""
        parts = [np.shape(getattr(r, name)) for r in self.resistances for name in NUMBERS]
        parts += [np.shape(value) for value in self.shape_parameters.values()]
        parts += [np.shape(getattr(self, key)) for key in _TERMS]
        parts += [] if self.slow is None else [self.slow.batch_shape]
        parts += [
            np.shape(v) for v in ({} if self.drive is None else self.drive.parameters).values()
        ]
        return np.broadcast_shapes(*parts, self.ultimate.shape[:-1])

    @property
    def is_clock(self) -> bool:
        """True for an empirical law of one clock."""
        return self.name in CLOCK_LAWS

    @property
    def is_plain(self) -> bool:
        """True without a fade, a soluble share or a second fraction."""
        terms = (self.fade_per_h, self.soluble_share, self.slow_share)
        return self.slow is None and not any(np.any(term) for term in terms)

    @property
    def order(self) -> Array | None:
        """Order in the reagent that all resistances share, shape B or (); None if they differ."""
        return self._common("order") if self.drive is None else self.drive.order

    def shared_clock(self, one_temperature: bool = True) -> bool:
        """Return whether one equivalent leach time serves all resistances.

        Parameters
        ----------
        one_temperature : bool
            False where the temperature changes: then the activation energies must agree too.
        """
        energy = self._common("activation_energy_kJ_per_mol")
        one_drive = self.drive is not None or self.order is not None
        return one_drive and (one_temperature or energy is not None)

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
        if not self.shared_clock(one_temperature=temperature_K is None):
            raise no_clock()
        rate = self._ln_drive(self.resistances[0], reagent_g_per_L)
        energy = self._common("activation_energy_kJ_per_mol")
        if energy is not None:
            rate = rate - energy * self._thermal(temperature_K)
        return np.asarray(np.exp(rate))

    def held_at(self, solution: Mapping[str, ArrayLike]) -> RateLaw:
        """Return the law in a solution that is held: its times there, and no order any more.

        Parameters
        ----------
        solution : mapping of str to array_like
            Species as the drive names them ("reagent", "second", "oxidised", "reduced", "metal"
            [g/L], "pH"); those left out stand at the reference. A reagent that is left out is not
            held: it keeps its order where the drive has one.
        """
        if self.drive is None:
            rates = [self._ln_drive(r, solution.get("reagent")) for r in self.resistances]
            orders = [r.order for r in self.resistances]
        else:
            rates = [np.log(self.drive.rate(solution))] * len(self.resistances)
            orders = [self.drive.own_order] * len(self.resistances)
        held = tuple(
            replace(r, ln_tau=r.ln_tau - rate, order=0.0 if "reagent" in solution else order)
            for r, rate, order in zip(self.resistances, rates, orders, strict=True)
        )
        slow = None if self.slow is None else self.slow.held_at(solution)
        return replace(self, resistances=held, drive=None, slow=slow)

    def times(
        self,
        size_mm: ArrayLike,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> ParticleLaw | ClockLaw:
        """Return the law of grains of given sizes under given conditions.

        Of two fractions it is the law of the first.

        Parameters
        ----------
        size_mm : array_like, shape (c,)
        temperature_K, reagent_g_per_L, stirring_rpm : array_like, shape () or B, optional
            The reference state where left out.

        Returns
        -------
        ParticleLaw or ClockLaw with times of shape B + (c,)
        """
        size = above_zero("size_mm", np.atleast_1d(np.asarray(size_mm, dtype=float)))
        ln_size = np.log(size / self.reference.size_mm)
        thermal = np.asarray(self._thermal(temperature_K))[..., None]
        stirring = np.asarray(self._ln_stirring(stirring_rpm))[..., None]
        tau = {}
        for r in self.resistances:
            ln_tau, energy, _, p, m = (np.asarray(getattr(r, n))[..., None] for n in NUMBERS)
            ln_drive = np.asarray(self._ln_drive(r, reagent_g_per_L))[..., None]
            tau[r.kind] = np.exp(ln_tau + energy * thermal - ln_drive + p * ln_size - m * stirring)
        if "clock" in tau:
            shapes = {k: v[..., None] if v.ndim else v for k, v in self.shape_parameters.items()}
            return ClockLaw(self.name, tau["clock"], shapes)
        return ParticleLaw(**tau)

    def ultimate_at(self, size_mm: ArrayLike, temperature_K: ArrayLike | None = None) -> Array:
        """Return the ultimate extraction of sizes (c,), shape B + (c,)."""
        size = above_zero("size_mm", np.atleast_1d(np.asarray(size_mm, dtype=float)))
        if self.ultimate_temperature_K is None:
            return np.asarray(self.ultimate @ knot_weights(size, self.ultimate_size_mm).T)
        at = self.reference.temperature_K if temperature_K is None else temperature_K
        weights = linear_weights(np.asarray(at, dtype=float), self.ultimate_temperature_K)
        ultimate = np.sum(self.ultimate * weights, axis=-1)
        return np.asarray(np.repeat(ultimate[..., None], size.size, axis=-1))

    def conversion(
        self,
        time_h: ArrayLike,
        size_mm: ArrayLike,
        temperature_K: ArrayLike | None = None,
        reagent_g_per_L: ArrayLike | None = None,
        stirring_rpm: ArrayLike | None = None,
    ) -> Array:
        """Return the conversion X of the leachable metal under constant conditions.

        Parameters
        ----------
        time_h : array_like, shape (t,) or B + (t,)
        size_mm : array_like, shape (c,)
        temperature_K, reagent_g_per_L, stirring_rpm : array_like, shape () or B, optional

        Returns
        -------
        ndarray, shape B + (c, t)
        """
        at = self._class_times(time_h)[0]
        mixed: Array = np.zeros(())
        for part, share in self._fractions():
            law = part.times(size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
            mixed = mixed + share[..., None, None] * law.conversion(at)
        found = self._with_soluble(mixed, 2)
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
        weight = self.class_weights(sizes, temperature_K)
        if np.ndim(time_h) == 0:
            return np.asarray(np.sum(weight * X, axis=-1))
        return np.asarray(np.sum(weight[..., None] * X, axis=-2))

    def class_weights(
        self, sizes: SizeDistribution, temperature_K: ArrayLike | None = None
    ) -> Array:
        """Return metal share times ultimate extraction of each class, shape B + (c,)."""
        return sizes.metal_share * self.ultimate_at(sizes.size_mm, temperature_K)

    def ore_curve(
        self, sizes: SizeDistribution, temperature_K: ArrayLike | None = None
    ) -> OreCurve:
        """Return extraction against equivalent leach time at one temperature.

        Parameters
        ----------
        sizes : SizeDistribution
        temperature_K : float or array_like, shape B, optional
            Temperature of the curve; the reference where left out.

        Raises
        ------
        InputProblems
            If the resistances have different orders in the reagent: no single time serves them.
        """
        if not self.shared_clock():
            raise no_clock()
        temperature = self.reference.temperature_K if temperature_K is None else temperature_K
        nodes = node_times(self._complete_h(sizes, temperature))
        weight = self.class_weights(sizes, temperature)
        extraction = self.extraction(nodes, sizes, temperature)
        root = np.sqrt(nodes)
        rate = self._rate(nodes[1:] * _JUST_BEFORE, sizes, temperature)
        later = 2.0 * root[1:] * np.sum(weight[..., None] * rate, axis=-2)
        near = np.array([1.0, 4.0]) * 1e-6 * nodes[1]
        early = (self.extraction(near, sizes, temperature) - extraction[..., :1]) / np.sqrt(near)
        start = np.maximum(2.0 * early[..., :1] - early[..., 1:], 0.0)  # of E = a q + b q^2: a
        return OreCurve(
            nodes,
            extraction,
            np.broadcast_to(np.sum(weight, axis=-1), extraction.shape[:-1]),
            float(np.mean(np.asarray(temperature, dtype=float))),
            self.reference.reagent_g_per_L,
            self.order,
            np.concatenate([start, later], axis=-1),
        )

    def initial_depth(self, sizes: SizeDistribution) -> Array:
        """Return the state of fresh grains, zeros of shape B + (c,), or (2c,) of two fractions."""
        return np.zeros((*self.batch_shape, sizes.classes * len(self._fractions())))

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
            Core depth 1 - (1-X)^(1/3) from 0 to 1; of a one-clock law the reading of its clock; of
            two fractions (2c,), the first one's classes before the second one's.
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
        if np.any(self.lag_h) or np.any(self.fade_per_h):
            found = "a law with a lag or a fade: its state is not in its grains alone"
            raise argument_error("law", found, "neither", "start when the lag is over")
        more = np.asarray(hours, dtype=float)
        if not np.all(np.isfinite(more)) or np.any(more < 0.0):
            raise argument_error("hours", f"{more}", "finite, not below 0 h")
        parts = self._fractions()
        states = np.split(np.asarray(depth, dtype=float), len(parts), axis=-1)
        where = (sizes.size_mm, temperature_K, reagent_g_per_L, stirring_rpm)
        moved = [
            part.times(*where).advanced(state, more[..., None])
            for (part, _), state in zip(parts, states, strict=True)
        ]
        return moved[0] if len(moved) == 1 else np.concatenate(moved, axis=-1)

    def extraction_of_depth(
        self, depth: ArrayLike, sizes: SizeDistribution, temperature_K: ArrayLike | None = None
    ) -> Array:
        """Return the extraction of all the metal, shape B, of grains at a depth B + (c,)."""
        parts = self._fractions()
        states = np.split(np.asarray(depth, dtype=float), len(parts), axis=-1)
        mixed: Array = np.zeros(())
        for (part, share), state in zip(parts, states, strict=True):
            X = part.times(sizes.size_mm).conversion_of_depth(state)
            mixed = mixed + share[..., None] * X
        weight = self.class_weights(sizes, temperature_K)
        return np.asarray(np.sum(weight * self._with_soluble(mixed, 1), axis=-1))

    def select(self, index: int) -> RateLaw:
        """Return one member of a batch; parameters without a batch stay."""
        return replace(
            self,
            resistances=tuple(r.select(index) for r in self.resistances),
            ultimate=member(self.ultimate, index, 1),
            shape_parameters={k: member(v, index, 0) for k, v in self.shape_parameters.items()},
            drive=None if self.drive is None else self.drive.select(index),
            slow=None if self.slow is None else self.slow.select(index),
            lag_h=member(self.lag_h, index, 0),
            soluble_share=member(self.soluble_share, index, 0),
            fade_per_h=member(self.fade_per_h, index, 0),
            slow_share=member(self.slow_share, index, 0),
        )

    def _fractions(self) -> list[tuple[RateLaw, Array]]:
        """The law of each fraction, and its share of the leachable metal."""
        if self.slow is None:
            return [(self, np.ones(()))]
        slow = np.asarray(self.slow_share)
        return [(self, 1.0 - slow), (self.slow, slow)]

    def _with_soluble(self, conversion: Array, own_axes: int) -> Array:
        if not np.any(self.soluble_share):
            return conversion
        soluble = np.reshape(self.soluble_share, np.shape(self.soluble_share) + (1,) * own_axes)
        return np.asarray(soluble + (1.0 - soluble) * conversion)

    def _class_times(self, time_h: ArrayLike) -> tuple[Array, Array]:
        """Hours that count, and how fast they pass: (1, t) or B + (1, t)."""
        at = np.atleast_1d(np.asarray(time_h, dtype=float))
        if not np.all(np.isfinite(at)) or np.any(at < 0.0):
            raise argument_error("time_h", "a time below 0 or not finite", "finite, from 0 h up")
        lag, fade = (np.asarray(value)[..., None] for value in (self.lag_h, self.fade_per_h))
        if not np.any(lag) and not np.any(fade):
            return at[..., None, :], np.ones((1, 1))
        found = effective_hours(at, lag, fade)
        return found.hours[..., None, :], found.by_hours[..., None, :]

    def _rate(self, time_h: Array, sizes: SizeDistribution, temperature_K: ArrayLike) -> Array:
        """dX/dt of the leachable metal by class, shape B + (c, t)."""
        at, pace = self._class_times(time_h)
        rate: Array = np.zeros(())
        for part, share in self._fractions():
            law = part.times(sizes.size_mm, temperature_K)
            rate = rate + share[..., None, None] * law.rate_of_time(at)
        soluble = np.asarray(self.soluble_share)[..., None, None]
        return np.asarray((1.0 - soluble) * rate * pace)

    def _complete_h(self, sizes: SizeDistribution, temperature_K: ArrayLike) -> float:
        """Equivalent hours after which nothing more happens in any class of any member."""
        laws = [part.times(sizes.size_mm, temperature_K) for part, _ in self._fractions()]
        complete = np.asarray(max(float(np.max(law.complete_at)) for law in laws))
        return float(np.max(hours_until(complete, self.lag_h, self.fade_per_h, _FADED)))

    def _common(self, name: str) -> Array | None:
        every = (*self.resistances, *(() if self.slow is None else self.slow.resistances))
        values = [np.asarray(getattr(r, name)) for r in every]
        same = all(np.all(np.abs(v - values[0]) <= _SAME) for v in values[1:])
        return values[0] if same else None

    def _thermal(self, temperature_K: ArrayLike | None) -> Array | float:
        """1/(R T) - 1/(R T_ref) [mol/kJ]."""
        if temperature_K is None:
            return 0.0
        temperature = above_zero("temperature_K", np.asarray(temperature_K, dtype=float))
        inverse = 1.0 / temperature - 1.0 / self.reference.temperature_K
        return 1e3 / GAS_CONSTANT_J_per_mol_K * inverse

    def _ln_drive(self, resistance: Resistance, reagent_g_per_L: ArrayLike | None) -> Array:
        """ln of the drive of a resistance at a reagent strength, the rest at the reference."""
        if reagent_g_per_L is None:
            return np.zeros(())
        strength = np.asarray(reagent_g_per_L, dtype=float)
        if not np.all(np.isfinite(strength)) or np.any(strength < 0.0):
            raise argument_error("reagent_g_per_L", f"{strength}", "finite, not below 0 g/L")
        if self.drive is not None:
            reads = "reagent" in self.drive.reference
            return np.log(self.drive.rate({"reagent": strength})) if reads else np.zeros(())
        share = np.maximum(strength / self.reference.reagent_g_per_L, LEAST_STRENGTH)
        return np.asarray(resistance.order * np.log(share))

    def _ln_stirring(self, stirring_rpm: ArrayLike | None) -> Array | float:
        if stirring_rpm is None or self.reference.stirring_rpm is None:
            return 0.0
        speed = above_zero("stirring_rpm", np.asarray(stirring_rpm, dtype=float))
        return np.asarray(np.log(speed / self.reference.stirring_rpm))
