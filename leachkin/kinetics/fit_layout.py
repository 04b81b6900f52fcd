"""The quantities of a fit, and how a vector of them becomes a rate law.

A vector holds every free quantity on its fitted scale: times, rate constants and heads as
logarithms, shares as log-odds, activation energies and exponents as they are. Vectors may carry a
leading batch axis; the law then carries it too.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Scale, to_natural
from leachkin.kinetics.box import DataBox
from leachkin.kinetics.drive import PARAMETERS, Drive, DriveForm
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.resistance import Reference, Resistance

Array = NDArray[np.float64]
Role = Literal[
    "time",
    "activation_energy",
    "size_exponent",
    "spread",
    "stirring",
    "order",
    "drive",
    "ultimate",
    "shape",
    "lag",
    "soluble",
    "fade",
    "loss",
    "renewal",
    "slow",
    "head",
]
#: What a quantity is, and of which resistance, knot, shape or test.
Key = tuple[str, str]
#: Role of the share of the slow fraction, and the word before its resistances and shapes.
SLOW: Literal["slow"] = "slow"


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
        Standard deviation of what is known of it beforehand (a head assay), about ``start``.
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
    slow_law_name: str = ""
    slow_kinds: tuple[str, ...] = ()
    drive_form: DriveForm = field(default_factory=DriveForm)
    drive_reference: Mapping[str, float] = field(default_factory=dict)
    knot_temperature_K: Array | None = None
    knot_tests: tuple[str, ...] = ()
    size_family: str = "log_normal"

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
    def _positions(self) -> dict[Key, int]:
        return {(q.role, q.which): i for i, q in enumerate(self.quantities)}

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of all quantities."""
        return tuple(q.name for q in self.quantities)

    def has(self, role: str, which: str) -> bool:
        """Return whether the law has such a quantity."""
        return (role, which) in self._positions

    def position(self, role: str, which: str) -> int:
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
        sign = -1.0 if kind.endswith("clock") else 1.0
        return np.asarray(sign * full[..., self.position("time", kind)])

    def shapes(self, full: Array, part: str = "") -> dict[str, Array]:
        """Return the shape parameters of a fraction by name, each of shape B."""
        found = {}
        for i in self.positions("shape"):
            which = self.quantities[i].which
            if which.startswith(f"{SLOW} ") == bool(part):
                found[which.removeprefix(part)] = self.natural(full, i)
        return found

    def ultimates(self, full: Array) -> Array:
        """Return the ultimate extraction at the knots (sizes, temperatures or tests), B + (k,)."""
        return np.stack([self.natural(full, i) for i in self.positions("ultimate")], axis=-1)

    def drive_parameters(self, full: Array) -> dict[str, Array]:
        """Return the parameters of the drive by name, each of shape B."""
        return {
            name: self.natural(full, self.position(*self.drive_key(name)))
            for name in PARAMETERS[self.drive_form.kind]
        }

    @staticmethod
    def drive_key(name: str) -> Key:
        """Return the role of a parameter of the drive, and of what."""
        return ("order", "reagent") if name == "reagent_order" else ("drive", name)

    def size_scale(self, full: Array) -> tuple[Array, Array]:
        """Return the spread in ln d and its derivative by the fitted spread or slope, shape B."""
        value = self.natural(full, self.position("spread", "sizes"))
        if self.size_family == "log_normal":
            sigma = np.sqrt(np.log1p(value * value))
            return sigma, value / ((1.0 + value * value) * sigma)
        return 1.0 / value, -1.0 / (value * value)

    def warmed_kind(self, part: str) -> str | None:
        """Return the one resistance of a fraction, whose clock can follow a temperature."""
        kinds = self.slow_kinds if part else self.kinds
        return part + kinds[0] if len(kinds) == 1 else None

    def renewal(self, full: Array) -> Array:
        """Return the rate at which spent reagent is renewed [1/h], shape B; 0 without one."""
        return self._term(full, "renewal", "reagent")

    def law(self, vector: Array) -> RateLaw:
        """Return the rate law of a vector of free values, batch axes kept."""
        return self.law_of(self.expand(np.asarray(vector, dtype=np.float64)))

    def law_of(self, full: Array) -> RateLaw:
        """Return the rate law of a full vector, batch axes kept."""
        drive = None
        if self.drive_form.kind != "power":
            drive = Drive(self.drive_form.kind, self.drive_reference, self.drive_parameters(full))
        return RateLaw(
            name=self.law_name,
            resistances=tuple(self._resistance(full, kind) for kind in self.kinds),
            reference=self.reference,
            ultimate_size_mm=self.knot_size_mm,
            ultimate=self._law_ultimates(full),
            shape_parameters=self.shapes(full),
            box=self.box,
            lag_h=self._term(full, "lag", "lag"),
            soluble_share=self._term(full, "soluble", "share"),
            fade_per_h=self._term(full, "fade", "fade"),
            drive=drive,
            slow=self._slow(full, drive),
            slow_share=self._term(full, SLOW, "share"),
            ultimate_temperature_K=self.knot_temperature_K,
        )

    def heads(self, vector: Array) -> Mapping[str, Array]:
        """Return the heads [kg/t] by test, each of shape B."""
        full = self.expand(np.asarray(vector, dtype=np.float64))
        return {self.quantities[i].which: self.natural(full, i) for i in self.positions("head")}

    def _law_ultimates(self, full: Array) -> Array:
        """Of ultimates by test a law has the mean: no size and no temperature explains them."""
        found = self.ultimates(full)
        return found.mean(axis=-1, keepdims=True) if self.knot_tests else found

    def _slow(self, full: Array, drive: Drive | None) -> RateLaw | None:
        if not self.slow_kinds:
            return None
        part = f"{SLOW} "
        return RateLaw(
            name=self.slow_law_name,
            resistances=tuple(self._resistance(full, part + kind) for kind in self.slow_kinds),
            reference=self.reference,
            ultimate_size_mm=[1.0],  # type: ignore[arg-type]
            ultimate=[1.0],  # type: ignore[arg-type]
            shape_parameters=self.shapes(full, part),
            box=self.box,
            drive=drive,
        )

    def _term(self, full: Array, role: str, which: str) -> Array:
        if not self.has(role, which):
            return np.zeros(())
        return self.natural(full, self.position(role, which))

    def _resistance(self, full: Array, which: str) -> Resistance:
        order: Array | float = 0.0
        if self.drive_form.kind == "power":
            own = "reagent" if self.has("order", "reagent") else which
            order = full[..., self.position("order", own)]
        stirring = self.has("stirring", which)
        return Resistance(
            kind=which.removeprefix(f"{SLOW} "),  # type: ignore[arg-type]
            ln_tau=self.ln_time(full, which),
            activation_energy_kJ_per_mol=full[..., self.position("activation_energy", which)],
            order=order,
            size_exponent=full[..., self.position("size_exponent", which)],
            stirring_exponent=full[..., self.position("stirring", which)] if stirring else 0.0,
        )
