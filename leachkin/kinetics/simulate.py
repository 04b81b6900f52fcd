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
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.simulate_course import true_extraction
from leachkin.kinetics.simulate_design import Bottle, course_of, solution_operator
from leachkin.problems import argument_error
from leachkin.testwork import History, Observed

Array = NDArray[np.float64]
__all__ = ["Bottle", "Noise", "SimulatedTest", "observed_of", "simulate_observed"]
__all__ += ["simulate_tests", "solution_operator", "true_extraction"]


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
        on top of what came with the make-up; nothing where the strength follows a history.
    tail_kg_per_t, residue_g : float
    head_assay_kg_per_t, head_true_kg_per_t : float
    extraction_true : ndarray, shape (m,)
    reagent_taken_kg_per_t : ndarray, shape (m,)
        By metal and gangue, the truth.
    gangue_taken_kg_per_t : ndarray, shape (m,)
        By gangue, as the titrations and the metal assays give it.
    history : History or None
        Conditions along the test; None where they are held.
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
    history: History | None = None


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
        The truth: any law, as ``true_extraction`` follows it.
    bottles : sequence of Bottle
        Strength is held at its set-point, or follows the history of the bottle; then what the ore
        takes is what that history says, and gangue and metal have no part in it.
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
        stirring_rpm=bottle.stirring_rpm,
        history=test.history,
    )


def _floored(sd: Array | float) -> Array:
    """Keep a standard deviation above 0 where the noise is switched off."""
    return np.asarray(np.maximum(sd, 1e-6))


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
    course = course_of(bottle)
    by_metal = per_metal_kg_per_kg * head * E
    tail_measured = tail * (1.0 + noise.tail * generator.standard_normal())
    residue_measured = residue * (1.0 + noise.residue * generator.standard_normal())
    errors = noise.titration * generator.standard_normal(m)
    if bottle.strength_is_held:
        taken = by_metal + _taken_by_gangue(gangue, bottle)
        free, added, found = _held_strength(bottle, taken, errors)
    else:
        free, taken, found = _followed_strength(bottle, course, errors)
        added = np.zeros(m)
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
        gangue_taken_kg_per_t=found - by_metal,
        history=course,
    )


def _taken_by_gangue(gangue: GangueLaw | None, bottle: Bottle) -> Array:
    if gangue is None:
        return np.zeros(bottle.time_h.size)
    return gangue.taken_kg_per_t(bottle.time_h, bottle.temperature_K)


def _held_strength(bottle: Bottle, taken: Array, errors: Array) -> tuple[Array, Array, Array]:
    """Return titrated strength, reagent added [g], and the cumulative take the numbers give [kg/t].

    The strength is held by what is added as the ore takes it; the titration may be off.
    """
    set_point = bottle.reagent_g_per_L
    watered = bottle.aliquots == "replaced by water"
    free = set_point * (1.0 + errors)
    added = np.diff(taken, prepend=0.0) * bottle.solids_g / 1000.0
    added[1:] += 0.001 * bottle.aliquot_mL * set_point * watered
    return free, added, _taken_by_balance(bottle, free, np.cumsum(added), set_point)


def _followed_strength(
    bottle: Bottle, course: History | None, errors: Array
) -> tuple[Array, Array, Array]:
    """Return titrated strength, and the cumulative take, true and by the titrations [kg/t]."""
    if course is None or course.reagent_g_per_L is None:
        raise argument_error("bottle", "no history of the strength", "a history with one")
    true = np.interp(bottle.time_h, course.time_h, course.reagent_g_per_L)
    free, start = true * (1.0 + errors), float(course.reagent_g_per_L[0])
    none = np.zeros(true.size)
    return (
        free,
        _taken_by_balance(bottle, true, none, start),
        _taken_by_balance(bottle, free, none, start),
    )


def _taken_by_balance(bottle: Bottle, free: Array, added_g: Array, start: float) -> Array:
    """Return what start, make-up and additions brought less what is left and was drawn [kg/t]."""
    litres = 0.001 * bottle.solution_mL
    drawn = 0.0 if bottle.aliquots == "returned" else 0.001 * bottle.aliquot_mL
    shrinks, watered = bottle.aliquots == "not replaced", bottle.aliquots == "replaced by water"
    earlier = np.arange(free.size)
    volume = litres - drawn * earlier * shrinks
    came = start * (litres + drawn * earlier * (not (shrinks or watered))) + added_g
    left = free * volume + drawn * np.concatenate([[0.0], np.cumsum(free)[:-1]])
    return np.asarray((came - left) * 1000.0 / bottle.solids_g)
