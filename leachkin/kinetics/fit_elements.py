"""Readings, size classes and tests of a fit as flat arrays."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.kinetics.drive import LEAST_STRENGTH, READS
from leachkin.kinetics.fit_layout import Layout
from leachkin.kinetics.rate_law_checks import knot_weights, linear_weights
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]
#: Nodes of the Gauss rule on each straight piece of a history.
GAUSS_NODES = 3
#: A logged temperature that strays less than this from the test's own is that temperature [K].
TEMPERATURE_SLACK_K = 0.5
#: Classes that stand for a distribution whose spread is fitted.
SPREAD_CLASSES = 41


def thermal_covariate(temperature_K: Array | float, reference_K: float) -> Array:
    """Return 1/(R T) - 1/(R T_ref) [mol/kJ]."""
    per_kJ = 1000.0 / GAS_CONSTANT_J_per_mol_K
    return np.asarray(per_kJ * (1.0 / np.asarray(temperature_K) - 1.0 / reference_K))


def drifts(observed: Observed) -> bool:
    """Return whether the logged temperature of a test strays from its one temperature."""
    history = observed.history
    if history is None or history.time_h.size < 2:
        return False
    off = np.abs(history.temperature_K - observed.temperature_K).max()
    return bool(off > TEMPERATURE_SLACK_K)


@dataclass(frozen=True)
class Elements:
    """L elements (test, reading, size class) of M readings.

    Attributes
    ----------
    time : ndarray, shape (L,)
    reading_of : ndarray of int, shape (L,)
    starts : ndarray of int, shape (M,)
        First element of each reading.
    thermal, ln_size, ln_stirring, ln_strength : ndarray, shape (L,)
        Covariates of the times: the test's own temperature, size, stirring speed, strength.
    deviate : ndarray, shape (L,)
        Of a fitted spread: ln(d/d80) for a spread of 1 in ln d.
    share : ndarray, shape (L,)
        Metal share of the class.
    weights : ndarray, shape (L, k)
        Of the ultimate extractions at the knots.
    """

    time: Array
    reading_of: NDArray[np.intp]
    starts: NDArray[np.intp]
    thermal: Array
    ln_size: Array
    ln_stirring: Array
    ln_strength: Array
    deviate: Array
    share: Array
    weights: Array

    @classmethod
    def of(cls, layout: Layout, tests: Sequence[Observed]) -> Elements:
        """Flatten tests for a layout."""
        parts = [_flatten(observed, layout) for observed in tests]
        names = [f.name for f in fields(cls) if f.name not in ("reading_of", "starts")]
        classes = np.concatenate([part["classes"] for part in parts])
        return cls(
            reading_of=np.repeat(np.arange(classes.size), classes.astype(np.intp)),
            starts=np.concatenate([[0], np.cumsum(classes)[:-1]]).astype(np.intp),
            **{name: np.concatenate([part[name] for part in parts]) for name in names},
        )

    def over_classes(self, elements: Array) -> Array:
        """Return elements summed over the classes of each reading, shape B + (M,)."""
        if self.starts.size == elements.shape[-1]:
            return elements
        return np.asarray(np.add.reduceat(elements, self.starts, axis=-1))


def _flatten(observed: Observed, layout: Layout) -> dict[str, Array]:
    m = observed.time_h.size
    reference = layout.reference
    if observed.sizes is None:
        size, share = np.array([reference.size_mm]), np.ones(1)
    else:
        size, share = observed.sizes.size_mm, observed.sizes.metal_share
    deviate = np.zeros(size.size)
    if size.size == 1 and layout.has("spread", "sizes"):
        deviate, share = spread_classes(layout.size_family)
        size = np.repeat(size, deviate.size)
    c = size.size
    if layout.knot_tests:
        own = layout.knot_tests.index(observed.test) if observed.test in layout.knot_tests else None
        weights = np.tile(_of_test(len(layout.knot_tests), own), (c, 1))
    elif layout.knot_temperature_K is None:
        weights = knot_weights(size, layout.knot_size_mm)
    else:
        at = np.full(c, observed.temperature_K)
        weights = linear_weights(at, layout.knot_temperature_K)
    thermal = float(thermal_covariate(observed.temperature_K, reference.temperature_K))
    return {
        "classes": np.full(m, float(c)),
        "time": np.repeat(observed.time_h, c),
        "thermal": np.full(m * c, thermal),
        "ln_size": np.tile(np.log(size / reference.size_mm), m),
        "ln_stirring": np.full(m * c, _ln_ratio(observed.stirring_rpm, reference.stirring_rpm)),
        "ln_strength": np.full(
            m * c, _ln_ratio(observed.reagent_g_per_L, reference.reagent_g_per_L)
        ),
        "deviate": np.tile(deviate, m),
        "share": np.tile(share, m),
        "weights": np.tile(weights, (m, 1)),
    }


def _of_test(count: int, own: int | None) -> Array:
    """Return the weights of ultimates by test; of a test that has none their mean."""
    return np.full(count, 1.0 / count) if own is None else np.eye(count)[own]


def spread_classes(family: str) -> tuple[Array, Array]:
    """Return ln(d/d80) of classes for a spread of 1 in ln d, and their shares, by family.

    ``ln d = ln d80 + sigma (q(F) - q(0.8))`` with F the share that passes: q is the normal
    deviate of a log-normal distribution, ln F of Gates-Gaudin-Schuhmann (sigma 1/slope) and
    ln(-ln(1-F)) of Rosin-Rammler (sigma 1/slope). Classes are finer at both ends:
    F = u^2 (3 - 2u) at even u, whose shares make the midpoint rule exact to high order.
    """
    from scipy.special import ndtri

    quantile: dict[str, Callable[[Array], Array]] = {
        "log_normal": ndtri,
        "gates_gaudin_schuhmann": np.log,
        "rosin_rammler": lambda passing: np.log(-np.log1p(-passing)),
    }
    u = (np.arange(SPREAD_CLASSES) + 0.5) / SPREAD_CLASSES
    passing = u * u * (3.0 - 2.0 * u)
    share = 6.0 * u * (1.0 - u)
    deviate = quantile[family](passing) - quantile[family](np.asarray(0.8))
    return np.asarray(deviate), share / share.sum()


def _ln_ratio(value: float | None, reference: float | None) -> float:
    """Return ln(value/reference), 0 where either is not known."""
    if value is None or reference is None:
        return 0.0
    return float(np.log(max(value / reference, LEAST_STRENGTH)))


@dataclass(frozen=True)
class Exposure:
    """Nodes along the history of every test, from which the drive is summed up.

    Attributes
    ----------
    width_h : ndarray, shape (K,)
        Hours that a node stands for.
    values : mapping of str to ndarray, shape (K,)
        What the drive reads, by role.
    drift : ndarray, shape (K,)
        1/(R T) less that of the test's own temperature [mol/kJ].
    first, after : ndarray of int, shape (M,)
        First node of the test of each reading, and the node after the last one before it.
    """

    width_h: Array
    values: Mapping[str, Array]
    drift: Array
    first: NDArray[np.intp]
    after: NDArray[np.intp]

    @classmethod
    def of(cls, layout: Layout, tests: Sequence[Observed]) -> Exposure:
        """Set nodes: one a reading where all is steady, else a Gauss rule on straight pieces."""
        parts = [_nodes(observed, layout) for observed in tests]
        offsets = np.cumsum([0, *(part.width_h.size for part in parts)])
        roles = READS[layout.drive_form.kind]
        return cls(
            width_h=np.concatenate([part.width_h for part in parts]),
            values={role: np.concatenate([part.values[role] for part in parts]) for role in roles},
            drift=np.concatenate([part.drift for part in parts]),
            first=np.repeat(offsets[:-1], [o.time_h.size for o in tests]),
            after=np.concatenate(
                [part.after + start for part, start in zip(parts, offsets, strict=False)]
            ),
        )

    def summed(self, rate: Array) -> Array:
        """Return the sum of a rate B + (K,) up to each reading, shape B + (M,)."""
        grown = np.zeros((*rate.shape[:-1], self.width_h.size + 1))
        np.cumsum(rate * self.width_h, axis=-1, out=grown[..., 1:])
        return np.asarray(grown[..., self.after] - grown[..., self.first])


def _nodes(observed: Observed, layout: Layout) -> Exposure:
    history = observed.history
    roles = READS[layout.drive_form.kind]
    read = {role: species_of(observed, layout, role) for role in roles}
    moving = history is not None and (drifts(observed) or any(np.ptp(v) > 0 for v in read.values()))
    edges = np.union1d([0.0], observed.time_h)
    if history is not None and moving:
        edges = np.union1d(edges, history.time_h[history.time_h < edges[-1]])
    abscissae, gauss = np.polynomial.legendre.leggauss(GAUSS_NODES if moving else 1)
    width = np.diff(edges)
    at = (edges[:-1, None] + 0.5 * width[:, None] * (abscissae + 1.0)).ravel()
    ends = np.repeat(edges[1:], abscissae.size)
    times = np.zeros(1) if history is None else history.time_h
    values = {role: np.interp(at, times, v) for role, v in read.items()}
    drift = np.zeros(at.size)
    if history is not None and drifts(observed):
        logged = np.interp(at, times, history.temperature_K)
        drift = thermal_covariate(logged, observed.temperature_K)
    m = observed.time_h.size
    return Exposure(
        (0.5 * width[:, None] * gauss).ravel(),
        values,
        drift,
        np.zeros(m, dtype=np.intp),
        np.searchsorted(ends, observed.time_h * (1.0 + 1e-12), side="right").astype(np.intp),
    )


def species_of(observed: Observed, layout: Layout, role: str) -> Array:
    """Return what the drive reads of a test, at the times of its history (or one value).

    Raises
    ------
    InputProblems
        If the readings of the test hold no such species.
    """
    history = observed.history
    if role == "reagent":
        return _strengths(observed, layout.reference.reagent_g_per_L)
    metal = observed.key.rpartition("/")[2]
    name = layout.drive_form.named(role, metal)
    if history is not None and name in history.others:
        return history.others[name]
    known = ", ".join(history.others) if history is not None and history.others else "none"
    raise argument_error(
        f"test {observed.test}",
        f"no readings of {name} for the drive {layout.drive_form.kind!r}",
        f"a column {name} in the readings (there are: {known})",
        "drive = 'power' to do without",
    )


def _strengths(observed: Observed, reference: float) -> Array:
    """Return the reagent at the times of the history, the reference where nothing is known."""
    history = observed.history
    count = 1 if history is None else history.time_h.size
    if observed.reagent_g_per_L is None:
        return np.full(count, reference)
    if history is None or history.reagent_g_per_L is None or count < 2:
        return np.full(count, observed.reagent_g_per_L)
    return history.reagent_g_per_L
