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
    """The readings of each test, refined so that the loss can be followed between them."""

    parts: tuple[slice, ...]
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
        """Lay out refined tests one behind the other."""
        ends = np.cumsum([0, *(o.time_h.size for o in tests)])
        parts = tuple(slice(int(a), int(b)) for a, b in pairwise(ends))
        return cls(parts, np.concatenate([np.diff(o.time_h, prepend=0.0) for o in tests]))

    def net(self, layout: Layout, full: Array, extraction: Array) -> Array:
        """Return the extraction less the loss, shape B + (M,)."""
        return self._march(layout, full, extraction, None)[0]

    def net_and_gradient(
        self, layout: Layout, full: Array, extraction: Array, gradient: Array
    ) -> tuple[Array, Array]:
        """Return the net extraction and its derivatives by the free quantities."""
        net, slope = self._march(layout, full, extraction, gradient)
        return net, gradient if slope is None else slope

    def _march(
        self, layout: Layout, full: Array, extraction: Array, gradient: Array | None
    ) -> tuple[Array, Array | None]:
        places = [layout.position("loss", name) for name in ("capacity", "rate")]
        capacity, rate = (layout.natural(full, place) for place in places)
        net = np.array(extraction)
        slope = None if gradient is None else np.array(gradient)
        own = np.zeros((*full.shape[:-1], 2, 0 if gradient is None else gradient.shape[-1]))
        for i, place in enumerate(places if gradient is not None else []):
            quantity = layout.quantities[place]
            column = [j for j, q in enumerate(layout.free) if q.name == quantity.name]
            own[..., i, column] = np.asarray(natural_slope(quantity.scale, full[..., place]))[
                ..., None
            ]
        for part in self.parts:
            lost = np.zeros(full.shape[:-1])
            by = np.zeros((*full.shape[:-1], own.shape[-1]))
            before = np.zeros(full.shape[:-1])
            before_by = np.zeros_like(by)
            for m in range(part.start, part.stop):
                now = extraction[..., m]
                turns = rate * self.hours[m]
                lost, slopes = loss_step(lost, 0.5 * (before + now), capacity, turns)
                if gradient is not None and slope is not None:
                    by_lost, by_dissolved, by_capacity, by_turns = (s[..., None] for s in slopes)
                    by = (
                        by_lost * by
                        + by_dissolved * 0.5 * (before_by + gradient[..., m, :])
                        + by_capacity * own[..., 0, :]
                        + by_turns * self.hours[m] * own[..., 1, :]
                    )
                    slope[..., m, :] = gradient[..., m, :] - by
                    before_by = gradient[..., m, :]
                before = now
                net[..., m] = now - lost
        return net, slope
