"""The quantities of a fit, and how a vector of them becomes a rate law.

A vector holds every free quantity on its fitted scale: times, rate constants and heads as
logarithms, shares as log-odds, activation energies and exponents as they are. Vectors may carry a
leading batch axis; the law then carries it too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Scale, to_natural
from leachkin.kinetics.box import DataBox
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.resistance import Reference, Resistance

Array = NDArray[np.float64]
Role = Literal["time", "activation_energy", "size_exponent", "order", "ultimate", "shape", "head"]


@dataclass(frozen=True)
class Quantity:
    """One quantity of a fit, free or held.

    Attributes
    ----------
    name : str
        As people and tables name it.
    role, which : str
        What it is, and of which resistance, knot, shape or test.
    scale : "linear", "log", "logit"
    start, low, high : float
        On the fitted scale; start is the value where it is held.
    unit : str
    free : bool
    prior_sd : float or None
        Standard deviation of what was measured for it beforehand (a head), about ``start``.
    """

    name: str
    role: Role
    which: str
    scale: Scale
    start: float
    low: float
    high: float
    unit: str = ""
    free: bool = True
    prior_sd: float | None = None


@dataclass(frozen=True)
class Layout:
    """All quantities of a law in a fit, in the order of the full vector."""

    law_name: str
    kinds: tuple[str, ...]
    quantities: tuple[Quantity, ...]
    reference: Reference
    knot_size_mm: Array
    box: DataBox | None = None

    @cached_property
    def free_index(self) -> NDArray[np.intp]:
        """Positions of the free quantities in the full vector."""
        return np.array([i for i, q in enumerate(self.quantities) if q.free], dtype=np.intp)

    @cached_property
    def free(self) -> tuple[Quantity, ...]:
        """The free quantities, in order."""
        return tuple(q for q in self.quantities if q.free)

    @cached_property
    def starts(self) -> Array:
        """The full vector of start and held values."""
        return np.array([q.start for q in self.quantities])

    @cached_property
    def _positions(self) -> dict[tuple[str, str], int]:
        return {(q.role, q.which): i for i, q in enumerate(self.quantities)}

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of all quantities."""
        return tuple(q.name for q in self.quantities)

    def position(self, role: Role, which: str) -> int:
        """Return where a quantity stands in the full vector."""
        return self._positions[(role, which)]

    def positions(self, role: Role) -> list[int]:
        """Return where all quantities of a role stand, in order."""
        return [i for i, q in enumerate(self.quantities) if q.role == role]

    def expand(self, vector: Array) -> Array:
        """Return the full vector, shape B + (q,), of free values of shape B + (p,)."""
        full = np.empty((*vector.shape[:-1], len(self.quantities)))
        full[...] = self.starts
        full[..., self.free_index] = vector
        return full

    def natural(self, full: Array, position: int) -> Array:
        """Return a quantity on its natural scale, shape B."""
        return to_natural(self.quantities[position].scale, full[..., position])

    def ln_time(self, full: Array, kind: str) -> Array:
        """Return ln(tau) of a resistance at the reference state, shape B; of a clock, -ln k."""
        sign = -1.0 if kind == "clock" else 1.0
        return np.asarray(sign * full[..., self.position("time", kind)])

    def shapes(self, full: Array) -> dict[str, Array]:
        """Return the shape parameters by name, each of shape B."""
        return {self.quantities[i].which: self.natural(full, i) for i in self.positions("shape")}

    def ultimates(self, full: Array) -> Array:
        """Return the ultimate extraction at the knots, shape B + (knots,)."""
        return np.stack([self.natural(full, i) for i in self.positions("ultimate")], axis=-1)

    def law(self, vector: Array) -> RateLaw:
        """Return the rate law of a vector of free values, batch axes kept."""
        full = self.expand(np.asarray(vector, dtype=np.float64))
        return RateLaw(
            name=self.law_name,
            resistances=tuple(self._resistance(full, kind) for kind in self.kinds),
            reference=self.reference,
            ultimate_size_mm=self.knot_size_mm,
            ultimate=self.ultimates(full),
            shape_parameters=self.shapes(full),
            box=self.box,
        )

    def heads(self, vector: Array) -> Mapping[str, Array]:
        """Return the heads [kg/t] by test, each of shape B."""
        full = self.expand(np.asarray(vector, dtype=np.float64))
        return {self.quantities[i].which: self.natural(full, i) for i in self.positions("head")}

    def _resistance(self, full: Array, kind: str) -> Resistance:
        return Resistance(
            kind=kind,  # type: ignore[arg-type]
            ln_tau=self.ln_time(full, kind),
            activation_energy_kJ_per_mol=full[..., self.position("activation_energy", kind)],
            order=full[..., self.position("order", "reagent")],
            size_exponent=full[..., self.position("size_exponent", kind)],
        )
