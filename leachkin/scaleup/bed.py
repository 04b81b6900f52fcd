"""A heap lift as a plug-flow bed: arguments made one batch, then solved in blocks of draws."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import HOURS_PER_DAY
from leachkin.kinetics import OreCurve, ReagentDemand
from leachkin.scaleup.checks import flat
from leachkin.scaleup.plug_flow import Front, front

Array = NDArray[np.float64]

#: Draws solved at once: the temporaries stay in the processor's cache.
BLOCK = 32
#: Depths at which the profile behind the front is broken for its quadrature, as shares of the
#: equivalent time at the top, and Gauss-Legendre points between two breaks.
PROFILE_BREAKS = np.array([0.9, 0.75, 0.5, 0.3, 0.15, 0.05, 1e-2, 1e-3, 1e-5])
PROFILE_POINTS = 3
_PLACE, _WEIGHT = np.polynomial.legendre.leggauss(PROFILE_POINTS)
_PLACE, _WEIGHT = (1.0 + _PLACE) / 2.0, _WEIGHT / 2.0

_DEMAND_FIELDS = (
    "per_metal_kg_per_kg",
    "head_kg_per_t",
    "fast_kg_per_t",
    "fast_h",
    "slow_kg_per_t",
    "slow_h",
)


@dataclass(frozen=True)
class Bed:
    """A lift under irrigation, every number of shape (n, 1).

    Attributes
    ----------
    curve : OreCurve
    demand : ReagentDemand
        Of the contacted ore.
    contacted : ndarray
        Fraction of the ore that solution reaches.
    start_h : ndarray
        Equivalent time s0 that the cure gave [h].
    capacity_kg_per_t_h : ndarray
        Reagent that raises the equivalent time of the whole bed by one hour, per tonne of it.
    pace : ndarray
        Equivalent hours a clock hour at the top of the bed.
    filling_h : ndarray
        Hours until the first solution leaves.
    """

    curve: OreCurve
    demand: ReagentDemand
    contacted: Array
    start_h: Array
    capacity_kg_per_t_h: Array
    pace: Array
    filling_h: Array

    def extraction(self, equivalent_h: Array) -> Array:
        """Return the extraction of the contacted ore, fraction of all the metal, (n, q)."""
        return np.asarray(self.contacted * self.curve(equivalent_h))

    def taken_kg_per_t(self, equivalent_h: Array) -> Array:
        """Return the reagent taken per tonne of the whole bed, shape (n, q)."""
        return np.asarray(self.contacted * self.demand.kg_per_t(self.curve, equivalent_h))

    def block(self, rows: slice) -> Bed:
        """Return some of the draws."""
        return Bed(
            curve_rows(self.curve, rows),
            demand_rows(self.demand, rows),
            self.contacted[rows],
            self.start_h[rows],
            self.capacity_kg_per_t_h[rows],
            self.pace[rows],
            self.filling_h[rows],
        )


@dataclass(frozen=True)
class BedCourse:
    """What a bed does, every array of shape (n, days).

    By bed time: each depth has seen solution for that long. By clock: hours since irrigation began.
    """

    extracted: Array
    taken_kg_per_t: Array
    extracted_by_clock: Array
    recovered: Array
    metal_slope_per_h: Array
    reagent_out_share: Array


def curve_rows(curve: OreCurve, rows: slice) -> OreCurve:
    """Return the ore curve of some of the draws; a single curve serves all."""
    batched = {
        name: getattr(curve, name)[rows]
        for name, tail in (("extraction", 1), ("slope", 1), ("ultimate", 0), ("order", 0))
        if np.ndim(getattr(curve, name)) > tail
    }
    return replace(curve, **batched) if batched else curve


def demand_rows(demand: ReagentDemand, rows: slice) -> ReagentDemand:
    """Return the demand of some of the draws."""
    batched: Mapping[str, Array] = {
        name: np.asarray(getattr(demand, name))[rows]
        for name in _DEMAND_FIELDS
        if np.ndim(getattr(demand, name))
    }
    return replace(demand, **batched) if batched else demand


def course(bed: Bed, days: Array) -> BedCourse:
    """Return what a bed does, day by day.

    Parameters
    ----------
    bed : Bed
        n draws.
    days : ndarray, shape (d,)

    Returns
    -------
    BedCourse
    """
    n = len(bed.contacted)
    blocks = [
        _course_of_block(bed.block(slice(low, min(low + BLOCK, n))), days)
        for low in range(0, n, BLOCK)
    ]
    return BedCourse(
        *(
            np.concatenate([getattr(block, name) for block in blocks])
            for name in BedCourse.__dataclass_fields__
        )
    )


def bed_front(bed: Bed, last_h: float) -> Front:
    """Return the plug-flow table of a bed, good for so many clock hours at the top."""
    before_taken = bed.taken_kg_per_t(bed.start_h)
    before_gained = bed.extraction(bed.start_h)
    slope = bed.contacted * bed.demand.derivative(bed.curve, np.maximum(bed.start_h, 1e-300))
    shortest = 1e-6 * float(bed.curve.equivalent_h[-1])
    return front(
        lambda u: bed.taken_kg_per_t(bed.start_h + u) - before_taken,
        lambda u: bed.extraction(bed.start_h + u) - before_gained,
        np.asarray(slope),
        bed.start_h,
        np.maximum(bed.pace * last_h, shortest),
        np.asarray(bed.curve.equivalent_h),
    )


def _course_of_block(bed: Bed, days: Array) -> BedCourse:
    clock_h = np.broadcast_to(days * HOURS_PER_DAY, (len(bed.contacted), len(days)))
    table = bed_front(bed, float(clock_h.max()))
    extracted, taken = _at_bed_time(bed, table, clock_h)
    outflow_h = np.maximum(clock_h - bed.filling_h, 0.0)
    cured = bed.extraction(bed.start_h)
    reacted = _at_bed_time(bed, table, outflow_h)[0] - cured
    washed = _washed_share(outflow_h, bed.filling_h, clock_h)
    in_bed = extracted
    if np.any(bed.filling_h > 0.0):
        by_clock = _extracted_by_clock(bed, table, clock_h)
        in_bed = np.where(bed.filling_h > 0.0, by_clock, extracted)
    slope, out_share = _outlet(bed, table, outflow_h)
    running = clock_h >= bed.filling_h
    pulse = np.where(
        running & (outflow_h < bed.filling_h), cured / np.maximum(bed.filling_h, 1e-300), 0.0
    )
    return BedCourse(
        extracted=extracted,
        taken_kg_per_t=taken,
        extracted_by_clock=np.maximum(in_bed, reacted + cured * washed),
        recovered=reacted + cured * washed,
        metal_slope_per_h=np.where(running, slope + pulse, 0.0),
        reagent_out_share=np.where(running, out_share, 0.0),
    )


def _at_bed_time(bed: Bed, table: Front, bed_h: Array) -> tuple[Array, Array]:
    """Mean extraction and reagent taken [kg/t] at bed times, shape (n, d)."""
    top_h = bed.pace * bed_h
    bottom_h = _time_at_depth(bed, table, bed_h, np.ones_like(bed_h))
    gained = bed.capacity_kg_per_t_h * (table.passed_at(top_h) - table.passed_at(bottom_h))
    extracted = bed.extraction(bed.start_h) + gained
    taken = bed.taken_kg_per_t(bed.start_h) + bed.capacity_kg_per_t_h * (top_h - bottom_h)
    return extracted, taken


def _time_at_depth(bed: Bed, table: Front, bed_h: Array, depth: Array, polish: int = 3) -> Array:
    """Time since s0 at a depth (0 top, 1 bottom) and bed time, (n, q); zero before the front."""
    wet = bed_h > 0.0
    top_h = np.where(wet, bed.pace * bed_h, 1.0)
    reach = table.reach_at(top_h) - depth / bed.capacity_kg_per_t_h
    below = np.where(wet & (top_h > 0.0), table.time_at(reach, polish), 0.0)
    return np.minimum(below, np.where(wet, top_h, 0.0))


def _outlet(bed: Bed, table: Front, bed_h: Array) -> tuple[Array, Array]:
    """Rise of the mean extraction per hour, and reagent at the bottom as a share of the feed."""
    top_h = np.maximum(bed.pace * bed_h, table.time_h[:, :1])
    bottom_h = np.minimum(
        table.time_at(table.reach_at(top_h) - 1.0 / bed.capacity_kg_per_t_h), top_h
    )
    taken_top = table.taken(top_h)
    step = (table.gained(top_h) - table.gained(bottom_h)) / taken_top
    return bed.capacity_kg_per_t_h * bed.pace * step, table.taken(bottom_h) / taken_top


def _washed_share(outflow_h: Array, filling_h: Array, clock_h: Array) -> Array:
    """Share of the cured metal that has left: with the first bed volume of solution."""
    spread = np.clip(outflow_h / np.where(filling_h > 0.0, filling_h, 1.0), 0.0, 1.0)
    return np.where(filling_h > 0.0, spread, (clock_h > 0.0) * 1.0)


def _extracted_by_clock(bed: Bed, table: Front, clock_h: Array) -> Array:
    """Mean over depth of the extraction at one clock time, each depth at its own bed time."""
    wetted = np.where(
        bed.filling_h > 0.0,
        np.minimum(clock_h / np.maximum(bed.filling_h, 1e-300), 1.0),
        1.0,
    )
    edges = _profile_edges(bed, table, clock_h, wetted)
    n, d, panels = len(clock_h), clock_h.shape[1], edges.shape[2] - 1
    width = np.diff(edges, axis=2)[..., None]
    depth = (edges[..., :-1, None] + width * _PLACE).reshape(n, -1)
    bed_h = np.repeat(clock_h, panels * PROFILE_POINTS, axis=1) - depth * bed.filling_h
    since_h = _time_at_depth(bed, table, np.maximum(bed_h, 0.0), depth, polish=0)
    gained = np.where(since_h > 0.0, table.gained(since_h), 0.0)
    weight = width * _WEIGHT
    mean = (gained.reshape(n, d, panels, PROFILE_POINTS) * weight).sum(axis=(2, 3))
    return np.asarray(bed.extraction(bed.start_h) + mean)


def _profile_edges(bed: Bed, table: Front, clock_h: Array, wetted: Array) -> Array:
    """Depths between which the profile is smooth enough for one Gauss rule, (n, d, breaks+2)."""
    n, d = clock_h.shape
    top_h = np.maximum(bed.pace * clock_h, table.time_h[:, :1])
    part_h = (top_h[..., None] * PROFILE_BREAKS).reshape(n, -1)
    ahead = np.repeat(table.reach_at(top_h), len(PROFILE_BREAKS), axis=1)
    depth = bed.capacity_kg_per_t_h * (ahead - table.reach_at(part_h))
    depth = depth.reshape(n, d, -1) / (1.0 + _lag(bed, table, top_h))[..., None]
    zero = np.zeros((n, d, 1))
    inner = np.minimum(np.nan_to_num(depth, posinf=1.0), wetted[..., None])
    return np.concatenate([zero, inner, zero + wetted[..., None]], axis=2)


def _lag(bed: Bed, table: Front, top_h: Array) -> Array:
    """How much the solution's own travel shortens the front at one clock time."""
    return np.asarray(bed.capacity_kg_per_t_h * bed.filling_h * bed.pace / table.taken(top_h))


def solve_start(bed: Bed, cure_kg_per_t: Array) -> Array:
    """Return s0, the equivalent time at which the bed has taken the cure, shape (n, 1) [h]."""
    longest = float(bed.curve.equivalent_h[-1])
    low = np.full_like(cure_kg_per_t, np.log(longest) - 45.0)
    high = np.full_like(cure_kg_per_t, np.log(longest) + 14.0)
    for _ in range(64):
        middle = 0.5 * (low + high)
        short = bed.taken_kg_per_t(np.exp(middle)) < cure_kg_per_t
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return np.where(cure_kg_per_t > 0.0, np.exp(0.5 * (low + high)), 0.0)


def whole_demand(demand: ReagentDemand, curve: OreCurve, n: int) -> Array:
    """Return the reagent that contacted ore takes in the end, shape (n,) [kg/t]."""
    parts = [
        flat(np.asarray(getattr(demand, name), dtype=np.float64), n)
        for name in ("per_metal_kg_per_kg", "head_kg_per_t", "fast_kg_per_t", "slow_kg_per_t")
    ]
    ultimate = flat(np.asarray(curve(curve.equivalent_h[-1:]))[..., 0], n)
    return np.asarray(parts[0] * parts[1] * ultimate + parts[2] + parts[3])
