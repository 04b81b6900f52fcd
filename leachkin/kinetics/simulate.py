"""Seeded bench tests from a known law: what bottles would have read, assay noise included.

Used to make example sheets and to find out how often intervals cover the truth.
"""

from __future__ import annotations

import zlib
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.gangue import GangueLaw
from leachkin.kinetics.grain_path import extraction_along
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error
from leachkin.testwork import AliquotPolicy, History, Observed, SizeDistribution

Array = NDArray[np.float64]
#: Steps between readings along a history.
HISTORY_STEPS = 40


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
        Temperature and strength that change along the test; both are held without one.
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


@dataclass(frozen=True)
class Noise:
    """Relative standard deviations of what is measured, and the mean mass loss of the residue.

    head is the scatter of the charges about the head assay; titration that of free reagent.
    """

    solution: float = 0.015
    tail: float = 0.03
    head: float = 0.02
    residue: float = 0.003
    titration: float = 0.005
    mass_loss: float = 0.03


@dataclass(frozen=True)
class SimulatedTest:
    """What a bottle read, and the truth behind it.

    Attributes
    ----------
    bottle : Bottle
    solution_g_per_L : ndarray, shape (m,)
        Metal assays.
    free_reagent_g_per_L, reagent_added_g : ndarray, shape (m,)
        Titration at each reading, and what was added since the one before to hold the set-point,
        on top of what came with the make-up.
    tail_kg_per_t, residue_g : float
    head_assay_kg_per_t, head_true_kg_per_t : float
    extraction_true : ndarray, shape (m,)
    reagent_taken_kg_per_t : ndarray, shape (m,)
        By metal and gangue, the truth.
    gangue_taken_kg_per_t : ndarray, shape (m,)
        By gangue, as the titrations and the metal assays give it.
    """

    bottle: Bottle
    solution_g_per_L: Array
    free_reagent_g_per_L: Array
    reagent_added_g: Array
    tail_kg_per_t: float
    residue_g: float
    head_assay_kg_per_t: float
    head_true_kg_per_t: float
    extraction_true: Array
    reagent_taken_kg_per_t: Array
    gangue_taken_kg_per_t: Array = field(default_factory=lambda: np.zeros(0))


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


def simulate_tests(
    law: RateLaw,
    bottles: Sequence[Bottle],
    *,
    head_kg_per_t: float,
    seed: int,
    noise: Noise | None = None,
    per_metal_kg_per_kg: float = 0.0,
    gangue: GangueLaw | None = None,
) -> tuple[SimulatedTest, ...]:
    """Return what bottles would have read under a known law.

    Parameters
    ----------
    law : RateLaw
        The truth; reagent is held at its set-point.
    bottles : sequence of Bottle
    head_kg_per_t : float
        Head assay; the true head of each charge scatters about it.
    seed : int
        Each bottle draws its own numbers by its name, so that another bottle moves none.
    noise : Noise, optional
    per_metal_kg_per_kg : float
        Reagent taken by the metal.
    gangue : GangueLaw, optional

    Returns
    -------
    tuple of SimulatedTest
    """
    if len({b.name for b in bottles}) < len(bottles):
        raise argument_error("bottles", "two of one name", "a name of its own for each")
    used = noise or Noise()
    return tuple(
        _one(law, b, head_kg_per_t, used, seed, per_metal_kg_per_kg, gangue) for b in bottles
    )


def simulate_observed(
    law: RateLaw,
    bottles: Sequence[Bottle],
    *,
    head_kg_per_t: float,
    seed: int,
    noise: Noise | None = None,
) -> tuple[Observed, ...]:
    """Return simulated bottles as observed values, ready for a fit."""
    used = noise or Noise()
    made = simulate_tests(law, bottles, head_kg_per_t=head_kg_per_t, seed=seed, noise=used)
    return tuple(observed_of(test, used) for test in made)


def observed_of(test: SimulatedTest, noise: Noise) -> Observed:
    """Return one simulated bottle as observed values; precision taken from the measured ones."""
    bottle = test.bottle
    m = bottle.time_h.size
    per_residue = bottle.solids_g / test.residue_g
    tail_row = np.zeros((1, m))
    tail_row[0, -1] = -per_residue
    tail_sd = test.tail_kg_per_t * np.hypot(noise.tail, noise.residue)
    return Observed(
        test=bottle.name,
        key=f"{bottle.domain}/metal",
        time_h=bottle.time_h,
        operator=np.concatenate([solution_operator(bottle), tail_row]),
        offset=np.append(np.zeros(m), per_residue),
        brought=np.zeros(m + 1),
        value=np.append(test.solution_g_per_L, test.tail_kg_per_t),
        sd=np.append(_floored(noise.solution * test.solution_g_per_L), _floored(tail_sd)),
        bound=np.zeros(m + 1, dtype=np.int64),
        row_kind=("solution",) * m + ("tail",),
        row_time_h=np.append(bottle.time_h, bottle.time_h[-1]),
        head_kg_per_t=test.head_assay_kg_per_t,
        head_sd_kg_per_t=noise.head * test.head_assay_kg_per_t,
        sizes=bottle.sizes,
        temperature_K=bottle.temperature_K,
        reagent_g_per_L=bottle.reagent_g_per_L,
        history=bottle.history,
    )


def _floored(sd: Array | float) -> Array:
    """Keep a standard deviation above 0 where the noise is switched off."""
    return np.asarray(np.maximum(sd, 1e-6))


def true_extraction(law: RateLaw, bottle: Bottle) -> Array:
    """Return the extraction of a bottle under a law, shape (m,), along its history if it has one.

    Any law: film, ash layer, chemical step, one clock, with a lag, a fade, a soluble share or a
    second fraction; a lag or a fade needs conditions that are held.
    """
    conditions = (bottle.temperature_K, bottle.reagent_g_per_L)
    history = bottle.history
    if history is None:
        return np.asarray(law.extraction(bottle.time_h, bottle.sizes, *conditions))
    strength = history.reagent_g_per_L
    if strength is None:
        strength = np.full(history.time_h.size, bottle.reagent_g_per_L)
    at = history.time_h
    return extraction_along(
        law,
        bottle.sizes,
        bottle.time_h,
        lambda t: float(np.interp(t, at, history.temperature_K)),
        lambda t: float(np.interp(t, at, strength)),
        HISTORY_STEPS,
    )


def _one(
    law: RateLaw,
    bottle: Bottle,
    head_kg_per_t: float,
    noise: Noise,
    seed: int,
    per_metal_kg_per_kg: float,
    gangue: GangueLaw | None,
) -> SimulatedTest:
    generator = np.random.default_rng([seed, zlib.crc32(bottle.name.encode())])
    m = bottle.time_h.size
    head = head_kg_per_t * (1.0 + noise.head * generator.standard_normal())
    E = true_extraction(law, bottle)
    solution = head * (solution_operator(bottle) @ E)
    measured = solution * (1.0 + noise.solution * generator.standard_normal(m))
    residue = bottle.solids_g * (1.0 - noise.mass_loss)
    tail = head * bottle.solids_g * (1.0 - E[-1]) / residue
    taken_by_gangue = (
        np.zeros(m)
        if gangue is None
        else gangue.taken_kg_per_t(bottle.time_h, bottle.temperature_K)
    )
    taken = per_metal_kg_per_kg * head * E + taken_by_gangue
    tail_measured = tail * (1.0 + noise.tail * generator.standard_normal())
    residue_measured = residue * (1.0 + noise.residue * generator.standard_normal())
    errors = noise.titration * generator.standard_normal(m)
    free, added, found = _held_strength(bottle, taken, errors)
    return SimulatedTest(
        bottle=bottle,
        solution_g_per_L=measured,
        free_reagent_g_per_L=free,
        reagent_added_g=added,
        tail_kg_per_t=float(tail_measured),
        residue_g=float(residue_measured),
        head_assay_kg_per_t=head_kg_per_t,
        head_true_kg_per_t=float(head),
        extraction_true=E,
        reagent_taken_kg_per_t=taken,
        gangue_taken_kg_per_t=found - per_metal_kg_per_kg * head * E,
    )


def _held_strength(bottle: Bottle, taken: Array, errors: Array) -> tuple[Array, Array, Array]:
    """Return titrated strength, reagent added [g], and the cumulative take the numbers give [kg/t].

    The strength is held by what is added as the ore takes it; the titration may be off.
    """
    set_point, litres = bottle.reagent_g_per_L, 0.001 * bottle.solution_mL
    drawn = 0.0 if bottle.aliquots == "returned" else 0.001 * bottle.aliquot_mL
    shrinks, watered = bottle.aliquots == "not replaced", bottle.aliquots == "replaced by water"
    earlier = np.arange(taken.size)
    volume = litres - drawn * earlier * shrinks
    per_t = 1000.0 / bottle.solids_g
    free = set_point * (1.0 + errors)
    added = np.diff(taken, prepend=0.0) / per_t
    added[1:] += watered * drawn * set_point
    came = set_point * (litres + drawn * earlier * (not (shrinks or watered))) + np.cumsum(added)
    left = free * volume + drawn * np.concatenate([[0.0], np.cumsum(free)[:-1]])
    return free, added, np.asarray((came - left) * per_t)
