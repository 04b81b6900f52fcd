"""A test that could be run, and what it would measure with the precision of the present tests."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.simulate import Bottle, solution_operator
from leachkin.problems import argument_error
from leachkin.testwork import History, Observed

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Candidate:
    """A test that could be run.

    Attributes
    ----------
    bottle : Bottle
        Sizes, temperature, strength, times, charge, solution and aliquots; its name is the
        candidate's.
    repeats : int
        Bottles of it, each with a charge of its own.
    cost : float or None
        Of one bottle, in any one currency.
    stirring_rpm : float or None
    why : str
        What it is meant for, in a few words.

    Raises
    ------
    InputProblems
        For times that do not rise from above 0, conditions not above 0, no bottle, or a cost not
        above 0.
    """

    bottle: Bottle
    repeats: int = 1
    cost: float | None = None
    stirring_rpm: float | None = None
    why: str = ""

    def __post_init__(self) -> None:
        where = f"candidate {self.name}"
        time_h = np.asarray(self.bottle.time_h, dtype=np.float64)
        if time_h.ndim != 1 or not time_h.size or not np.isfinite(time_h).all():
            raise argument_error(where, f"times {time_h}", "one or more finite times")
        if time_h[0] <= 0.0 or (np.diff(time_h) <= 0.0).any():
            found = f"times {', '.join(f'{t:g}' for t in time_h)} h"
            raise argument_error(where, found, "above 0 and rising", "put them in order")
        for name in ("temperature_K", "reagent_g_per_L", "solids_g", "solution_mL"):
            value = getattr(self.bottle, name)
            if not (np.isfinite(value) and value > 0.0):
                raise argument_error(where, f"{name} {value:g}", "above 0")
        if isinstance(self.repeats, bool) or self.repeats < 1 or self.repeats != int(self.repeats):
            raise argument_error(where, f"{self.repeats} repeats", "1 bottle or more")
        if self.cost is not None and not (np.isfinite(self.cost) and self.cost > 0.0):
            raise argument_error(where, f"a cost of {self.cost:g}", "above 0, or none")
        if self.stirring_rpm is not None and not self.stirring_rpm > 0.0:
            raise argument_error(where, f"stirring {self.stirring_rpm:g} rpm", "above 0 rpm")

    @property
    def name(self) -> str:
        """Name of the bottle."""
        return self.bottle.name

    @property
    def total_cost(self) -> float | None:
        """Cost of all its bottles."""
        return None if self.cost is None else self.cost * self.repeats


@dataclass(frozen=True)
class Precision:
    """How well the present tests measure, for a test that is made in the same way.

    Attributes
    ----------
    reading, tail : (floor, part)
        Standard deviation of a value: floor + part x value; tail None where none was assayed.
    head_relative : float
        Standard deviation of a charge's head over the head assay; 0 where the head is held.
    head_kg_per_t : float
    per_residue : float
        Mass of the charge over the mass of its residue.
    bench : bool
        False where the present tests are extractions and no assays.
    """

    reading: tuple[float, float]
    tail: tuple[float, float] | None
    head_relative: float
    head_kg_per_t: float
    per_residue: float
    bench: bool

    @classmethod
    def of(cls, fit: FitResult, tests: Sequence[Observed]) -> Precision:
        """Return the precision of the tests of a fit."""
        bench = any(kind != "extraction" for o in tests for kind in o.row_kind)
        tails = [
            float(o.offset[i]) for o in tests for i, kind in enumerate(o.row_kind) if kind == "tail"
        ]
        return cls(
            reading=_floor_and_part(fit, ("solution", "extraction")) or (1.0, 0.0),
            tail=_floor_and_part(fit, ("tail",)),
            head_relative=float(np.median([o.head_sd_kg_per_t / o.head_kg_per_t for o in tests])),
            head_kg_per_t=float(np.median([o.head_kg_per_t for o in tests])),
            per_residue=float(np.median(tails)) if tails else 1.0,
            bench=bench,
        )

    def sd(self, expected: Array, row_kind: Sequence[str]) -> Array:
        """Return the standard deviation of each expected value."""
        floor, part = self.reading
        sd = floor + part * np.abs(expected)
        if self.tail is not None:
            is_tail = np.array([kind == "tail" for kind in row_kind])
            sd = np.where(is_tail, self.tail[0] + self.tail[1] * np.abs(expected), sd)
        return np.asarray(np.maximum(sd, np.finfo(float).tiny))


def _floor_and_part(fit: FitResult, kinds: Sequence[str]) -> tuple[float, float] | None:
    """Return floor and part of the standard deviations of the rows of some kinds."""
    rows = [r for r in fit.residuals if r.kind in kinds and r.bound == 0 and r.sd > 0.0]
    if not rows:
        return None
    value = np.abs([r.measured for r in rows])
    sd = np.array([r.sd for r in rows])
    middle = float(value.mean())
    if np.ptp(sd) <= 1e-12 * sd.max():
        return float(sd[0]), 0.0
    spread = float(np.sum((value - middle) ** 2))
    if spread <= 1e-12 * value.size * middle**2:
        return 0.0, float(np.mean(sd) / middle)
    part = float(np.sum((value - middle) * (sd - sd.mean())) / spread)
    floor = float(sd.mean() - part * middle)
    if part <= 0.0:
        return float(sd.mean()), 0.0
    if floor <= 0.0:
        return 0.0, float(value @ sd / (value @ value))
    return floor, part


def observed_of_candidate(
    candidate: Candidate, tests: Sequence[Observed], precision: Precision
) -> Observed:
    """Return the rows that a candidate would give: values 0, to be expected; deviations 1.

    Its reagent and other species follow in time what the nearest present test did.
    """
    bottle = candidate.bottle
    time_h = np.asarray(bottle.time_h, dtype=np.float64)
    operator, offset, kinds = _operator(bottle, precision)
    like = nearest_test(candidate, tests)
    known = any(o.reagent_g_per_L is not None for o in tests)
    reagent = float(bottle.reagent_g_per_L) if known else None
    rows = operator.shape[0]
    head = precision.head_kg_per_t if precision.bench else 1.0
    return Observed(
        test=bottle.name,
        key=tests[0].key,
        time_h=time_h,
        operator=operator,
        offset=offset,
        brought=np.zeros(rows),
        value=np.zeros(rows),
        sd=np.ones(rows),
        bound=np.zeros(rows, dtype=np.int64),
        row_kind=kinds,
        row_time_h=np.append(time_h, time_h[-1:])[:rows],
        head_kg_per_t=head,
        head_sd_kg_per_t=head * precision.head_relative,
        sizes=bottle.sizes,
        temperature_K=float(bottle.temperature_K),
        reagent_g_per_L=reagent,
        stirring_rpm=candidate.stirring_rpm or like.stirring_rpm,
        history=_history(candidate, like, reagent),
    )


def _operator(bottle: Bottle, precision: Precision) -> tuple[Array, Array, tuple[str, ...]]:
    m = np.asarray(bottle.time_h).size
    if not precision.bench:
        return np.eye(m), np.zeros(m), ("extraction",) * m
    operator, offset = solution_operator(bottle), np.zeros(m)
    if precision.tail is None:
        return operator, offset, ("solution",) * m
    tail = np.zeros((1, m))
    tail[0, -1] = -precision.per_residue
    return (
        np.concatenate([operator, tail]),
        np.append(offset, precision.per_residue),
        ("solution",) * m + ("tail",),
    )


def nearest_test(candidate: Candidate, tests: Sequence[Observed]) -> Observed:
    """Return the present test whose conditions are nearest, each over the spread of the tests."""
    bottle = candidate.bottle

    def conditions(
        temperature_K: float, size_mm: float | None, reagent_g_per_L: float | None
    ) -> list[float]:
        sizes = 0.0 if size_mm is None else float(np.log(size_mm))
        strength = 0.0 if not reagent_g_per_L else float(np.log(reagent_g_per_L))
        return [1.0 / temperature_K, sizes, strength]

    own = conditions(bottle.temperature_K, bottle.sizes.mass_mean_mm, bottle.reagent_g_per_L)
    every = np.array(
        [
            conditions(
                o.temperature_K,
                None if o.sizes is None else o.sizes.mass_mean_mm,
                o.reagent_g_per_L,
            )
            for o in tests
        ]
    )
    away = np.abs(every - np.array(own))
    scale = away.max(axis=0)
    distance = np.sum(away / np.where(scale > 0.0, scale, 1.0), axis=1)
    return tests[min(range(len(tests)), key=lambda i: (float(distance[i]), tests[i].test))]


def _history(candidate: Candidate, like: Observed, reagent: float | None) -> History | None:
    history = like.history
    if history is None or history.time_h.size < 2:
        return None
    strength = None
    if reagent is not None and history.reagent_g_per_L is not None and like.reagent_g_per_L:
        strength = reagent * history.reagent_g_per_L / like.reagent_g_per_L
    temperature = np.full(history.time_h.size, float(candidate.bottle.temperature_K))
    return History(history.time_h, temperature, strength, history.others)
