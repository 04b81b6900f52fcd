"""Extraction of a fit whose reagent follows from the extraction itself, by its balance.

Every step is ``z -> depth(time(z) + dt)`` of the rate law under the strength that is left;
derivatives are central differences, all in one batch.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.fit_grains import HistorySteps, history_steps
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.rate_law import RateLaw
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.testwork import Observed, SizeDistribution

Array = NDArray[np.float64]
#: Step of the differences on the fitted scale: balances rounding against curvature.
DIFFERENCE = 1e-5
#: Steps between readings where the strength follows from the extraction itself.
BALANCE_STEPS = 6


@dataclass(frozen=True)
class MarchPath:
    """Extraction at the readings of tests, marched through their conditions."""

    tests: tuple[Observed, ...]
    steps: tuple[HistorySteps, ...]
    balances: tuple[ReagentBalance | None, ...]

    @classmethod
    def of(
        cls,
        layout: Layout,
        tests: Sequence[Observed],
        balances: Sequence[ReagentBalance | None],
    ) -> MarchPath:
        """Cut the history of every test into steps; a test without a balance has its titrations."""
        steps = tuple(
            history_steps(o, layout, None if balance is None else BALANCE_STEPS)
            for o, balance in zip(tests, balances, strict=True)
        )
        return cls(tuple(tests), steps, tuple(balances))

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
        steps: HistorySteps,
        balance: ReagentBalance | None,
    ) -> Array:
        sizes = observed.sizes or SizeDistribution.single(layout.reference.size_mm)
        if balance is not None:
            head = np.full(flat.shape[0], observed.head_kg_per_t)
            if layout.has("head", observed.test):
                head = np.exp(flat[..., layout.position("head", observed.test)])
            return _by_balance(layout, flat, law, sizes, observed, steps, balance, head)
        found = np.zeros((flat.shape[0], observed.time_h.size))
        depth = law.initial_depth(sizes)
        warmth = observed.temperature_K
        found[:] = law.extraction_of_depth(depth, sizes, warmth)[..., None]  # readings at time 0
        for i, readings in enumerate(steps.ends_reading):
            strength = steps.values["reagent"][i]
            kelvin = steps.temperature_K[i]
            depth = law.advance(
                depth, steps.hours[i], sizes, kelvin, strength, observed.stirring_rpm
            )
            if readings:
                E = law.extraction_of_depth(depth, sizes, warmth)
                found[:, list(readings)] = E[..., None]
        return found


def _by_balance(
    layout: Layout,
    flat: Array,
    law: RateLaw,
    sizes: SizeDistribution,
    observed: Observed,
    steps: HistorySteps,
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
