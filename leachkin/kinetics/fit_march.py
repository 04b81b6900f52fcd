"""Extraction of a fit step by step, where no one clock serves.

For resistances of different order in a changing solution, of different activation energy at a
changing temperature, and for a reagent that is followed by its balance. Every step is
``z -> depth(time(z) + dt)`` of the rate law; derivatives are central differences, all in one batch.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.drive import READS
from leachkin.kinetics.fit_elements import drifts, species_of
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.testwork import Observed, SizeDistribution

Array = NDArray[np.float64]
#: Step of the differences on the fitted scale: balances rounding against curvature.
DIFFERENCE = 1e-5
#: A step is cut where more than this changes on it: K, and ln of the strength.
STEP_K, STEP_LN = 2.0, 0.08
MOST_CUTS = 24
#: Steps between readings where the strength follows from the extraction itself.
BALANCE_STEPS = 6


@dataclass(frozen=True)
class _Steps:
    """The steps of one test: length, what holds in the middle, and the readings at their ends."""

    hours: Array
    temperature_K: Array
    values: Mapping[str, Array]
    ends_reading: tuple[tuple[int, ...], ...]


@dataclass(frozen=True)
class MarchPath:
    """Extraction at the readings of tests, marched through their conditions."""

    tests: tuple[Observed, ...]
    steps: tuple[_Steps, ...]
    balances: tuple[ReagentBalance | None, ...]

    @classmethod
    def of(
        cls,
        layout: Layout,
        tests: Sequence[Observed],
        balances: Sequence[ReagentBalance | None] | None = None,
    ) -> MarchPath:
        """Cut the history of every test into steps."""
        of_tests = tuple(balances) if balances is not None else (None,) * len(tests)
        steps = tuple(
            _steps(o, layout, balance) for o, balance in zip(tests, of_tests, strict=True)
        )
        return cls(tuple(tests), steps, of_tests)

    def extraction(self, layout: Layout, full: Array) -> Array:
        """Return the extraction at every reading, shape B + (M,)."""
        flat = full.reshape(-1, full.shape[-1])
        law = layout.law_of(flat)
        found = [
            self._marched(layout, flat, law, observed, steps, balance)
            for observed, steps, balance in zip(self.tests, self.steps, self.balances, strict=True)
        ]
        E = np.concatenate(found, axis=-1)
        return E.reshape(*full.shape[:-1], E.shape[-1])

    def extraction_and_gradient(self, layout: Layout, full: Array) -> tuple[Array, Array]:
        """Return E, B + (M,), and its derivatives by the free quantities, B + (M, p)."""
        positions = layout.free_index
        moves = np.zeros((2 * positions.size + 1, full.shape[-1]))
        for j, position in enumerate(positions):
            moves[2 * j + 1, position], moves[2 * j + 2, position] = DIFFERENCE, -DIFFERENCE
        E = self.extraction(layout, full[..., None, :] + moves)
        gradient = (E[..., 1::2, :] - E[..., 2::2, :]) / (2.0 * DIFFERENCE)
        return E[..., 0, :], np.moveaxis(gradient, -2, -1)

    def _marched(
        self,
        layout: Layout,
        flat: Array,
        law: RateLaw,
        observed: Observed,
        steps: _Steps,
        balance: ReagentBalance | None,
    ) -> Array:
        sizes = observed.sizes or SizeDistribution.single(layout.reference.size_mm)
        if balance is not None:
            head = np.exp(flat[..., layout.position("head", observed.test)])
            return _by_balance(layout, flat, law, sizes, observed, steps, balance, head)
        found = np.zeros((flat.shape[0], observed.time_h.size))
        depth = law.initial_depth(sizes)
        warmth = observed.temperature_K
        found[:] = law.extraction_of_depth(depth, sizes, warmth)[..., None]  # readings at time 0
        for i, readings in enumerate(steps.ends_reading):
            solution = {role: values[i] for role, values in steps.values.items()}
            hours, strength = _driven(law, steps.hours[i], solution)
            kelvin = steps.temperature_K[i]
            depth = law.advance(depth, hours, sizes, kelvin, strength, observed.stirring_rpm)
            if readings:
                E = law.extraction_of_depth(depth, sizes, warmth)
                found[:, list(readings)] = E[..., None]
        return found


def _driven(
    law: RateLaw, hours: Array, solution: Mapping[str, Array]
) -> tuple[Array, Array | None]:
    """Return the hours of a step and the strength in it; a drive of its own acts on the hours."""
    if law.drive is None:
        return hours, solution["reagent"]
    return hours * law.drive.rate(solution), None


def _by_balance(
    layout: Layout,
    flat: Array,
    law: RateLaw,
    sizes: SizeDistribution,
    observed: Observed,
    steps: _Steps,
    balance: ReagentBalance,
    head: Array,
) -> Array:
    """March with the strength that the extraction itself leaves; midpoint rule, second order."""
    renewal = layout.renewal(flat)
    warmth = observed.temperature_K
    found = np.zeros((flat.shape[0], observed.time_h.size))
    depth = law.initial_depth(sizes)
    E = law.extraction_of_depth(depth, sizes, warmth)
    found[:] = E[..., None]
    state = balance.start(flat.shape[:1], head, E)
    for hours, kelvin, readings in zip(
        steps.hours, steps.temperature_K, steps.ends_reading, strict=True
    ):
        where = (sizes, kelvin)
        half = law.advance(
            depth, 0.5 * hours, *where, state.strength_g_per_L, observed.stirring_rpm
        )
        middle = state.after(0.5 * hours, law.extraction_of_depth(half, sizes, warmth), renewal)
        depth = law.advance(depth, hours, *where, middle.strength_g_per_L, observed.stirring_rpm)
        E = law.extraction_of_depth(depth, sizes, warmth)
        state = state.after(hours, E, renewal)
        for reading in readings:
            found[:, reading] = E
            state = state.sampled(reading)
    return found


def _steps(observed: Observed, layout: Layout, balance: ReagentBalance | None) -> _Steps:
    """Cut the time from 0 to the last reading so that little changes on a step."""
    history = observed.history
    edges = np.union1d([0.0], observed.time_h)
    times = np.zeros(1) if history is None else history.time_h
    kelvin = np.full(times.size, observed.temperature_K)
    if history is not None and drifts(observed):
        kelvin = history.temperature_K
    read = {role: species_of(observed, layout, role) for role in READS[layout.drive_form.kind]}
    if history is not None:
        edges = np.union1d(edges, times[times < edges[-1]])
    changed = np.abs(np.diff(np.interp(edges, times, kelvin))) / STEP_K
    for role, values in read.items():
        ln_value = values if role == "pH" else np.log(np.maximum(values, 1e-9 * values.max()))
        changed = np.maximum(changed, np.abs(np.diff(np.interp(edges, times, ln_value))) / STEP_LN)
    cuts = np.clip(np.ceil(changed), 1, MOST_CUTS).astype(int)
    if balance is not None:
        cuts = np.full(cuts.size, BALANCE_STEPS)
    fine = np.concatenate(
        [np.linspace(edges[i], edges[i + 1], cuts[i] + 1)[:-1] for i in range(cuts.size)]
        + [edges[-1:]]
    )
    middle = 0.5 * (fine[:-1] + fine[1:])
    ends = tuple(
        tuple(np.flatnonzero(np.isclose(observed.time_h, end, rtol=1e-12, atol=0.0)).tolist())
        for end in fine[1:]
    )
    at_middle = {role: np.interp(middle, times, values) for role, values in read.items()}
    return _Steps(np.diff(fine), np.interp(middle, times, kelvin), at_middle, ends)
