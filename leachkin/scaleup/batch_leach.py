"""A batch leach whose reagent runs down: extraction and strength against time."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics import OreCurve, ReagentDemand
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.scaleup.bed import curve_rows, demand_rows
from leachkin.scaleup.checks import above_zero, batch_shape, demand_shape, flat, not_negative

Array = NDArray[np.float64]

#: Draws solved at once: the temporaries stay in the processor's cache.
BLOCK = 64
#: Halvings of the table's panels towards the start and towards the end of the reagent.
HALVINGS = 40
#: Gauss-Legendre points a panel.
POINTS = 6
#: Share of the way to exhaustion that the table leaves out.
LAST_GAP = 2.0**-HALVINGS
EXHAUSTED_SHARE = 0.02
KG_PER_T, PERCENT = 1000.0, 100.0

_PLACE, _WEIGHT = np.polynomial.legendre.leggauss(POINTS)
_PLACE, _WEIGHT = (1.0 + _PLACE) / 2.0, _WEIGHT / 2.0


@dataclass(frozen=True)
class BatchLeach:
    """A batch leach; B is () or (n,) for n draws, t the number of times.

    Attributes
    ----------
    time_h : ndarray, shape (t,)
    extraction : ndarray, B+(t,)
        Of all the metal.
    equivalent_h : ndarray, B+(t,)
        Equivalent leach time.
    reagent_g_per_L : ndarray, B+(t,)
    taken_kg_per_t : ndarray, B+(t,)
    starved : ndarray of bool, B
        At the last time less than 2 % of the feed's reagent is left while leachable metal is.
    warnings : tuple of str
    inputs : mapping
    """

    time_h: Array
    extraction: Array
    equivalent_h: Array
    reagent_g_per_L: Array
    taken_kg_per_t: Array
    starved: NDArray[np.bool_]
    warnings: tuple[str, ...]
    inputs: Mapping[str, Any]

    def table(self) -> ResultTable:
        """Return a row a time; over draws, medians."""
        columns = (
            Column("time_h", "Time", "h"),
            Column("extraction", "Extraction", "% of all the metal"),
            Column("reagent_g_per_L", "Reagent", "g/L"),
            Column("taken_kg_per_t", "Reagent taken", "kg/t"),
        )
        cells = {
            "time_h": self.time_h,
            "extraction": PERCENT * _middle(self.extraction),
            "reagent_g_per_L": _middle(self.reagent_g_per_L),
            "taken_kg_per_t": _middle(self.taken_kg_per_t),
        }
        records = [
            {key: column[row] for key, column in cells.items()} for row in range(len(self.time_h))
        ]
        return ResultTable.from_records("batch_leach", columns, records)


def _middle(array: Array) -> Array:
    return np.asarray(np.median(np.atleast_2d(array), axis=0))


def batch_leach(
    curve: OreCurve,
    time_h: ArrayLike,
    demand: ReagentDemand,
    feed_g_per_L: ArrayLike,
    *,
    solids_kg_per_m3: ArrayLike,
) -> BatchLeach:
    """Return extraction and reagent strength against time in a closed, well-mixed batch.

    Every number but the times may be an array of n draws.

    Parameters
    ----------
    curve : OreCurve
        Of batch shape B; any order above zero.
    time_h : array_like, shape (t,)
        Not negative.
    demand : ReagentDemand
    feed_g_per_L : array_like, B
        Strength at the start, above zero.
    solids_kg_per_m3 : array_like, B
        Dry solids per cubic metre of solution.

    Returns
    -------
    BatchLeach

    Raises
    ------
    InputProblems
        If an argument has no meaning.

    Notes
    -----
    ``t = integral of ds (C_ref/C(s))^n``, ``C(s) = C0 - solids D(s)``. Check: one size, chemical
    control, first order, reagent exactly enough: ``t/tau = ((1-X)**(-2/3) - 1)/2``, X = 0.875 at
    1.5 (an elementary integral).
    """
    inputs = {"feed_g_per_L": feed_g_per_L, "solids_kg_per_m3": solids_kg_per_m3}
    times = not_negative("time_h", time_h, "h")
    if times.ndim != 1 or not times.size:
        raise argument_error("time_h", f"shape {times.shape}", "a list", "time_h=[1, 2, 4]")
    feed = above_zero("feed_g_per_L", feed_g_per_L, "g/L")
    solids = above_zero("solids_kg_per_m3", solids_kg_per_m3, "kg/m3")
    if curve.order is None:
        found = "a drive that is no power of the reagent"
        raise argument_error("curve", found, "a power of it", "hold it: law.held_at(solution)")
    order = above_zero("order of the curve", curve.order, "")
    batch = batch_shape(
        {
            "curve": curve.batch_shape,
            "demand": demand_shape(demand),
            "feed_g_per_L": feed.shape,
            "solids_kg_per_m3": solids.shape,
        }
    )
    n = batch[0] if batch else 1
    whole = _Task(curve, demand, *(flat(x, n)[:, None] for x in (feed, solids / KG_PER_T, order)))
    blocks = [whole.rows(slice(low, min(low + BLOCK, n))) for low in range(0, n, BLOCK)]
    equivalent_h = np.concatenate([block.equivalent_h(times) for block in blocks])
    return _result(whole, times, equivalent_h, batch, inputs)


@dataclass(frozen=True)
class _Task:
    """Arrays of shape (n, 1)."""

    curve: OreCurve
    demand: ReagentDemand
    feed_g_per_L: Array
    solids_t_per_m3: Array
    order: Array

    def rows(self, rows: slice) -> _Task:
        return _Task(
            curve_rows(self.curve, rows),
            demand_rows(self.demand, rows),
            self.feed_g_per_L[rows],
            self.solids_t_per_m3[rows],
            self.order[rows],
        )

    def taken(self, equivalent_h: Array) -> Array:
        return np.asarray(self.demand.kg_per_t(self.curve, equivalent_h))

    def strength(self, equivalent_h: Array) -> Array:
        left = self.feed_g_per_L - self.solids_t_per_m3 * self.taken(equivalent_h)
        return np.maximum(left, 0.0)

    def slowness(self, equivalent_h: Array) -> Array:
        """Hours per equivalent hour."""
        ratio = np.maximum(self.strength(equivalent_h) / self.curve.reagent_g_per_L, 1e-200)
        return np.minimum(ratio**-self.order, 1e200)

    def equivalent_h(self, time_h: Array) -> Array:
        """Equivalent time at each time, by inverting a table of the time integral."""
        last = self._last(float(time_h.max()))
        nodes = _nodes(last, np.asarray(self.curve.equivalent_h))
        clock = np.cumsum(_piece(self.slowness, nodes[:, :-1], nodes[:, 1:]), axis=1)
        clock = np.concatenate([np.zeros_like(last), clock], axis=1)
        wanted = np.broadcast_to(time_h, (len(last), len(time_h)))
        panel = np.stack(
            [
                np.clip(np.searchsorted(row, at, "right") - 1, 0, row.size - 2)
                for row, at in zip(clock, wanted, strict=True)
            ]
        )
        low, base = np.take_along_axis(nodes, panel, 1), np.take_along_axis(clock, panel, 1)
        return _within(self.slowness, low, np.take_along_axis(nodes, panel + 1, 1), wanted - base)

    def _last(self, longest_h: float) -> Array:
        """Equivalent time at the end: exhaustion, or what the feed strength would give."""
        pace = (self.feed_g_per_L / self.curve.reagent_g_per_L) ** self.order
        low, high = np.zeros_like(pace), pace * max(longest_h, 1e-12)
        whole = high
        if np.all(self.strength(high) > 0.0):
            return high
        for _ in range(80):
            middle = 0.5 * (low + high)
            some = self.strength(middle) > 0.0
            low, high = np.where(some, middle, low), np.where(some, high, middle)
        return np.where(self.strength(whole) > 0.0, whole, low)


def _nodes(last: Array, curve_node_h: Array) -> Array:
    """Nodes dense towards both ends, with the curve's own between them, shape (n, k)."""
    halves = np.ldexp(1.0, -np.arange(1, HALVINGS + 1))
    ends = np.concatenate([[0.0], halves, 1.0 - halves[1:], [1.0]])
    own = np.minimum(np.broadcast_to(curve_node_h, (len(last), len(curve_node_h))), last)
    return np.sort(np.concatenate([last * ends, own], axis=1), axis=1)


def _piece(slowness: Callable[[Array], Array], low: Array, high: Array) -> Array:
    """Hours between two equivalent times of one panel, shape (n, q)."""
    n, q = low.shape
    place = low[..., None] + (high - low)[..., None] * _PLACE
    values = slowness(place.reshape(n, -1)).reshape(n, q, POINTS)
    return np.asarray((high - low) * (values @ _WEIGHT))


def _within(slowness: Callable[[Array], Array], low: Array, high: Array, rest_h: Array) -> Array:
    """Equivalent time at which so many hours have passed since the low end of a panel."""
    bottom, top = low, high
    guess = np.clip(low + rest_h / slowness(0.5 * (low + high)), low, high)
    for _ in range(60):
        miss = _piece(slowness, bottom, guess) - rest_h
        low, high = np.where(miss <= 0.0, guess, low), np.where(miss > 0.0, guess, high)
        step = guess - miss / slowness(guess)
        new = np.where((step >= low) & (step <= high), step, 0.5 * (low + high))
        if np.all(np.abs(new - guess) <= 1e-14 * top):
            break
        guess = new
    return guess


def _result(
    task: _Task,
    times: Array,
    equivalent_h: Array,
    batch: tuple[int, ...],
    inputs: Mapping[str, Any],
) -> BatchLeach:
    taken = task.taken(equivalent_h)
    reagent = task.strength(equivalent_h)
    extraction = np.asarray(task.curve(equivalent_h))
    last = int(np.argmax(times))
    left = np.asarray(task.curve.ultimate)
    gone = reagent[:, last] <= EXHAUSTED_SHARE * task.feed_g_per_L[:, 0]
    starved = gone & (extraction[:, last] < 0.99 * left)
    warnings: tuple[str, ...] = ()
    if np.any(starved):
        warnings = (
            f"the reagent is used up while leachable metal is left (in {int(starved.sum())} of "
            f"{len(starved)}): the plateau is starvation, not the ultimate extraction",
        )
    shape = (*batch, len(times))
    return BatchLeach(
        times,
        extraction.reshape(shape),
        equivalent_h.reshape(shape),
        reagent.reshape(shape),
        taken.reshape(shape),
        starved.reshape(batch),
        warnings,
        dict(inputs),
    )
