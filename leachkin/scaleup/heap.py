"""A heap lift in plug flow: what it extracts, what rules, and what comes out, day by day."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.constants import HOURS_PER_DAY
from leachkin.kinetics import OreCurve, ReagentDemand
from leachkin.problems import argument_error
from leachkin.result_table import ResultTable
from leachkin.scaleup.bed import Bed, BedCourse, course, solve_start, whole_demand
from leachkin.scaleup.checks import (
    above_zero,
    at_least,
    batch_shape,
    demand_shape,
    flat,
    not_negative,
    several,
    share,
)
from leachkin.scaleup.heap_tables import heap_tables

Array = NDArray[np.float64]

#: The reagent rules while extraction falls short of what reagent everywhere would give by more
#: than this share; the particles rule afterwards.
RULE_TOLERANCE = 0.02
L_per_m3 = 1000.0


@dataclass(frozen=True)
class HeapResult:
    """A lift day by day; B is () or (n,) for n draws, d the number of days.

    Extractions are fractions of all the metal placed. Two times are in use, and differ by the
    solution's way through the moisture:

    * *applied*: what the solution put on by day t does, on its whole way through the bed
      (``extracted``, ``taken_kg_per_t``, ``supplied_kg_per_t``). It is what the lift gives when
      irrigation stops on day t and the solution in it has drained.
    * *clock*: what has happened by day t (``recovered``, ``in_solution``,
      ``extracted_by_clock``). ``extracted_by_clock = recovered + in_solution`` exactly.

    Attributes
    ----------
    days : ndarray, shape (d,)
        Since irrigation began.
    m3_per_t : ndarray, B+(d,)
        Solution applied per tonne of dry ore.
    particles_alone : ndarray, B+(d,)
        Every grain in reagent of feed strength all the time: not what a heap does.
    ore_limited : ndarray, B+(d,)
        With the contacted fraction and the delivery factor, reagent never short, no cure.
    extracted : ndarray, B+(d,)
        With the reagent the solution brings: applied.
    extracted_by_clock, recovered, in_solution : ndarray, B+(d,)
        Dissolved, out at the bottom, dissolved but still in the bed: clock.
    supplied_kg_per_t : ndarray, B+(d,)
        Reagent brought by irrigation, without the cure.
    wanted_kg_per_t : ndarray, B+(d,)
        Reagent that the ore would take by then if it were never short.
    taken_kg_per_t : ndarray, B+(d,)
        Reagent taken, the cure included: applied.
    pls_g_per_L, pls_reagent_g_per_L : ndarray, B+(d,)
        Metal and reagent in the solution that leaves that day; 0 before any leaves.
    mean_pls_g_per_L : ndarray, B+(d,)
        Metal recovered over solution out, both to date; 0 before any leaves.
    drained_pls_g_per_L : ndarray, B+(d,)
        Metal extracted over solution applied: the mean when all solution is out.
    reagent_rules : ndarray of bool, B+(d,)
        Extraction falls short by more than ``RULE_TOLERANCE`` of what reagent everywhere gives.
    rules : tuple of str
        "reagent" or "particles" by day; over draws, what most of them say.
    first_solution_day : ndarray, B
    start_h : ndarray, B
        Equivalent leach time that the cure gave [h].
    head_kg_per_t : ndarray, B
    warnings : tuple of str
    inputs : mapping
        The arguments as given.
    """

    days: Array
    m3_per_t: Array
    particles_alone: Array
    ore_limited: Array
    extracted: Array
    extracted_by_clock: Array
    recovered: Array
    in_solution: Array
    supplied_kg_per_t: Array
    wanted_kg_per_t: Array
    taken_kg_per_t: Array
    pls_g_per_L: Array
    pls_reagent_g_per_L: Array
    mean_pls_g_per_L: Array
    drained_pls_g_per_L: Array
    reagent_rules: NDArray[np.bool_]
    rules: tuple[str, ...]
    first_solution_day: Array
    start_h: Array
    head_kg_per_t: Array
    warnings: tuple[str, ...]
    inputs: Mapping[str, Any]

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """B, () for one set of numbers or (n,) for n draws."""
        return self.extracted.shape[:-1]

    @property
    def metal_kg_per_t(self) -> Array:
        """Metal extracted per tonne placed, B+(d,) [kg/t]: applied."""
        return np.asarray(self.head_kg_per_t[..., None] * self.extracted)

    def tables(self, level: float = 0.8) -> tuple[ResultTable, ...]:
        """Return extraction, supply against demand, and solution, by day.

        Over draws each number is the median, with the low and high end of the band of ``level``
        for the main ones: 0.8 gives P10, the low one, and P90.
        """
        return heap_tables(self, level)


@dataclass(frozen=True)
class _Arguments:
    """Checked arguments, flat: every array of shape (n, 1), days of shape (d,)."""

    n: int
    batch: tuple[int, ...]
    days: Array
    lift_m: Array
    irrigation_L_per_h_m2: Array
    bulk_density_t_per_m3: Array
    feed_g_per_L: Array
    cure_kg_per_t: Array
    contacted_fraction: Array
    delivery_factor: Array
    moisture_m3_per_t: Array
    head_kg_per_t: Array

    @property
    def t_per_m2(self) -> Array:
        """Ore under a square metre."""
        return self.bulk_density_t_per_m3 * self.lift_m

    @property
    def m3_per_t_h(self) -> Array:
        """Solution applied per tonne and hour."""
        return self.irrigation_L_per_h_m2 / (L_per_m3 * self.t_per_m2)


def heap(
    curve: OreCurve,
    days: ArrayLike,
    *,
    lift_m: ArrayLike,
    irrigation_L_per_h_m2: ArrayLike,
    bulk_density_t_per_m3: ArrayLike,
    feed_g_per_L: ArrayLike,
    demand: ReagentDemand,
    cure_kg_per_t: ArrayLike = 0.0,
    contacted_fraction: ArrayLike = 1.0,
    delivery_factor: ArrayLike = 1.0,
    moisture_m3_per_t: ArrayLike = 0.0,
    head_kg_per_t: ArrayLike | None = None,
) -> HeapResult:
    """Return what a lift extracts, takes and gives, day by day, in plug flow.

    Every argument but ``days`` may be one number or an array of n draws.

    Parameters
    ----------
    curve : OreCurve
        Extraction against equivalent leach time at the heap's temperature; order 1 in the reagent.
    days : array_like, shape (d,)
        Days since irrigation began, not negative.
    lift_m, irrigation_L_per_h_m2, bulk_density_t_per_m3 : array_like, B
        Above zero; density of the stacked dry ore.
    feed_g_per_L : array_like, B
        Reagent in the solution applied.
    demand : ReagentDemand
        Reagent that the ore takes, metal and gangue, against equivalent leach time.
    cure_kg_per_t : array_like, B
        Reagent at agglomeration, used up before irrigation. Below what the ore takes in the end.
    contacted_fraction : array_like, B
        Fraction of the ore that solution reaches; scales extraction and demand, above 0 up to 1.
    delivery_factor : array_like, B
        How many times slower equivalent time accrues in the bed than in a bottle; at least 1.
    moisture_m3_per_t : array_like, B
        Solution held while irrigated.
    head_kg_per_t : array_like, B, optional
        Metal placed; by default the head of the demand.

    Returns
    -------
    HeapResult

    Raises
    ------
    InputProblems
        If an argument has no meaning, the curve's order is not 1, or the cure is more than the
        ore can take.

    Notes
    -----
    ``ds/dz = -rho/(q C_ref F) (D(s) - D(s0))`` in the frame of the solution,
    ``s_top = s0 + (C0/C_ref) t/F``; the reagent taken after the cure is
    ``q C_ref F (s_top - s_bottom)/(rho L)``. No dispersion, no stagnant solution; one reagent with
    a drive of first order. Cured metal leaves with the first bed volume of solution.
    """
    inputs = {
        "days": days,
        "lift_m": lift_m,
        "irrigation_L_per_h_m2": irrigation_L_per_h_m2,
        "bulk_density_t_per_m3": bulk_density_t_per_m3,
        "feed_g_per_L": feed_g_per_L,
        "cure_kg_per_t": cure_kg_per_t,
        "contacted_fraction": contacted_fraction,
        "delivery_factor": delivery_factor,
        "moisture_m3_per_t": moisture_m3_per_t,
        "head_kg_per_t": head_kg_per_t,
    }
    given = _arguments(curve, demand, inputs)
    bed, notes = _bed(curve, demand, given)
    return _result(given, bed, course(bed, given.days), notes, inputs)


def _arguments(curve: OreCurve, demand: ReagentDemand, named: Mapping[str, Any]) -> _Arguments:
    _check_order(curve)
    checked = {
        name: above_zero(name, named[name], unit)
        for name, unit in (
            ("lift_m", "m"),
            ("irrigation_L_per_h_m2", "L/h/m2"),
            ("bulk_density_t_per_m3", "t/m3"),
        )
    }
    checked |= {
        name: not_negative(name, named[name], unit)
        for name, unit in (
            ("feed_g_per_L", "g/L"),
            ("cure_kg_per_t", "kg/t"),
            ("moisture_m3_per_t", "m3/t"),
        )
    }
    checked["contacted_fraction"] = share("contacted_fraction", named["contacted_fraction"])
    checked["delivery_factor"] = at_least("delivery_factor", named["delivery_factor"], 1.0, "")
    checked["head_kg_per_t"] = _head(named["head_kg_per_t"], demand)
    shapes = {name: array.shape for name, array in checked.items()}
    shapes["curve"] = np.shape(curve.extraction)[:-1]
    shapes["demand"] = demand_shape(demand)
    batch = batch_shape(shapes)
    n = batch[0] if batch else 1
    columns = {name: flat(array, n)[:, None] for name, array in checked.items()}
    return _Arguments(n=n, batch=batch, days=_days(named["days"]), **columns)


def _days(days: ArrayLike) -> Array:
    checked = not_negative("days", days, "d")
    if checked.ndim != 1 or not checked.size:
        raise argument_error("days", f"shape {checked.shape}", "a list", "days=[30, 60, 90]")
    return checked


def _check_order(curve: OreCurve) -> None:
    if curve.order is not None and np.allclose(curve.order, 1.0, rtol=0.0, atol=1e-9):
        return
    found = "no single power" if curve.order is None else f"{np.ravel(curve.order)[0]:g}"
    raise argument_error(
        "curve",
        f"order {found} in the reagent",
        "order 1: plug flow by one quadrature holds for no other order, which needs a march "
        "through the bed cell by cell, not available here",
        "an order of 1 if only one strength was tested; otherwise fit again with the order held "
        "at 1 over the strengths that the heap will see",
    )


def _head(head_kg_per_t: ArrayLike | None, demand: ReagentDemand) -> Array:
    own = above_zero("demand.head_kg_per_t", demand.head_kg_per_t, "kg/t")
    if head_kg_per_t is None:
        return own
    head = above_zero("head_kg_per_t", head_kg_per_t, "kg/t")
    if not np.allclose(head, own, rtol=1e-9, atol=0.0):
        raise argument_error(
            "head_kg_per_t",
            f"{head.flat[0]:g} kg/t, and {own.flat[0]:g} kg/t in the demand",
            "one head for both",
            "leave it out, or build the demand with the same head",
        )
    return head


def _bed(curve: OreCurve, demand: ReagentDemand, given: _Arguments) -> tuple[Bed, tuple[str, ...]]:
    """The bed, its start solved from the cure, and what is to be said about the cure."""
    whole = given.contacted_fraction * whole_demand(demand, curve, given.n)[:, None]
    if np.any(whole <= 0.0):
        raise argument_error(
            "demand",
            "a demand that takes no reagent",
            "one that takes some",
            "without a demand nothing runs short: use the ore curve itself",
        )
    beyond = given.cure_kg_per_t >= whole * (1.0 - 1e-9)
    if np.all(beyond):
        raise argument_error(
            "cure_kg_per_t",
            f"{given.cure_kg_per_t.flat[0]:g} kg/t",
            f"below {whole.flat[0]:.4g} kg/t, all that the contacted ore takes in the end",
            "a smaller cure; what the ore cannot take would stay in the moisture",
        )
    cure = np.where(beyond, whole * (1.0 - 1e-6), given.cure_kg_per_t)
    flux = given.m3_per_t_h * curve.reagent_g_per_L * given.delivery_factor
    pace = given.feed_g_per_L / (curve.reagent_g_per_L * given.delivery_factor)
    filling_h = given.moisture_m3_per_t / given.m3_per_t_h
    bed = Bed(curve, demand, given.contacted_fraction, 0.0 * cure, flux, pace, filling_h)
    notes: tuple[str, ...] = ()
    if np.any(beyond):
        what = "the cure is more than the ore can take, the rest is counted as unused"
        notes = (several(int(beyond.sum()), given.n, what),)
    return replace(bed, start_h=solve_start(bed, cure)), notes


def _result(
    given: _Arguments,
    bed: Bed,
    result: BedCourse,
    notes: tuple[str, ...],
    inputs: Mapping[str, Any],
) -> HeapResult:
    clock_h = given.days * HOURS_PER_DAY
    m3_per_t = given.m3_per_t_h * clock_h
    since_h = bed.pace * clock_h
    ceiling = bed.extraction(bed.start_h + since_h)
    short = result.extracted < (1.0 - RULE_TOLERANCE) * ceiling
    out_m3_per_t = m3_per_t - given.moisture_m3_per_t
    supplied = given.feed_g_per_L * m3_per_t
    wanted = bed.taken_kg_per_t(bed.start_h + since_h)
    head = given.head_kg_per_t
    running = out_m3_per_t > 1e-12 * np.maximum(m3_per_t, 1e-300)
    fields: dict[str, Any] = {
        "m3_per_t": m3_per_t,
        "particles_alone": bed.curve(since_h * given.delivery_factor),
        "ore_limited": bed.extraction(since_h),
        "extracted": result.extracted,
        "extracted_by_clock": result.extracted_by_clock,
        "recovered": result.recovered,
        "in_solution": result.extracted_by_clock - result.recovered,
        "supplied_kg_per_t": supplied,
        "wanted_kg_per_t": wanted,
        "taken_kg_per_t": result.taken_kg_per_t,
        "pls_g_per_L": head * result.metal_slope_per_h / given.m3_per_t_h,
        "pls_reagent_g_per_L": given.feed_g_per_L * result.reagent_out_share,
        "mean_pls_g_per_L": _ratio(head * result.recovered, out_m3_per_t, running),
        "drained_pls_g_per_L": _ratio(head * result.extracted, m3_per_t, m3_per_t > 0.0),
        "reagent_rules": short | (since_h <= 0.0),
    }
    days_out = bed.filling_h[:, 0] / HOURS_PER_DAY
    return HeapResult(
        days=given.days,
        **{name: _batched(array, given) for name, array in fields.items()},
        rules=_rules(fields["reagent_rules"]),
        first_solution_day=days_out.reshape(given.batch),
        start_h=bed.start_h[:, 0].reshape(given.batch),
        head_kg_per_t=head[:, 0].reshape(given.batch),
        warnings=(*notes, *_remarks(given, days_out, supplied, wanted)),
        inputs=dict(inputs),
    )


def _batched(array: Array, given: _Arguments) -> Any:
    full = np.broadcast_to(array, (given.n, len(given.days)))
    return np.array(full).reshape(*given.batch, len(given.days))


def _ratio(part: Array, whole: Array, where: NDArray[np.bool_]) -> Array:
    return np.where(where, part / np.where(where, whole, 1.0), 0.0)


def _rules(reagent_rules: NDArray[np.bool_]) -> tuple[str, ...]:
    most = np.atleast_2d(reagent_rules).mean(axis=0) > 0.5
    return tuple("reagent" if rules else "particles" for rules in most)


def _remarks(
    given: _Arguments, first_day: Array, supplied: Array, wanted: Array
) -> tuple[str, ...]:
    remarks = []
    last = int(np.argmax(given.days))
    dry = first_day > given.days[last]
    if np.any(given.feed_g_per_L <= 0.0):
        remarks.append("the feed holds no reagent: only the cure leaches")
    if np.any(dry):
        what = (
            f"no solution leaves by day {given.days[last]:g}: the moisture takes more than is "
            f"applied (first solution on day {np.median(first_day[dry]):.3g})"
        )
        remarks.append(several(int(dry.sum()), given.n, what))
    early = given.days[(given.days > 0.0) & (given.days < np.median(first_day))]
    if early.size and not np.all(dry):
        remarks.append(
            f"day {early.max():g} and earlier lie before the first solution "
            f"(day {np.median(first_day):.3g}): nothing is recovered by then"
        )
    return (*remarks, *_supply_remark(given, supplied[:, last], wanted[:, last], last))


def _supply_remark(given: _Arguments, supplied: Array, wanted: Array, last: int) -> tuple[str, ...]:
    brought = supplied + given.cure_kg_per_t[:, 0]
    short = (wanted > brought) & (supplied > 0.0)
    if not np.any(short):
        return ()
    need = (
        given.feed_g_per_L[:, 0]
        * (wanted - given.cure_kg_per_t[:, 0])
        / np.where(supplied > 0.0, supplied, 1.0)
    )
    what = (
        f"by day {given.days[last]:g} irrigation and cure bring {np.median(brought[short]):.3g} "
        f"kg/t, reagent everywhere would take {np.median(wanted[short]):.3g}: at this irrigation "
        f"that needs {np.median(need[short]):.3g} g/L or more"
    )
    return (several(int(short.sum()), given.n, what),)
