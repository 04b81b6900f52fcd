"""Metal lost again from solution inside a fit, to the solids of the same test.

Precipitation and preg-robbing put metal into the tail that was dissolved before: solution assays
and tail both see the extraction less the loss. First order in the metal in solution, up to a
capacity (see ``loss_step``); the metal in aliquots is not counted as out of reach.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import natural_slope
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.ore_terms import loss_step
from leachkin.testwork import Observed

Array = NDArray[np.float64]
#: Steps between one reading and the next.
CUTS = 6


@dataclass(frozen=True)
class Loss:
    """The readings of every test, refined so that the loss can be followed between them.

    Attributes
    ----------
    reading : ndarray of int, shape (steps, tests)
        Reading at the end of each step; a shorter test stands still at its last one.
    hours : ndarray, shape (steps, tests)
    """

    reading: NDArray[np.intp]
    hours: Array

    @staticmethod
    def refined(observed: Observed) -> Observed:
        """Return a test with times put in between, on which no measured row depends."""
        edges = np.union1d([0.0], observed.time_h)
        pieces = [np.linspace(a, b, CUTS + 1)[1:-1] for a, b in pairwise(edges)]
        fine = np.unique(np.concatenate([observed.time_h, *pieces]))
        if fine.size - np.unique(observed.time_h).size == 0:
            return observed
        column = np.searchsorted(fine, observed.time_h)
        operator = observed.operator @ np.eye(fine.size)[column]
        return replace(observed, time_h=fine, operator=operator)

    @classmethod
    def of(cls, tests: Sequence[Observed]) -> Loss:
        """Lay out refined tests side by side."""
        sizes = [o.time_h.size for o in tests]
        firsts = np.cumsum([0, *sizes])
        step = np.arange(max(sizes))[:, None]
        reading = firsts[:-1] + np.minimum(step, np.array(sizes) - 1)
        hours = np.concatenate([np.diff(o.time_h, prepend=0.0) for o in tests])[reading]
        return cls(reading.astype(np.intp), np.where(step < np.array(sizes), hours, 0.0))

    def net(self, layout: Layout, full: Array, extraction: Array) -> Array:
        """Return the extraction less the loss, shape B + (M,)."""
        capacity, rate = (value[..., None] for value in _natural(layout, full))
        net, lost, before = np.empty_like(extraction), np.zeros(()), np.zeros(())
        for at, hours in zip(self.reading, self.hours, strict=True):
            now = extraction[..., at]
            lost = loss_step(lost, 0.5 * (before + now), capacity, rate * hours)[0]
            net[..., at], before = now - lost, now
        return net

    def net_and_gradient(
        self, layout: Layout, full: Array, extraction: Array, gradient: Array
    ) -> tuple[Array, Array]:
        """Return the net extraction and its derivatives by the free quantities."""
        capacity, rate = (value[..., None] for value in _natural(layout, full))
        by_own = _own_slopes(layout, full)
        net, slope = np.empty_like(extraction), np.empty_like(gradient)
        lost, before = np.zeros(()), np.zeros(())
        by, before_by = np.zeros(()), np.zeros(())
        for at, hours in zip(self.reading, self.hours, strict=True):
            now, now_by = extraction[..., at], gradient[..., at, :]
            lost, slopes = loss_step(lost, 0.5 * (before + now), capacity, rate * hours)
            by_lost, by_dissolved, by_capacity, by_turns = (
                np.broadcast_to(s, now.shape)[..., None] for s in slopes
            )
            by = (
                by_lost * by
                + by_dissolved * 0.5 * (before_by + now_by)
                + by_capacity * by_own[0]
                + by_turns * hours[:, None] * by_own[1]
            )
            net[..., at], slope[..., at, :] = now - lost, now_by - by
            before, before_by = now, now_by
        return net, slope


def _natural(layout: Layout, full: Array) -> list[Array]:
    """Return capacity and rate, each of shape B."""
    return [layout.natural(full, layout.position("loss", n)) for n in ("capacity", "rate")]


def _own_slopes(layout: Layout, full: Array) -> list[Array]:
    """Return d(capacity) and d(rate) by the free quantities, each B + (1, p)."""
    found = []
    for name in ("capacity", "rate"):
        place = layout.position("loss", name)
        slope = np.zeros((*full.shape[:-1], 1, len(layout.free)))
        column = np.flatnonzero(layout.free_index == place)
        scale = natural_slope(layout.quantities[place].scale, full[..., place])
        slope[..., column] = np.asarray(scale)[..., None, None]
        found.append(slope)
    return found
