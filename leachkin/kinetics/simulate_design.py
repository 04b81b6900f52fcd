"""The design of a simulated bottle: its charge, its readings, its conditions against time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import argument_error
from leachkin.testwork import AliquotPolicy, History, SizeDistribution

Array = NDArray[np.float64]
#: The two sides of a make-up stand this far apart in a history [h].
STEP_h = 1e-6


@dataclass(frozen=True)
class Bottle:
    """The design of one bottle roll.

    Attributes
    ----------
    name : str
    sizes : SizeDistribution
    temperature_K : float
    time_h : ndarray, shape (m,)
    reagent_g_per_L : float
        Start and set-point: reagent is added as the ore takes it, so that it holds.
    solids_g, solution_mL, aliquot_mL : float
    aliquots : str
        "replaced by reagent solution", "replaced by water", "not replaced", "returned".
    domain : str
    history : History or None
        Temperature and strength that change along the test; both are held without one. A strength
        that changes is not topped up; make-up moves it until the next reading.
    stirring_rpm : float or None
    """

    name: str
    sizes: SizeDistribution
    temperature_K: float
    time_h: Array
    reagent_g_per_L: float
    solids_g: float = 500.0
    solution_mL: float = 1000.0
    aliquot_mL: float = 20.0
    aliquots: AliquotPolicy = "replaced by reagent solution"
    domain: str = ""
    history: History | None = None
    stirring_rpm: float | None = None

    @property
    def strength_is_held(self) -> bool:
        """True where reagent is added as the ore takes it."""
        return self.history is None or self.history.reagent_g_per_L is None


def solution_operator(bottle: Bottle) -> Array:
    """Return the matrix (m, m) from extraction to solution grade for a head of 1 kg/t [g/L].

    ``C_i V_i = solids E_i - sum over earlier aliquots of C_j v``; a returned aliquot takes nothing,
    one that is not replaced shrinks V.
    """
    m = bottle.time_h.size
    matrix = np.zeros((m, m))
    volume, taken = bottle.solution_mL, np.zeros(m)
    for i in range(m):
        row = -taken
        row[i] += bottle.solids_g
        matrix[i] = row / volume
        if bottle.aliquots != "returned":
            taken = taken + bottle.aliquot_mL * matrix[i]
        if bottle.aliquots == "not replaced":
            volume -= bottle.aliquot_mL
    return matrix


def course_of(bottle: Bottle) -> History | None:
    """Return the conditions of a bottle against time, None where they are held.

    Strength is that of the history at each reading. After it the make-up (at the starting
    strength, or water) is mixed in, and the difference is gone by the next reading.

    Raises
    ------
    InputProblems
        If the history does not start at the starting strength of the bottle.
    """
    history = bottle.history
    if history is None:
        return None
    readings = bottle.time_h
    at = np.unique(np.concatenate([[0.0], history.time_h, readings, readings + STEP_h]))
    kelvin = np.interp(at, history.time_h, history.temperature_K)
    others = {name: np.interp(at, history.time_h, v) for name, v in history.others.items()}
    if history.reagent_g_per_L is None:
        return History(at, kelvin, np.full(at.size, bottle.reagent_g_per_L), others)
    strength = np.interp(at, history.time_h, history.reagent_g_per_L)
    _check_start(bottle, float(strength[0]))
    jumps = _make_up_jumps(bottle, strength[np.searchsorted(at, readings)])
    for i, jump in enumerate(jumps):
        until = readings[i + 1] if i + 1 < readings.size else np.inf
        inside = (at > readings[i]) & (at < until)
        gone = (at[inside] - readings[i]) / (until - readings[i])
        strength[inside] += jump * (1.0 - gone)
    return History(at, kelvin, strength, others)


def _make_up_jumps(bottle: Bottle, strength: Array) -> Array:
    """Return how much the make-up after each reading moves the strength [g/L], shape (m,)."""
    if bottle.aliquots in ("not replaced", "returned"):
        return np.zeros(strength.size)
    made_up = 0.0 if bottle.aliquots == "replaced by water" else bottle.reagent_g_per_L
    return np.asarray(bottle.aliquot_mL / bottle.solution_mL * (made_up - strength))


def _check_start(bottle: Bottle, start: float) -> None:
    if not np.isclose(start, bottle.reagent_g_per_L, rtol=1e-6):
        raise argument_error(
            f"bottle {bottle.name}",
            f"a history from {start:g} g/L, and {bottle.reagent_g_per_L:g} g/L at the start",
            "one starting strength",
        )
