"""The parts of a rate law: resistances, the reference state, conversions by class."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.problems import argument_error

Array = NDArray[np.float64]
Kind = Literal["film", "ash_layer", "chemical", "clock"]
#: Power of the size in tau by theory (film at a fixed transfer coefficient); a clock has none.
THEORY_SIZE_EXPONENTS: dict[str, float] = {
    "film": 1.0,
    "ash_layer": 2.0,
    "chemical": 1.0,
    "clock": 0.0,
}
#: Fields of a resistance that are numbers of batch shape B.
NUMBERS = (
    "ln_tau",
    "activation_energy_kJ_per_mol",
    "order",
    "size_exponent",
    "stirring_exponent",
)


@dataclass(frozen=True, eq=False)
class Resistance:
    """One resistance of a rate law; every number an ndarray of batch shape B.

    Attributes
    ----------
    kind : "film", "ash_layer", "chemical" or "clock"
    ln_tau : ndarray
        Logarithm of the time for complete conversion at the reference state [ln h]; of a clock,
        of 1/k.
    activation_energy_kJ_per_mol : ndarray
    order : ndarray
        Power of the reagent strength in the rate.
    size_exponent : ndarray
        Power of the size in tau; by theory 1 for film and chemical, 2 for the ash layer, 0 for a
        clock.
    stirring_exponent : ndarray
        Power of the stirring speed in the rate.
    """

    kind: Kind
    ln_tau: Array | float
    activation_energy_kJ_per_mol: Array | float = 0.0
    order: Array | float = 1.0
    size_exponent: Array | float | None = None
    stirring_exponent: Array | float = 0.0

    def __post_init__(self) -> None:
        if self.kind not in THEORY_SIZE_EXPONENTS:
            raise argument_error("kind", repr(self.kind), ", ".join(THEORY_SIZE_EXPONENTS))
        if self.size_exponent is None:
            object.__setattr__(self, "size_exponent", THEORY_SIZE_EXPONENTS[self.kind])
        for name in NUMBERS:
            array = np.asarray(getattr(self, name), dtype=float)
            if not np.all(np.isfinite(array)):
                raise argument_error(name, "a number that is not finite", "finite numbers")
            object.__setattr__(self, name, array)

    def select(self, index: int) -> Resistance:
        """Return one member of a batch; numbers without a batch stay."""
        held = {name: member(getattr(self, name), index, 0) for name in NUMBERS}
        return replace(self, kind=self.kind, **held)


@dataclass(frozen=True)
class Reference:
    """The state that the times of a rate law refer to."""

    temperature_K: float = STANDARD_TEMPERATURE_K
    reagent_g_per_L: float = 1.0
    size_mm: float = 1.0
    stirring_rpm: float | None = None

    def __post_init__(self) -> None:
        for name in ("temperature_K", "reagent_g_per_L", "size_mm", "stirring_rpm"):
            value = getattr(self, name)
            if value is None and name == "stirring_rpm":
                continue
            if not np.isfinite(value) or value <= 0.0:
                raise argument_error(name, f"{value}", "a finite number above 0")


def member(value: Array | float, index: int, own_axes: int) -> Array:
    """Return member ``index`` of a batch whose own axes come last."""
    array = np.asarray(value, dtype=float)
    return np.asarray(array[index]) if array.ndim > own_axes else array
