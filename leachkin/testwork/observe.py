"""From a test to what a fit needs: expected values linear in the extraction."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.problems import argument_error
from leachkin.testwork.balance import (
    leached_metal,
    metal_balance,
    metal_before_leach,
    undissolved_metal,
)
from leachkin.testwork.records import Array, History, Observed, Test
from leachkin.testwork.recursion import (
    balance_matrix,
    brought_mg,
    leach_matrix,
    solids_left_g,
    solution_ledger,
)
from leachkin.testwork.sizes import SizeDistribution

#: The expected values of one test are a matrix of readings by readings.
MOST_READINGS = 2000
_SAME_TIME = 1e-9


def observe(test: Test, analyte: str, exclude: Iterable[float | str] = ()) -> Observed:
    """Return the measured values of one analyte in one test, as a fit needs them.

    Parameters
    ----------
    test : Test
    analyte : str
    exclude : iterable of float or str
        Times of readings to keep out [h], "tail" for the tail, "all" for everything. The
        exclusions of the test count too.

    Returns
    -------
    Observed
        Solution assays in order of time, solids sampled as slurry, then the tail. An excluded or
        missing assay has no row; its aliquot is still part of the arithmetic, which needs no
        measured concentration. With carbon in the vessel the solution assays say nothing of the
        extraction: the metal in solution and on carbon at close-out stands for them, in kg per
        tonne of charge. The head is that of what was leached: less a gravity concentrate.

    Raises
    ------
    InputProblems
        If there are no readings of the analyte, more than :data:`MOST_READINGS`, or neither a
        head assay nor a calculated head.
    """
    if analyte not in test.solution or not test.time_h.size:
        raise argument_error(
            "analyte",
            f"test {test.name} has no readings of {analyte!r}",
            ", ".join(test.solution) or "a test with readings",
        )
    if test.time_h.size > MOST_READINGS:
        raise argument_error(
            "test",
            f"{test.name} has {test.time_h.size} readings",
            f"at most {MOST_READINGS} for a fit",
            "thin the log out: each hour, or each day",
        )
    head, head_sd = _head(test, analyte)
    out = _excluded(test, exclude)
    rows = [*_solution_rows(test, analyte, out), *_sampled_rows(test, analyte, out)]
    rows += _tail_rows(test, analyte, out)
    operator = np.array([row.operator for row in rows]).reshape(len(rows), test.time_h.size)
    return Observed(
        test=test.name,
        key=f"{test.domain}/{analyte}",
        time_h=test.time_h,
        operator=operator,
        offset=np.array([row.offset for row in rows]),
        brought=np.array([row.brought for row in rows]),
        value=np.array([row.value for row in rows]),
        sd=np.array([row.sd for row in rows]),
        bound=np.array([row.bound for row in rows], dtype=np.int64),
        row_kind=tuple(row.kind for row in rows),
        row_time_h=np.array([row.time_h for row in rows]),
        head_kg_per_t=head,
        head_sd_kg_per_t=head_sd,
        sizes=test.sizes_by_analyte.get(analyte, test.sizes),
        temperature_K=test.temperature_K,
        reagent_g_per_L=test.reagent_g_per_L,
        stirring_rpm=test.stirring_rpm,
        history=test.history,
        provisional=test.aliquots is None or not any(row.kind == "tail" for row in rows),
        rows=tuple(row.file_row for row in rows),
    )


def observed_from_extraction(
    time_h: ArrayLike,
    extraction: ArrayLike,
    sd: ArrayLike | None = None,
    *,
    test: str = "",
    key: str = "ore/metal",
    sizes: SizeDistribution | None = None,
    temperature_K: float = 298.15,
    reagent_g_per_L: float | None = None,
    stirring_rpm: float | None = None,
    history: History | None = None,
) -> Observed:
    """Return observed values where only extractions are known.

    Parameters
    ----------
    time_h, extraction : array_like, shape (m,)
        Hours, from 0 up; fractions of all the metal.
    sd : array_like, shape (m,) or (), optional
        Standard deviation of each extraction; without it all weigh the same and the scatter is
        left to the fit (``sd_given`` is False).
    test, key, sizes, temperature_K, reagent_g_per_L, stirring_rpm, history
        As in :class:`Observed`.

    Returns
    -------
    Observed
        With the identity operator and the head held at 1.

    Raises
    ------
    InputProblems
        If shapes differ, a value is not finite, a time is negative or goes back, or a standard
        deviation is not above 0.
    """
    time, value = np.asarray(time_h, dtype=float), np.asarray(extraction, dtype=float)
    spread = (
        np.ones(time.shape) if sd is None else np.broadcast_to(np.asarray(sd, float), time.shape)
    )
    _check_extraction(time, value, spread)
    count = time.size
    return Observed(
        test=test,
        key=key,
        time_h=time,
        operator=np.eye(count),
        offset=np.zeros(count),
        brought=np.zeros(count),
        value=value,
        sd=np.array(spread),
        bound=np.zeros(count, dtype=np.int64),
        row_kind=("extraction",) * count,
        row_time_h=time,
        head_kg_per_t=1.0,
        head_sd_kg_per_t=0.0,
        sizes=sizes,
        temperature_K=temperature_K,
        reagent_g_per_L=reagent_g_per_L,
        stirring_rpm=stirring_rpm,
        history=history,
        sd_given=sd is not None,
        rows=(0,) * count,
    )


def _check_extraction(time: Array, value: Array, spread: Array) -> None:
    if time.ndim != 1 or not time.size or value.shape != time.shape:
        raise argument_error(
            "extraction", f"shapes {time.shape} and {value.shape}", "one extraction a time"
        )
    for name, numbers in (("time_h", time), ("extraction", value), ("sd", spread)):
        if not np.isfinite(numbers).all():
            raise argument_error(name, "a value that is not finite", "finite numbers")
    if time[0] < 0.0 or (np.diff(time) < 0.0).any():
        raise argument_error("time_h", "a time that is negative or goes back", "0 h and rising")
    if (spread <= 0.0).any():
        raise argument_error("sd", f"{spread.min():g}", "above 0", "leave sd out if not known")


class _Row:
    """One row of an Observed."""

    def __init__(
        self, operator: Array, value: float, sd: float, bound: int, kind: str, time_h: float
    ) -> None:
        self.operator, self.value, self.sd, self.bound = operator, value, sd, bound
        self.kind, self.time_h = kind, time_h
        self.offset, self.brought, self.file_row = 0.0, 0.0, 0


def _head(test: Test, analyte: str) -> tuple[float, float]:
    head, before = test.heads.get(analyte), metal_before_leach(test, analyte)
    gravity = 1000.0 / test.solids_g * np.array([before.value_g, before.sd_g] if before else [0, 0])
    if head is not None and head.value_kg_per_t > gravity[0]:
        left = head.value_kg_per_t - float(gravity[0])
        return left, float(np.hypot(head.charge_sd_kg_per_t, gravity[1]))
    calculated = metal_balance(test, analyte).head_calculated_kg_per_t
    if calculated is None or calculated <= gravity[0]:
        raise argument_error(
            "heads",
            f"test {test.name} has neither a {analyte} head assay nor a calculated head",
            "a head assay, or a residue with mass and assay",
            f"add {analyte} to the heads sheet for domain {test.domain!r}",
        )
    left = calculated - float(gravity[0])
    return left, left


def _excluded(test: Test, exclude: Iterable[float | str]) -> set[float | str]:
    found: set[float | str] = set(exclude)
    for exclusion in test.exclusions:
        found.add("all" if exclusion.time_h is None else exclusion.time_h)
    times = [t for t in found if not isinstance(t, str)]
    for time in times:
        if not _is_near(test.time_h, time).any():
            raise argument_error(
                "exclude",
                f"test {test.name} has no reading at {time:g} h",
                ", ".join(f"{t:g}" for t in test.time_h) + " h",
            )
    return found


def _is_near(time_h: Array, time: float) -> NDArray[np.bool_]:
    return np.asarray(np.isclose(time_h, time, rtol=_SAME_TIME, atol=_SAME_TIME))


def solution_operator(test: Test, analyte: str) -> tuple[Array, Array]:
    """Return what makes concentrations out of extractions.

    Returns
    -------
    operator : ndarray, shape (m, m)
        Concentration [g/L] per head [kg/t] and extraction.
    brought : ndarray, shape (m,)
        Concentration [g/L] from metal that was not leached.
    """
    ledger = solution_ledger(test)
    matrix = balance_matrix(ledger)
    leached = test.solids_g * leach_matrix(ledger)
    columns = np.column_stack([leached, brought_mg(test, analyte, ledger)[:-1]])
    solved: Array = np.linalg.solve(matrix, columns).astype(np.float64)
    return solved[:, :-1], solved[:, -1]


def _solution_rows(test: Test, analyte: str, out: set[float | str]) -> list[_Row]:
    if test.has_carbon(analyte):
        return _close_out_rows(test, analyte, out)
    assays = test.solution[analyte]
    operator, brought = solution_operator(test, analyte)
    kept = ~np.isnan(assays.value)
    for time in out:
        kept &= ~_is_near(test.time_h, time) if not isinstance(time, str) else time != "all"
    rows = []
    for i in np.flatnonzero(kept):
        row = _Row(
            operator[i],
            float(assays.value[i]),
            float(assays.sd[i]),
            int(assays.bound[i]),
            "solution",
            float(test.time_h[i]),
        )
        row.brought = float(brought[i])
        row.file_row = assays.rows[i] if assays.rows else 0
        rows.append(row)
    return rows


def _close_out_rows(test: Test, analyte: str, out: set[float | str]) -> list[_Row]:
    """What solution and carbon hold at close-out, in kg per tonne of charge."""
    final = leached_metal(test, analyte).final
    last = float(test.time_h[-1])
    if final is None or "all" in out or any(t == last for t in out):
        return []
    operator = np.zeros(test.time_h.size)
    operator[-1] = 1.0
    per_t = 1000.0 / test.solids_g
    return [_Row(operator, per_t * final.value_g, per_t * final.sd_g, 0, "solution", last)]


def _sampled_rows(test: Test, analyte: str, out: set[float | str]) -> list[_Row]:
    """The solids that left with slurry samples: what of the head was left in them by then."""
    assays = test.vessel.solids_assays.get(analyte)
    if assays is None or "all" in out:
        return []
    per_mass = test.solids_g / solids_left_g(test)
    rows = []
    for i in np.flatnonzero(~np.isnan(assays.value)):
        if any(_is_near(test.time_h[i : i + 1], t)[0] for t in out if not isinstance(t, str)):
            continue
        operator = np.zeros(test.time_h.size)
        operator[i] = -per_mass
        numbers = float(assays.value[i]), float(assays.sd[i]), int(assays.bound[i])
        row = _Row(operator, *numbers, "tail", float(test.time_h[i]))
        row.offset, row.file_row = per_mass, assays.rows[i] if assays.rows else 0
        rows.append(row)
    return rows


def _tail_rows(test: Test, analyte: str, out: set[float | str]) -> list[_Row]:
    """The tail: what of the head is left, over the mass that is left, at the last reading."""
    solids = undissolved_metal(test, analyte)
    if solids is None or out & {"tail", "all"}:
        return []
    per_residue = test.solids_g / solids.whole_mass_g
    operator = np.zeros(test.time_h.size)
    operator[-1] = -per_residue
    products = [p for p in test.products if p.is_undissolved_metal and analyte in p.grade]
    bound = products[0].bound.get(analyte, 0) if len(products) == 1 else 0
    value = products[0].grade[analyte][0] if bound else solids.grade_kg_per_t
    sd = solids.grade_sd_kg_per_t
    row = _Row(operator, value, sd, bound, "tail", float(test.time_h[-1]))
    row.offset = per_residue
    return [row]
