"""What advances the clock: the drive of a reaction as a function of the solution.

``ds/dt = f(solution) / f(reference solution)``: the same for all sizes, so that one equivalent
leach time serves them. The default is a power of the reagent strength.

===============  =====================================  ==========================================
form             f                                      for
===============  =====================================  ==========================================
power            C^n                                    one reagent
two_reagents     A^a B^b                                a reagent and an oxidant
either           A B / (A + q B)                        two reagents, the scarcer one rules
                                                        (cyanide A and oxygen B)
ratio            r / (1 + K r), r = oxidised/reduced    Fe3+/Fe2+ with saturation
acidity          10^(-n pH)                             acid measured as pH
solubility       C^n (1 - Q/S)                          metal near its solubility S
===============  =====================================  ==========================================

A and B are over their references. ``A B / (A + q B)`` is the shape that mixed-potential theory
gives gold in cyanide and oxygen (Habashi 1967, Montana Bureau of Mines and Geology Bulletin 59;
cited from memory); its q is fitted here and never taken from print.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name

Array = NDArray[np.float64]
Values = Mapping[str, Array]

#: A strength below this share of the reference counts as this share: the clock all but stands.
LEAST_STRENGTH = 1e-9
#: A metal this close to its solubility leaves this share of the drive.
LEAST_FREE = 1e-9
_LN_10 = float(np.log(10.0))

#: What each form reads in the solution: the campaign's reagent, and names of other species.
READS: dict[str, tuple[str, ...]] = {
    "power": ("reagent",),
    "two_reagents": ("reagent", "second"),
    "either": ("reagent", "second"),
    "ratio": ("oxidised", "reduced"),
    "acidity": ("pH",),
    "solubility": ("reagent", "metal"),
}
DRIVES: tuple[str, ...] = tuple(READS)
#: Parameters of each form, beyond the reagent order that power, two_reagents, acidity and
#: solubility share.
PARAMETERS: dict[str, tuple[str, ...]] = {
    "power": ("reagent_order",),
    "two_reagents": ("reagent_order", "second_order"),
    "either": ("preference",),
    "ratio": ("saturation",),
    "acidity": ("reagent_order",),
    "solubility": ("reagent_order", "solubility_g_per_L"),
}
#: Names under which a species stands in the readings where nothing else is said.
USUAL_SPECIES: dict[str, str] = {
    "second": "O2",
    "oxidised": "Fe3+",
    "reduced": "Fe2+",
    "pH": "pH",
    "metal": "",
}


@dataclass(frozen=True)
class DriveForm:
    """Which drive a fit uses, and what its species are called in the readings.

    Attributes
    ----------
    kind : str
        One of power, two_reagents, either, ratio, acidity, solubility.
    species : mapping of str to str
        Name in the readings of "second", "oxidised", "reduced", "pH" or "metal"; the usual names
        where left out (O2, Fe3+, Fe2+, pH, the metal itself).

    Raises
    ------
    InputProblems
        For an unknown form or species.
    """

    kind: str = "power"
    species: Mapping[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        if self.kind not in READS:
            raise _unknown("drive", self.kind, list(READS))
        for name in self.species:
            if name not in USUAL_SPECIES:
                raise _unknown("species", name, list(USUAL_SPECIES))

    def named(self, role: str, metal: str) -> str:
        """Return the name in the readings of a species of the form."""
        return self.species.get(role) or USUAL_SPECIES[role] or metal


@dataclass(frozen=True, eq=False)
class Drive:
    """A drive with its parameters.

    Attributes
    ----------
    kind : str
    reference : mapping of str to float
        The solution in which one hour is one equivalent hour: reagent, second, oxidised, reduced,
        metal [g/L], pH.
    parameters : mapping of str to ndarray, shape B
    """

    kind: str
    reference: Mapping[str, float]
    parameters: Mapping[str, Array]

    def __post_init__(self) -> None:
        if self.kind not in READS:
            raise _unknown("drive", self.kind, list(READS))
        for name in READS[self.kind]:
            if name not in self.reference:
                raise argument_error("reference", f"no {name}", ", ".join(READS[self.kind]))
        for name in PARAMETERS[self.kind]:
            if name not in self.parameters:
                raise argument_error("parameters", f"no {name}", ", ".join(PARAMETERS[self.kind]))
        held = {name: np.asarray(value, dtype=float) for name, value in self.parameters.items()}
        object.__setattr__(self, "parameters", held)

    def rate(self, solution: Mapping[str, ArrayLike]) -> Array:
        """Return equivalent hours an hour in a solution.

        Parameters
        ----------
        solution : mapping of str to array_like
            Species by role; those left out stand at the reference. Shapes broadcast with B.
        """
        unknown = [name for name in solution if name not in READS[self.kind]]
        if unknown:
            raise _unknown("solution", unknown[0], list(READS[self.kind]))
        values = {
            name: np.asarray(solution.get(name, self.reference[name]), dtype=float)
            for name in READS[self.kind]
        }
        return np.asarray(np.exp(ln_drive(self.kind, values, self.reference, self.parameters)[0]))

    @property
    def order(self) -> Array | None:
        """Order in the reagent while the others stand at the reference; None without one."""
        return self.parameters["reagent_order"] if self.kind == "two_reagents" else None

    @property
    def own_order(self) -> Array:
        """Order in the reagent once everything else is held; 0 where the reagent is no power."""
        reads = "reagent" in READS[self.kind]
        return self.parameters.get("reagent_order", np.zeros(())) if reads else np.zeros(())

    def select(self, index: int) -> Drive:
        """Return one member of a batch; numbers without a batch stay."""
        held = {
            name: value[index] if value.ndim else value for name, value in self.parameters.items()
        }
        return Drive(self.kind, self.reference, held)


def ln_drive(
    kind: str, values: Values, reference: Mapping[str, float], parameters: Values
) -> tuple[Array, dict[str, Array]]:
    """Return ln(f/f_ref) and its derivatives by the parameters.

    Parameters
    ----------
    kind : str
    values : mapping of str to ndarray
        Species by role, any shapes that broadcast with the parameters.
    reference : mapping of str to float
    parameters : mapping of str to ndarray

    Returns
    -------
    tuple of ndarray and mapping of parameter to ndarray
    """
    if kind == "either":
        return _either(values, reference, parameters["preference"])
    if kind == "ratio":
        return _ratio(values, reference, parameters["saturation"])
    if kind == "acidity":
        acid = -_LN_10 * (values["pH"] - reference["pH"])
        return parameters["reagent_order"] * acid, {"reagent_order": acid}
    order = parameters["reagent_order"]
    strength = _ln_share(values["reagent"], reference["reagent"])
    value, slopes = order * strength, {"reagent_order": strength}
    if kind == "two_reagents":
        second = _ln_share(values["second"], reference["second"])
        return (
            value + parameters["second_order"] * second,
            {**slopes, "second_order": second},
        )
    if kind == "solubility":
        limit = parameters["solubility_g_per_L"]
        free, by_limit = _ln_free(values["metal"], limit)
        free_ref, by_limit_ref = _ln_free(np.asarray(reference["metal"]), limit)
        return value + free - free_ref, {**slopes, "solubility_g_per_L": by_limit - by_limit_ref}
    return value, slopes


def _ln_share(strength: Array, reference: float) -> Array:
    return np.asarray(np.log(np.maximum(strength / reference, LEAST_STRENGTH)))


def _either(
    values: Values, reference: Mapping[str, float], preference: Array
) -> tuple[Array, dict[str, Array]]:
    """A B / (A + q B), A the reagent and B the second; both over their references."""
    a = np.maximum(values["reagent"] / reference["reagent"], LEAST_STRENGTH)
    b = np.maximum(values["second"] / reference["second"], LEAST_STRENGTH)
    bottom = a + preference * b
    value = np.log(a * b) - np.log(bottom) + np.log1p(preference)
    return value, {"preference": 1.0 / (1.0 + preference) - b / bottom}


def _ratio(
    values: Values, reference: Mapping[str, float], saturation: Array
) -> tuple[Array, dict[str, Array]]:
    """r / (1 + K r), r over its reference."""
    base = reference["oxidised"] / reference["reduced"]
    r = values["oxidised"] / np.maximum(values["reduced"], LEAST_STRENGTH * reference["reduced"])
    r = np.maximum(r / base, LEAST_STRENGTH)
    value = np.log(r) - np.log1p(saturation * r) + np.log1p(saturation)
    return value, {"saturation": 1.0 / (1.0 + saturation) - r / (1.0 + saturation * r)}


def _ln_free(metal: Array, limit: Array) -> tuple[Array, Array]:
    """ln(1 - Q/S) and its derivative by S."""
    free = np.maximum(1.0 - metal / limit, LEAST_FREE)
    return np.log(free), metal / (limit * limit * free)


def _unknown(name: str, found: str, allowed: list[str]) -> InputProblems:
    return InputProblems([unknown_name(name, found, allowed)])
