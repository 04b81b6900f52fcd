"""Assays in the wrong place: copied rows, residues of two tests or two samples exchanged."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.testwork.balance import metal_balance
from leachkin.testwork.records import Assays, Test
from leachkin.testwork.recursion import assays_for_balance, dissolved_mg, solution_ledger

#: A closure this many standard deviations off 1 makes an exchange worth trying.
_OFF_SD = 2.5
#: Drop of the sum of squares, over both tests, that speaks for an exchange.
_CLEARLY_BETTER = 16.0
#: A step down of the metal dissolved that noise does not make, in standard deviations.
_STEP_SD = 3.5
_SAME_TIME_H = 1e-6


@dataclass(frozen=True)
class MixUp:
    """Assays of two tests that look exchanged or copied.

    Attributes
    ----------
    kind : str
        "copied rows", "residues exchanged" or "samples exchanged".
    tests : (str, str)
    text : str
        What speaks for it, in one sentence.
    rows : tuple of int
        Rows of the first test's readings, where readings are concerned.
    """

    kind: str
    tests: tuple[str, str]
    text: str
    rows: tuple[int, ...] = ()


def mix_ups(tests: Sequence[Test], copied_rows: int) -> tuple[MixUp, ...]:
    """Return the pairs of tests whose assays look copied or exchanged.

    Parameters
    ----------
    tests : sequence of Test
    copied_rows : int
        Readings at the same times, alike in every analyte, from which two tests look copied.

    Returns
    -------
    tuple of MixUp
    """
    copies = tuple(_copies(tests, copied_rows))
    alike = {frozenset(one.tests) for one in copies}
    others = [t for t in tests if not t.is_excluded]
    exchanged = [*_residues_exchanged(others), *_samples_exchanged(others)]
    return (*copies, *(one for one in exchanged if frozenset(one.tests) not in alike))


def _copies(tests: Sequence[Test], least: int) -> Iterator[MixUp]:
    seen: dict[tuple[float, tuple[tuple[str, float], ...]], list[tuple[int, int]]] = {}
    for n, test in enumerate(tests):
        for i, time in enumerate(test.time_h):
            row = tuple(
                (name, float(assays.value[i]))
                for name, assays in sorted(test.solution.items())
                if assays.value[i] > 0.0 and assays.bound[i] == 0
            )
            if row:
                seen.setdefault((float(time), row), []).append((n, i))
    pairs: dict[tuple[int, int], list[tuple[int, int]]] = {}
    for places in seen.values():
        for (n, i), (m, j) in combinations(places, 2):
            if n != m:
                pairs.setdefault((n, m), []).append((i, j))
    for (n, m), common in pairs.items():
        if len(common) < least:
            continue
        one, other = tests[n], tests[m]
        times = ", ".join(f"{one.time_h[i]:g}" for i, _ in common[:6])
        yield MixUp(
            "copied rows",
            (one.name, other.name),
            f"{len(common)} readings of {one.name} and {other.name} are the same in every analyte "
            f"({times} h)",
            tuple(_row(one, i) for i, _ in common),
        )


def _row(test: Test, i: int) -> int:
    rows = next((assays.rows for assays in test.solution.values() if assays.rows), ())
    return rows[i] if i < len(rows) else 0


def _residues_exchanged(tests: Sequence[Test]) -> Iterator[MixUp]:
    """Two balances that do not close, and both would with each other's residue."""
    off = [
        (test, squares)
        for test in tests
        if (squares := _closures(test)) and max(squares.values()) > _OFF_SD**2
    ]
    for (one, now), (other, then) in combinations(off, 2):
        swapped = (
            _closures(replace(one, products=other.products)),
            _closures(replace(other, products=one.products)),
        )
        if set(swapped[0]) != set(now) or set(swapped[1]) != set(then):
            continue
        before = sum(now.values()) + sum(then.values())
        after = sum(sum(s.values()) for s in swapped)
        worst = max(max(s.values()) for s in swapped)
        if before - after > _CLEARLY_BETTER and worst < _OFF_SD**2:
            yield MixUp(
                "residues exchanged",
                (one.name, other.name),
                f"the balances of {one.name} and {other.name} are off by {_size(now)} and "
                f"{_size(then)} standard deviations, and close with each other's residue",
            )


def _size(squares: dict[str, float]) -> str:
    return f"{np.sqrt(max(squares.values())):.1f}"


def _closures(test: Test) -> dict[str, float]:
    """Squares of the closures in standard deviations, by analyte; {} where there are none."""
    found = {}
    for analyte in test.solution:
        try:
            balance = metal_balance(test, analyte)
        except InputProblems:
            continue
        sd = balance.sd.get("closure", 0.0)
        if balance.closure is not None and balance.closure > 0.0 and sd > 0.0:
            found[analyte] = float(np.log(balance.closure) * balance.closure / sd) ** 2
    return found


def _samples_exchanged(tests: Sequence[Test]) -> Iterator[MixUp]:
    """Two curves that fall beside one sample, and neither once the two samples change places."""
    beside = {test.name: _beside_falls(test) for test in tests}
    for one, other in combinations([t for t in tests if beside[t.name]], 2):
        for analyte, places in beside[one.name].items():
            for i in sorted(places):
                j = _same_time(other, float(one.time_h[i]))
                if j is None or j not in beside[other.name].get(analyte, ()):
                    continue
                if _falls_after_exchange(one, i, other, j, analyte):
                    continue
                yield MixUp(
                    "samples exchanged",
                    (one.name, other.name),
                    f"{analyte} at {one.time_h[i]:g} h is out of line in {one.name} and in "
                    f"{other.name}, and in line in both after an exchange",
                    (_row(one, i),),
                )


def _same_time(test: Test, time_h: float) -> int | None:
    near = np.flatnonzero(np.abs(test.time_h - time_h) <= _SAME_TIME_H)
    return int(near[0]) if near.size == 1 else None


def _beside_falls(test: Test) -> dict[str, set[int]]:
    """Readings on either side of a fall of the metal dissolved, by analyte."""
    found: dict[str, set[int]] = {}
    for analyte in test.solution:
        falls = _falls(test, analyte)
        if falls.any():
            at = np.flatnonzero(falls)
            found[analyte] = {*at.tolist(), *(at + 1).tolist()}
    return found


def _falls(test: Test, analyte: str) -> NDArray[np.bool_]:
    """Where the metal dissolved falls by more than noise does, shape (m - 1,)."""
    used = assays_for_balance(test, analyte)
    unusable = np.isnan(used.value).any() or (used.bound != 0).any()
    if test.time_h.size < 3 or test.has_carbon(analyte) or unusable:
        return np.zeros(0, dtype=np.bool_)
    ledger = solution_ledger(test)
    dissolved = dissolved_mg(test, analyte, ledger, used.value)
    noise = used.sd * ledger.volume_mL
    return np.asarray(np.diff(dissolved) < -_STEP_SD * np.hypot(noise[1:], noise[:-1]))


def _falls_after_exchange(one: Test, i: int, other: Test, j: int, analyte: str) -> bool:
    """Whether a curve still falls beside the sample once the two have changed places."""
    first, second = one.solution[analyte], other.solution[analyte]
    changed = (
        (_with_assay(one, analyte, i, second, j), i),
        (_with_assay(other, analyte, j, first, i), j),
    )
    return any(bool(_falls(test, analyte)[max(at - 1, 0) : at + 1].any()) for test, at in changed)


def _with_assay(test: Test, analyte: str, at: int, source: Assays, of: int) -> Test:
    own = test.solution[analyte]
    value, sd = own.value.copy(), own.sd.copy()
    value[at], sd[at] = source.value[of], source.sd[of]
    return replace(test, solution={**test.solution, analyte: replace(own, value=value, sd=sd)})
