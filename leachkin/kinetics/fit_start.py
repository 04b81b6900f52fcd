"""Start values chosen from the data, law by law.

A start under which every reading is complete has no slope to follow, so a grid of times (and of
how the resistances share them) is tried in one batch and the best ones are handed to the solver.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import product

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import from_natural
from leachkin.kinetics.fit_design import FitDesign
from leachkin.kinetics.fit_layout import SLOW, Layout
from leachkin.testwork import Observed

Array = NDArray[np.float64]

TIME_POINTS = 25
#: A slow fraction starts this much slower, in ln(time); how many of the starts are then tried.
LN_SLOWER = (1.0, 2.2, 3.5, 5.0)
SLOW_STARTS = 6
#: Finer where the sum of squares has kinks, and how many of its dips are tried.
KINKED_TIME_POINTS, MOST_DIPS = 150, 8
ENERGY_STARTS_kJ_per_mol = (15.0, 45.0)
SHAPE_STARTS: dict[str, tuple[float, ...]] = {
    "n": (0.4, 0.7, 1.0, 2.0),
    "fast_share": (0.3, 0.6),
    "ratio": (8.0, 60.0),
    "slope": (0.05, 0.2),
}
SPREAD_STARTS: dict[str, tuple[float, ...]] = {
    "log_normal": (0.35, 0.6, 1.0),
    "gates_gaudin_schuhmann": (0.6, 1.0, 2.0),
    "rosin_rammler": (0.8, 1.4, 2.5),
}


def rough_extraction(observed: Observed) -> Array:
    """Return a rough extraction at each reading, by undoing the operator on the assay head.

    Used for start values only; kept between 0 and 1.
    """
    head = observed.head_kg_per_t
    right = (observed.value - observed.brought) / head - observed.offset
    found = np.linalg.lstsq(observed.operator, right, rcond=None)[0]
    return np.asarray(np.clip(found, 0.0, 1.0))


def rough_ultimates(tests: Sequence[Observed], weights: Sequence[Array]) -> Array:
    """Return a start for the ultimate at each knot: a little above the highest reading there.

    weights : for each test the mean weight of its classes on the knots, shape (k,).
    """
    knots = weights[0].size
    highest = np.zeros(knots)
    for observed, weight in zip(tests, weights, strict=True):
        top = float(rough_extraction(observed).max(initial=0.0))
        near = weight >= 0.5 * weight.max()
        highest[near] = np.maximum(highest[near], top)
    seen = highest[highest > 0].mean() if (highest > 0).any() else 0.5
    highest[highest == 0] = seen
    return np.asarray(np.clip(1.01 * highest, 0.03, 0.985))


def start_vectors(design: FitDesign, count: int = 2) -> list[Array]:
    """Return start vectors, best first, of different shares of the resistances.

    A film alone stops dead where the metal is gone, so that its sum of squares has a kink at every
    reading: there each dip along the time is a start of its own.
    """
    if has_kinks(design.layout):
        return _dips(design)
    slower = LN_SLOWER if design.layout.slow_kinds else LN_SLOWER[:1]
    count = SLOW_STARTS if design.layout.slow_kinds else count
    splits = product(_splits(len(design.layout.kinds)), slower)
    groups = [_grid(design, split, slower=ln) for split, ln in splits]
    best = []
    for vectors in groups:
        squares = design.squares(vectors)
        squares[~np.isfinite(squares)] = np.inf
        i = int(np.argmin(squares))
        best.append((float(squares[i]), vectors[i]))
    best.sort(key=lambda pair: pair[0])
    return [vector for _, vector in best[:count]]


def has_kinks(layout: Layout) -> bool:
    """Return whether conversion stops with a corner, as a film alone does."""
    return layout.kinds == ("film",)


def _dips(design: FitDesign) -> list[Array]:
    vectors = _grid(design, (1.0,), KINKED_TIME_POINTS)
    squares = design.squares(vectors)
    squares[~np.isfinite(squares)] = np.inf
    along = squares.reshape(KINKED_TIME_POINTS, -1)
    beside = np.pad(along, ((1, 1), (0, 0)), constant_values=np.inf)
    dip = (along <= beside[:-2]) & (along <= beside[2:])
    found = np.flatnonzero(dip.ravel())
    return [vectors[i] for i in found[np.argsort(squares[found])][:MOST_DIPS]]


def _splits(resistances: int) -> list[tuple[float, ...]]:
    if resistances == 1:
        return [(1.0,)]
    ends = np.full((resistances, resistances), 0.1 / (resistances - 1))
    np.fill_diagonal(ends, 0.9)
    return [(1.0 / resistances,) * resistances, *map(tuple, ends.tolist())]


def several_minima(layout: Layout) -> bool:
    """Return whether the sum of squares may have several minima, so that every start is run."""
    return has_kinks(layout) or bool(layout.slow_kinds)


def _grid(
    design: FitDesign,
    split: tuple[float, ...],
    time_points: int = TIME_POINTS,
    slower: float = LN_SLOWER[0],
) -> Array:
    """Return start vectors of one split over times, activation energies and shapes."""
    layout = design.layout
    positive = design.time[design.time > 0]
    reach = np.log(positive.min() / 5.0), np.log(positive.max() * 200.0)
    totals = np.linspace(*reach, time_points)
    energies = ENERGY_STARTS_kJ_per_mol if _free(layout, "activation_energy") else (0.0,)
    shapes = [SHAPE_STARTS[name.removeprefix(f"{SLOW} ")] for name in _free(layout, "shape")]
    shapes += [SPREAD_STARTS[layout.size_family] for _ in _free(layout, "spread")]
    combinations = list(product(totals, energies, *shapes))
    starts = layout.starts[layout.free_index]
    vectors = np.tile(starts, (len(combinations), 1))
    share = dict(zip(layout.kinds, np.log(split), strict=True))
    share |= {f"{SLOW} {kind}": slower for kind in layout.slow_kinds}
    table = np.array(combinations)
    shape_column = 2
    for j, quantity in enumerate(layout.free):
        if quantity.role == "time":
            sign = -1.0 if quantity.which.endswith("clock") else 1.0
            vectors[:, j] = sign * (table[:, 0] + share[quantity.which])
        elif quantity.role == "activation_energy":
            vectors[:, j] = table[:, 1]
        elif quantity.role in ("shape", "spread"):
            vectors[:, j] = from_natural(quantity.scale, table[:, shape_column])
            shape_column += 1
    low = np.array([q.low for q in layout.free])
    high = np.array([q.high for q in layout.free])
    return np.asarray(np.clip(vectors, low, high))


def _free(layout: Layout, role: str) -> list[str]:
    return [q.which for q in layout.free if q.role == role]
