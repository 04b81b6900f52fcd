"""The one residual function of every fit: expected values, residuals and derivatives.

Readings, size classes and tests are flattened once; a vector (or a batch of them) then costs one
inversion of the law. ``expected = head * (operator @ E + offset) + brought``.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import below_limit_residual
from leachkin.kinetics.fit_clock import ClockPath, ln_times
from leachkin.kinetics.fit_elements import Elements, Exposure, drifts, thermal_covariate
from leachkin.kinetics.fit_grains import GrainSteps
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.fit_loss import Loss
from leachkin.kinetics.fit_march import MarchPath
from leachkin.kinetics.reagent_balance import ReagentBalance
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]
__all__ = ["FitDesign", "thermal_covariate"]


@dataclass(frozen=True)
class _Slice:
    """Where one test stands in the flat arrays."""

    test: str
    readings: slice
    rows: slice
    operator: Array
    offset: Array
    brought: Array
    reported: NDArray[np.intp]


@dataclass(frozen=True)
class FitDesign:
    """All tests of a fit: L elements (test, reading, class), M readings, N rows."""

    layout: Layout
    slices: tuple[_Slice, ...]
    elements: Elements
    path: ClockPath | MarchPath
    value: Array
    sd: Array
    bound: NDArray[np.int64]
    loss: Loss | None = None

    @classmethod
    def of(
        cls,
        layout: Layout,
        tests: Sequence[Observed],
        balances: Mapping[str, ReagentBalance] | None = None,
    ) -> FitDesign:
        """Flatten tests for a layout; balances by test where the reagent follows from them."""
        read = [Loss.refined(o) for o in tests] if layout.positions("loss") else list(tests)
        readings = np.cumsum([0, *(observed.time_h.size for observed in read)])
        rows = np.cumsum([0, *(observed.value.size for observed in read)])
        slices = tuple(
            _Slice(
                o.test,
                slice(int(readings[i]), int(readings[i + 1])),
                slice(int(rows[i]), int(rows[i + 1])),
                o.operator,
                o.offset,
                o.brought,
                readings[i] + np.searchsorted(o.time_h, own.time_h).astype(np.intp),
            )
            for i, (o, own) in enumerate(zip(read, tests, strict=True))
        )
        elements = Elements.of(layout, read)
        return cls(
            layout=layout,
            slices=slices,
            elements=elements,
            path=_path(layout, read, elements, balances or {}),
            value=np.concatenate([o.value for o in read]),
            sd=np.concatenate([o.sd for o in read]),
            bound=np.concatenate([o.bound for o in read]),
            loss=Loss.of(read) if layout.positions("loss") else None,
        )

    @property
    def time(self) -> Array:
        """Time of every element [h], shape (L,)."""
        return self.elements.time

    @property
    def share(self) -> Array:
        """Metal share of the class of every element, shape (L,)."""
        return self.elements.share

    @property
    def weights(self) -> Array:
        """Weights of the ultimate extractions at the knots, shape (L, k)."""
        return self.elements.weights

    @cached_property
    def _priors(self) -> tuple[NDArray[np.intp], Array, Array]:
        """Positions among the free quantities, centres and standard deviations of the priors."""
        found = [
            (j, q.start, q.prior_sd)
            for j, q in enumerate(self.layout.free)
            if q.prior_sd is not None
        ]
        index = np.array([f[0] for f in found], dtype=np.intp)
        return index, np.array([f[1] for f in found]), np.array([f[2] for f in found])

    @property
    def residual_count(self) -> int:
        """Rows measured, and priors (heads with an assay among them)."""
        return self.value.size + self._priors[0].size

    def extractions(self, vector: Array) -> list[Array]:
        """Return the extraction at the readings of each test, what was lost again taken off.

        A list of B + (m,), one for each test.
        """
        E = self._net(self.layout.expand(vector))
        return [E[..., part.reported] for part in self.slices]

    def limits(self, vector: Array) -> list[Array]:
        """Return the ultimate extraction at the readings of each test, a list of B + (m,)."""
        ultimate = self.layout.ultimates(self.layout.expand(vector)) @ self.weights.T
        limit = self.elements.over_classes(self.share * ultimate)
        return [limit[..., part.reported] for part in self.slices]

    def knot_weight(self, knot: int) -> Array:
        """Return how much each reading weighs on a knot of the ultimate, all tests in a row."""
        weight = self.elements.over_classes(self.share * self.weights[:, knot])
        return np.concatenate([weight[part.reported] for part in self.slices])

    def expected(self, vector: Array) -> Array:
        """Return the expected value of every row, shape B + (N,)."""
        full = self.layout.expand(vector)
        return self._rows(full, self._net(full))

    def _net(self, full: Array) -> Array:
        E = self.path.extraction(self.layout, full)
        return E if self.loss is None else self.loss.net(self.layout, full, E)

    def squares(self, vectors: Array) -> Array:
        """Return the sum of squares of a batch of vectors, shape B."""
        residuals, _ = self._data_residuals(self.expected(vectors))
        index, centre, sd = self._priors
        prior = (vectors[..., index] - centre) / sd if index.size else np.zeros(())
        return np.asarray(np.sum(residuals**2, axis=-1) + np.sum(prior**2, axis=-1))

    def residuals_and_jacobian(self, vector: Array) -> tuple[Array, Array]:
        """Return residuals B + (n,) and their derivatives B + (n, p).

        Rows are (expected - value)/sd, limits as likelihoods, then one row a prior.
        """
        full = self.layout.expand(vector)
        E, G = self.path.extraction_and_gradient(self.layout, full)
        if self.loss is not None:
            E, G = self.loss.net_and_gradient(self.layout, full, E, G)
        expected = self._rows(full, E)
        slope = self._row_gradient(full, expected, G)
        residuals, factor = self._data_residuals(expected)
        index, centre, sd = self._priors
        prior_rows = np.zeros((*vector.shape[:-1], index.size, vector.shape[-1]))
        prior_rows[..., np.arange(index.size), index] = 1.0 / sd
        return (
            np.concatenate([residuals, (vector[..., index] - centre) / sd], axis=-1),
            np.concatenate([slope * factor[..., None], prior_rows], axis=-2),
        )

    def ln_times(self, full: Array, kind: str) -> Array:
        """Return ln(tau) of a resistance at every element, shape B + (L,)."""
        return ln_times(self.layout, self.elements, full, kind)

    def _rows(self, full: Array, E: Array) -> Array:
        expected = np.empty((*E.shape[:-1], self.value.size))
        for part in self.slices:
            head = np.exp(full[..., self.layout.position("head", part.test), None])
            dissolved = E[..., part.readings] @ part.operator.T + part.offset
            expected[..., part.rows] = head * dissolved + part.brought
        return expected

    def _row_gradient(self, full: Array, expected: Array, gradient: Array) -> Array:
        slope = np.zeros((*expected.shape, gradient.shape[-1]))
        for part in self.slices:
            position = self.layout.position("head", part.test)
            head = np.exp(full[..., position, None, None])
            slope[..., part.rows, :] = head * (part.operator @ gradient[..., part.readings, :])
            if self.layout.quantities[position].free:
                j = int(np.flatnonzero(self.layout.free_index == position)[0])
                slope[..., part.rows, j] += expected[..., part.rows] - part.brought
        return slope

    def _data_residuals(self, expected: Array) -> tuple[Array, Array]:
        """Return the residuals and d(residual)/d(expected)."""
        residuals = (expected - self.value) / self.sd
        factor = np.broadcast_to(1.0 / self.sd, residuals.shape).copy()
        limited = self.bound != 0
        if limited.any():
            sign = self.bound[limited].astype(np.float64)
            distance = sign * residuals[..., limited]
            residual, slope = below_limit_residual(distance)
            residuals[..., limited] = residual
            factor[..., limited] = slope * sign / self.sd[limited]
        return residuals, factor


def _path(
    layout: Layout,
    tests: Sequence[Observed],
    elements: Elements,
    balances: Mapping[str, ReagentBalance],
) -> ClockPath | MarchPath:
    """Return one clock or the steps of the grains, or the march where a balance is followed."""
    if balances:
        _check_grains_alone(layout, "a reagent by balance")
        return MarchPath.of(layout, tests, [balances.get(o.test) for o in tests])
    several = len(layout.kinds) > 1 or len(layout.slow_kinds) > 1
    warmed = several and any(drifts(o) for o in tests)
    by_resistance = layout.drive_form.kind == "power" and not layout.has("order", "reagent")
    grains = None
    if warmed or (by_resistance and any(_strength_moves(o) for o in tests)):
        _check_grains_alone(layout, "conditions that change, without one clock")
        grains = GrainSteps.of(layout, tests, elements)
    return ClockPath(elements, Exposure.of(layout, tests), grains)


def _check_grains_alone(layout: Layout, found: str) -> None:
    """Stop at a term that a march through the states of the grains cannot carry."""
    for name, which in (("spread", "sizes"), ("lag", "lag"), ("fade", "fade")):
        if layout.has(name, which):
            raise argument_error(name, f"a {name} with {found}", "one of the two")


def _strength_moves(observed: Observed) -> bool:
    history = observed.history
    if history is None or history.reagent_g_per_L is None or history.time_h.size < 2:
        return False
    return bool(np.ptp(history.reagent_g_per_L) > 0.0)
