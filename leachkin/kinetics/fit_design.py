"""The one residual function of every fit: expected values, residuals and exact derivatives.

Readings, size classes and tests are flattened once; a vector (or a batch of them) then costs one
inversion of the law. ``expected = head * (operator @ E + offset) + brought``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.inference import below_limit_residual, natural_slope
from leachkin.kinetics.drive import LEAST_STRENGTH
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.other_laws import clock_conversion_and_sensitivities
from leachkin.kinetics.particle_law import conversion_and_log_sensitivities
from leachkin.kinetics.rate_law import knot_weights
from leachkin.kinetics.resistance import Reference
from leachkin.testwork import Observed

Array = NDArray[np.float64]
PARTICLE_KINDS = ("film", "ash_layer", "chemical")
#: Nodes of the Gauss rule on each straight piece of a reagent history.
GAUSS_NODES = 3


def thermal_covariate(temperature_K: Array | float, reference_K: float) -> Array:
    """Return 1/(R T) - 1/(R T_ref) [mol/kJ]."""
    per_kJ = 1000.0 / GAS_CONSTANT_J_per_mol_K
    return np.asarray(per_kJ * (1.0 / np.asarray(temperature_K) - 1.0 / reference_K))


def _drive_nodes(observed: Observed, reference: Reference) -> tuple[Array, Array]:
    """Return ln(C/C_ref) and weights (m, nodes): the mean drive up to each reading.

    With one order for all resistances the time at constant strength is the time times the mean of
    (C/C_ref)^n: exact, for any history.
    """
    m = observed.time_h.size
    history = observed.history
    if reference.reagent_g_per_L is None or observed.reagent_g_per_L is None:
        return np.zeros((m, 1)), np.ones((m, 1))
    if history is None or history.reagent_g_per_L is None or history.time_h.size < 2:
        level = np.log(observed.reagent_g_per_L / reference.reagent_g_per_L)
        return np.full((m, 1), level), np.ones((m, 1))
    floor = LEAST_STRENGTH * reference.reagent_g_per_L
    edges = np.union1d(np.concatenate([[0.0], history.time_h]), observed.time_h)
    abscissae, gauss = np.polynomial.legendre.leggauss(GAUSS_NODES)
    width = np.diff(edges)
    nodes = edges[:-1, None] + 0.5 * width[:, None] * (abscissae + 1.0)
    strength = np.interp(nodes, history.time_h, history.reagent_g_per_L)
    ln_strength = np.log(np.maximum(strength, floor) / reference.reagent_g_per_L).ravel()
    weight = (0.5 * width[:, None] * gauss).ravel()
    before = np.repeat(edges[1:], GAUSS_NODES)[None, :] <= observed.time_h[:, None] * (1 + 1e-12)
    used = np.where(before, weight, 0.0)
    total = used.sum(axis=1, keepdims=True)
    used = np.where(total > 0, used / np.where(total > 0, total, 1.0), 1.0 / weight.size)
    return np.broadcast_to(ln_strength, used.shape), used


@dataclass(frozen=True)
class _Slice:
    """Where one test stands in the flat arrays."""

    test: str
    readings: slice
    rows: slice
    operator: Array
    offset: Array
    brought: Array


@dataclass(frozen=True)
class FitDesign:
    """Flat arrays of all tests of a fit: L elements (test, reading, class), M readings, N rows."""

    layout: Layout
    slices: tuple[_Slice, ...]
    time: Array
    reading_of: NDArray[np.intp]
    starts: NDArray[np.intp]
    thermal: Array
    ln_size: Array
    share: Array
    weights: Array
    ln_strength: Array
    strength_weight: Array
    value: Array
    sd: Array
    bound: NDArray[np.int64]

    @classmethod
    def of(cls, layout: Layout, tests: Sequence[Observed]) -> FitDesign:
        """Flatten tests for a layout."""
        parts = [_flatten(observed, layout) for observed in tests]
        readings = np.cumsum([0, *(observed.time_h.size for observed in tests)])
        rows = np.cumsum([0, *(observed.value.size for observed in tests)])
        slices = tuple(
            _Slice(
                o.test,
                slice(int(readings[i]), int(readings[i + 1])),
                slice(int(rows[i]), int(rows[i + 1])),
                o.operator,
                o.offset,
                o.brought,
            )
            for i, o in enumerate(tests)
        )
        classes = np.concatenate([part["classes"] for part in parts])
        starts = np.concatenate([[0], np.cumsum(classes)[:-1]]).astype(np.intp)
        nodes = max(part["ln_strength"].shape[1] for part in parts)
        return cls(
            layout=layout,
            slices=slices,
            time=np.concatenate([part["time"] for part in parts]),
            reading_of=np.repeat(np.arange(classes.size), classes.astype(np.intp)),
            starts=starts,
            thermal=np.concatenate([part["thermal"] for part in parts]),
            ln_size=np.concatenate([part["ln_size"] for part in parts]),
            share=np.concatenate([part["share"] for part in parts]),
            weights=np.concatenate([part["weights"] for part in parts]),
            ln_strength=np.concatenate([_padded(part["ln_strength"], nodes) for part in parts]),
            strength_weight=np.concatenate([_padded(part["weight"], nodes) for part in parts]),
            value=np.concatenate([o.value for o in tests]),
            sd=np.concatenate([o.sd for o in tests]),
            bound=np.concatenate([o.bound for o in tests]),
        )

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
        """Rows measured, and heads with an assay."""
        return self.value.size + self._priors[0].size

    def conversions(self, full: Array) -> tuple[Array, dict[str, Array], dict[str, Array]]:
        """Return X, dX/d ln(time) by resistance, and dX/d(shape), each of shape B + (L,)."""
        layout = self.layout
        times = {kind: np.exp(self.ln_times(full, kind)) for kind in layout.kinds}
        exposure = self.time * self._drive(full)[0]
        if "clock" in times:
            shapes = {k: v[..., None] for k, v in layout.shapes(full).items()}
            theta = exposure / times["clock"]
            X, slope, by_shape = clock_conversion_and_sensitivities(layout.law_name, theta, shapes)
            return X, {"clock": -theta * slope}, dict(by_shape)
        film, ash_layer, chemical = (times.get(kind, np.zeros(())) for kind in PARTICLE_KINDS)
        X, *slopes = conversion_and_log_sensitivities(film, ash_layer, chemical, exposure)
        by_kind = dict(zip(PARTICLE_KINDS, slopes, strict=True))
        return X, {kind: by_kind[kind] for kind in layout.kinds}, {}

    def extraction(self, vector: Array) -> Array:
        """Return the extraction at every reading, shape B + (M,)."""
        full = self.layout.expand(vector)
        X = self.conversions(full)[0]
        return self.over_classes(self.share * self.ultimate(full) * X)

    def expected(self, vector: Array) -> Array:
        """Return the expected value of every row, shape B + (N,)."""
        return self._rows(self.layout.expand(vector), self.extraction(vector))

    def squares(self, vectors: Array) -> Array:
        """Return the sum of squares of a batch of vectors, shape B."""
        residuals, _ = self._data_residuals(self.expected(vectors))
        index, centre, sd = self._priors
        prior = (vectors[..., index] - centre) / sd if index.size else np.zeros(())
        return np.asarray(np.sum(residuals**2, axis=-1) + np.sum(prior**2, axis=-1))

    def residuals_and_jacobian(self, vector: Array) -> tuple[Array, Array]:
        """Return residuals B + (n,) and their derivatives B + (n, p).

        Rows are (expected - value)/sd, limits as likelihoods, then one row a head assay.
        """
        full = self.layout.expand(vector)
        E, G = self._extraction_and_gradient(full)
        expected = self._rows(full, E)
        slope = self._row_gradient(full, expected, G)
        residuals, factor = self._data_residuals(expected)
        index, centre, sd = self._priors
        head_rows = np.zeros((*vector.shape[:-1], index.size, vector.shape[-1]))
        head_rows[..., np.arange(index.size), index] = 1.0 / sd
        return (
            np.concatenate([residuals, (vector[..., index] - centre) / sd], axis=-1),
            np.concatenate([slope * factor[..., None], head_rows], axis=-2),
        )

    def ln_times(self, full: Array, kind: str) -> Array:
        """Return ln(tau) of a resistance at every element, shape B + (L,)."""
        layout = self.layout
        energy = full[..., layout.position("activation_energy", kind), None]
        exponent = full[..., layout.position("size_exponent", kind), None]
        ln_time = layout.ln_time(full, kind)[..., None]
        return np.asarray(ln_time + energy * self.thermal + exponent * self.ln_size)

    def _drive(self, full: Array) -> tuple[Array, Array]:
        """Return the mean drive and d ln(drive)/d(order), shape B + (L,)."""
        order = full[..., self.layout.position("order", "reagent"), None, None]
        terms = self.strength_weight * np.exp(order * self.ln_strength)
        drive = terms.sum(axis=-1)
        slope = np.sum(terms * self.ln_strength, axis=-1) / drive
        return drive[..., self.reading_of], slope[..., self.reading_of]

    def ultimate(self, full: Array) -> Array:
        """Return the ultimate extraction of every element, shape B + (L,)."""
        return np.asarray(self.layout.ultimates(full) @ self.weights.T)

    def over_classes(self, elements: Array) -> Array:
        """Return elements summed over the classes of each reading, shape B + (M,)."""
        if self.starts.size == elements.shape[-1]:
            return elements
        return np.asarray(np.add.reduceat(elements, self.starts, axis=-1))

    def _extraction_and_gradient(self, full: Array) -> tuple[Array, Array]:
        """Return E, B + (M,), and dE/d(free quantities that belong to the law), B + (M, p)."""
        X, by_kind, by_shape = self.conversions(full)
        held = self.share * self.ultimate(full)
        E = self.over_classes(held * X)
        gradient = np.zeros((*E.shape, len(self.layout.free)))
        drive_slope = self._drive(full)[1]
        for j, quantity in enumerate(self.layout.free):
            if quantity.role != "head":
                column = self._column(quantity, full, X, held, by_kind, by_shape, drive_slope)
                gradient[..., j] = self.over_classes(column)
        return E, gradient

    def _column(
        self,
        quantity: Quantity,
        full: Array,
        X: Array,
        held: Array,
        by_kind: dict[str, Array],
        by_shape: dict[str, Array],
        drive_slope: Array,
    ) -> Array:
        which = quantity.which
        position = self.layout.position(quantity.role, which)
        slope = natural_slope(quantity.scale, full[..., position])[..., None]
        if quantity.role == "time":
            sign = -1.0 if which == "clock" else 1.0
            return np.asarray(sign * held * by_kind[which])
        if quantity.role == "activation_energy":
            return np.asarray(held * by_kind[which] * self.thermal)
        if quantity.role == "size_exponent":
            return np.asarray(held * by_kind[which] * self.ln_size)
        if quantity.role == "order":
            return np.asarray(-held * sum(by_kind.values()) * drive_slope)
        if quantity.role == "shape":
            return np.asarray(held * by_shape[which] * slope)
        return np.asarray(self.share * X * self.weights[:, int(which)] * slope)

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
                slope[..., part.rows, j] = expected[..., part.rows] - part.brought
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


def _flatten(observed: Observed, layout: Layout) -> dict[str, Array]:
    m = observed.time_h.size
    if observed.sizes is None:
        size, share = np.array([layout.reference.size_mm]), np.ones(1)
    else:
        size, share = observed.sizes.size_mm, observed.sizes.metal_share
    c = size.size
    thermal = thermal_covariate(observed.temperature_K, layout.reference.temperature_K)
    ln_strength, weight = _drive_nodes(observed, layout.reference)
    return {
        "classes": np.full(m, float(c)),
        "time": np.repeat(observed.time_h, c),
        "thermal": np.full(m * c, float(thermal)),
        "ln_size": np.tile(np.log(size / layout.reference.size_mm), m),
        "share": np.tile(share, m),
        "weights": np.tile(knot_weights(size, layout.knot_size_mm), (m, 1)),
        "ln_strength": ln_strength,
        "weight": weight,
    }


def _padded(nodes: Array, width: int) -> Array:
    return np.pad(nodes, ((0, 0), (0, width - nodes.shape[1])))
