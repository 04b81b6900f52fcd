"""Stirred tanks: a train of them with its reagent balance, from one law and one clock."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics import ReagentDemand
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.scaleup.bands import bands
from leachkin.scaleup.checks import above_zero, batch_shape, demand_shape, flat, listed, several
from leachkin.scaleup.ore_law import Law, OreLaw, one_strength, ore_law
from leachkin.scaleup.ore_measure import OreMeasure
from leachkin.scaleup.train import Gangue, TrainTask, solve_train
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]

#: A tank is starved when less than this share of the feed's reagent is left in it ...
STARVED_SHARE = 0.02
#: ... while more than this share of the leachable metal is still undissolved.
STARVED_LEFT = 0.01
PERCENT = 100.0
KG_PER_T = 1000.0


@dataclass(frozen=True)
class TankTrain:
    """A train of stirred tanks; B is () or (n,) for n draws, N the number of tanks.

    Attributes
    ----------
    residence_times_h : ndarray, B+(N,)
        Mean time in each tank.
    extraction : ndarray, B+(N,)
        Of all the metal, cumulative, at each outlet.
    equivalent_h : ndarray, B+(N,)
        Mean equivalent leach time, cumulative, at each outlet.
    reagent_g_per_L : ndarray, B+(N,), or None
        Strength in each tank; None where no feed strength is given.
    taken_kg_per_t : ndarray, B+(N,), or None
        Reagent taken, cumulative; None without a demand.
    starved : ndarray of bool, B+(N,)
        Almost no reagent is left while leachable metal is: the tank stands for want of reagent.
    ultimate : ndarray, B
        Extraction that the law allows in endless time.
    warnings : tuple of str
    inputs : mapping
        The arguments as given.
    """

    residence_times_h: Array
    extraction: Array
    equivalent_h: Array
    reagent_g_per_L: Array | None
    taken_kg_per_t: Array | None
    starved: NDArray[np.bool_]
    ultimate: Array
    warnings: tuple[str, ...]
    inputs: Mapping[str, Any]

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """B, () for one set of numbers or (n,) for n draws."""
        return self.extraction.shape[:-1]

    def table(self, level: float = 0.8) -> ResultTable:
        """Return a row a tank; over draws, medians with the band of ``level``."""
        return _table(self, level)


def tank_train(
    law: Law,
    residence_times_h: ArrayLike,
    demand: ReagentDemand | None = None,
    feed_g_per_L: ArrayLike | None = None,
    *,
    solids_kg_per_m3: ArrayLike | None = None,
    sizes: SizeDistribution | None = None,
    temperature_K: ArrayLike | None = None,
    ultimate: ArrayLike | None = None,
    reagent_order: ArrayLike | None = None,
) -> TankTrain:
    """Return extraction and reagent at the outlet of each tank of a train.

    Every number may carry a leading batch axis of n draws.

    Parameters
    ----------
    law : ParticleLaw, RateLaw or OreCurve
        The times of a ParticleLaw [h] hold at the strength of the feed.
    residence_times_h : array_like, shape (N,) or B+(N,)
        Mean time in each tank, upstream first; above zero, they may differ.
    demand : ReagentDemand, optional
        With ``feed_g_per_L`` and ``solids_kg_per_m3``: each tank stands at the strength that its
        reagent balance leaves. Without it the strength is that of the feed throughout.
    feed_g_per_L : array_like, B, optional
        Reagent in the solution that enters; the law's reference where left out.
    solids_kg_per_m3 : array_like, B, optional
        Dry solids per cubic metre of solution (not of slurry).
    sizes : SizeDistribution
        With a RateLaw.
    temperature_K : array_like, shape (), (N,), (n, 1) or (n, N), optional
        With a RateLaw; its reference where left out.
    ultimate : array_like, B, optional
        With a ParticleLaw; 1 where left out.
    reagent_order : array_like, B, optional
        With a ParticleLaw; 1 where left out.

    Returns
    -------
    TankTrain

    Raises
    ------
    InputProblems
        If an argument has no meaning, or the law has no single clock under these conditions.

    Notes
    -----
    The equivalent leach time at outlet j is a sum of independent exponential times with means
    ``(C_i/C_ref)^n k_i t_i``; the extraction is the expectation of the ore curve over it
    [levenspiel1999, ch. 26, for one tank and one size]. ``C_j = C_(j-1) - solids (D_j - D_(j-1))``,
    metal and gangue on the same clock. Ideal mixing; solids and liquor move together.

    Examples
    --------
    >>> from leachkin.kinetics import ParticleLaw
    >>> train = tank_train(ParticleLaw(chemical=1.0), [0.5, 0.5])
    >>> (1.0 - train.extraction).round(6).tolist()
    [0.351501, 0.109009]
    """
    inputs = {
        "residence_times_h": residence_times_h,
        "feed_g_per_L": feed_g_per_L,
        "solids_kg_per_m3": solids_kg_per_m3,
        "temperature_K": temperature_K,
        "ultimate": ultimate,
        "reagent_order": reagent_order,
    }
    times = _residence(residence_times_h)
    ore = ore_law(law, sizes, temperature_K, ultimate, reagent_order, times.shape[-1])
    plant = _plant(ore, times, demand, feed_g_per_L, solids_kg_per_m3)
    course = solve_train(plant.task)
    return plant.result(course.extraction, course.equivalent_h, course.reagent_g_per_L,
                        course.taken_kg_per_t, inputs)  # fmt: skip


def _residence(residence_times_h: ArrayLike) -> Array:
    times = above_zero("residence_times_h", residence_times_h, "h")
    if times.ndim not in (1, 2) or not times.size:
        raise argument_error(
            "residence_times_h",
            f"shape {times.shape}",
            "a list, one mean time a tank",
            "residence_times_h=[6, 6, 6, 6, 6]",
        )
    return times


@dataclass(frozen=True)
class _Plant:
    """A train ready to be solved, and how its results go back to the batch shape."""

    task: TrainTask
    batch: tuple[int, ...]
    times_h: Array
    feed_known: bool
    balanced: bool

    def result(
        self,
        extraction: Array,
        equivalent_h: Array,
        reagent: Array,
        taken: Array,
        inputs: Mapping[str, Any],
    ) -> TankTrain:
        ultimate = self.task.measure.ultimate
        starved = self._starved(extraction, reagent, ultimate)
        return TankTrain(
            residence_times_h=self._shaped(self.times_h),
            extraction=self._shaped(extraction),
            equivalent_h=self._shaped(equivalent_h),
            reagent_g_per_L=self._shaped(reagent) if self.feed_known else None,
            taken_kg_per_t=self._shaped(taken) if self.balanced else None,
            starved=self._shaped(starved),
            ultimate=np.array(ultimate).reshape(self.batch),
            warnings=self._remarks(starved),
            inputs=inputs,
        )

    def _starved(self, extraction: Array, reagent: Array, ultimate: Array) -> NDArray[np.bool_]:
        if not self.feed_known:
            return np.zeros(extraction.shape, dtype=bool)
        gone = reagent <= STARVED_SHARE * self.task.feed_g_per_L
        return np.asarray(gone & (extraction < (1.0 - STARVED_LEFT) * ultimate))

    def _shaped(self, array: Any) -> Any:
        return np.array(array.T).reshape(*self.batch, len(array))

    def _remarks(self, starved: NDArray[np.bool_]) -> tuple[str, ...]:
        n = starved.shape[1]
        remarks = []
        if self.feed_known and np.any(self.task.feed_g_per_L <= 0.0):
            remarks.append("the feed holds no reagent: nothing is leached")
        names = [str(tank + 1) for tank in range(len(starved)) if starved[tank].any()]
        if names:
            what = (
                f"starved of reagent in tank {listed(names)}: less than "
                f"{PERCENT * STARVED_SHARE:g} % of the feed strength is left while leachable "
                "metal is; the extraction there is the reagent's limit, not the ore's"
            )
            remarks.append(several(int(starved.any(axis=0).sum()), n, what))
        return tuple(remarks)


def _plant(
    ore: OreLaw,
    times: Array,
    demand: ReagentDemand | None,
    feed_g_per_L: ArrayLike | None,
    solids_kg_per_m3: ArrayLike | None,
) -> _Plant:
    feed = one_strength("feed_g_per_L", feed_g_per_L)
    solids = _check_balance(demand, feed, solids_kg_per_m3)
    strength, reference = ore.strengths(feed)
    shapes = {"law": ore.batch, "residence_times_h": times.shape[:-1]}
    shapes |= {"feed_g_per_L": strength.shape}
    if demand is not None and solids is not None:
        shapes |= {"solids_kg_per_m3": solids.shape, "demand": demand_shape(demand)}
    batch = batch_shape(shapes)
    n = batch[0] if batch else 1
    pace = flat(times, n, 1) * flat(ore.pace, n, 1)
    flat_feed = flat(strength, n)
    task = TrainTask(
        measure=_repeated(ore.measure, n),
        mean_h=np.ascontiguousarray(pace.T),
        feed_ratio=flat_feed / flat(reference, n),
        order=flat(ore.checked_order(feed), n),
        feed_g_per_L=flat_feed,
        solids_t_per_m3=None if solids is None else flat(solids, n) / KG_PER_T,
        gangue=None if demand is None else gangue_of(demand, n),
    )
    return _Plant(task, batch, flat(times, n, 1).T, feed is not None, solids is not None)


def _check_balance(
    demand: ReagentDemand | None, feed: Array | None, solids_kg_per_m3: ArrayLike | None
) -> Array | None:
    """The solids, or None where no balance is asked for."""
    given = {
        "demand": demand is not None,
        "solids_kg_per_m3": solids_kg_per_m3 is not None,
    }
    if not any(given.values()):
        return None
    given["feed_g_per_L"] = feed is not None
    missing = [name for name, there in given.items() if not there]
    if missing:
        raise argument_error(
            listed(missing),
            "not given",
            "demand, feed_g_per_L and solids_kg_per_m3 together: a reagent balance needs all three",
            "give what is missing, or leave out demand and solids to hold the strength",
        )
    return above_zero("solids_kg_per_m3", np.asarray(solids_kg_per_m3), "kg/m3")


def _repeated(measure: OreMeasure, n: int) -> OreMeasure:
    rows = (n, measure.increment.shape[-1])
    return OreMeasure(
        np.broadcast_to(measure.equivalent_h, rows),
        np.broadcast_to(measure.increment, rows),
        np.broadcast_to(measure.start, (n,)),
    )


def gangue_of(demand: ReagentDemand, n: int) -> Gangue:
    """Return a demand's numbers as arrays of shape (n,)."""
    held = {
        name: flat(np.asarray(value, dtype=np.float64), n) for name, value in vars(demand).items()
    }
    return Gangue(
        held["per_metal_kg_per_kg"] * held["head_kg_per_t"],
        held["fast_kg_per_t"],
        held["fast_h"],
        held["slow_kg_per_t"],
        held["slow_h"],
    )


def _table(train: TankTrain, level: float) -> ResultTable:
    values: dict[str, tuple[str, str, Array | None]] = {
        "residence_h": ("Mean time in the tank", "h", train.residence_times_h),
        "extraction": ("Extraction, cumulative", "% of all the metal", PERCENT * train.extraction),
        "reagent_g_per_L": ("Reagent in the tank", "g/L", train.reagent_g_per_L),
        "taken_kg_per_t": ("Reagent taken, cumulative", "kg/t", train.taken_kg_per_t),
    }
    drawn = bool(train.batch_shape) and train.batch_shape[0] > 1
    columns = [Column("tank", "Tank")]
    cells: dict[str, Any] = {"tank": np.arange(train.extraction.shape[-1]) + 1}
    for key, (heading, unit, array) in values.items():
        if array is None:
            continue
        columns.append(Column(key, heading, unit))
        cells[key] = np.median(np.atleast_2d(array), axis=0)
        if drawn and key != "residence_h":
            band = bands(array, level)
            columns.append(Column(f"{key}_low", f"{heading}, {band.low_name}", unit))
            columns.append(Column(f"{key}_high", f"{heading}, {band.high_name}", unit))
            cells |= {f"{key}_low": band.low, f"{key}_high": band.high}
    starved = np.atleast_2d(train.starved).mean(axis=0)
    columns.append(Column("starved", "Starved of reagent in", "% of draws"))
    cells["starved"] = PERCENT * starved
    records = [{key: column[row] for key, column in cells.items()} for row in range(len(starved))]
    return ResultTable.from_records("tank_train", columns, records, "Cumulative at each outlet.")
