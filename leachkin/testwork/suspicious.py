"""What looks wrong in readings as written: units mixed in a column, copies, faults of probes."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from functools import lru_cache

import numpy as np

from leachkin.chemistry import molar_mass
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.problems import Problem
from leachkin.tables import read_table
from leachkin.testwork.records import Array, Test

#: A step of a thousand, give or take what a leach does between two samples.
_JUMP = (250.0, 4000.0)
_TOGETHER = 30.0  #: the most that values of one unit may differ by
_FEWEST_COPIED = 4  #: readings that two tests must share to be called copies
_OVER_SATURATION = 1.15  #: above it air does not do it, whatever the height of the place
_FERRIC_THAT_MATTERS = 1.0  #: g/L


def suspicions(tests: Sequence[Test]) -> list[Problem]:
    """Return what should be looked at in the readings of tests before they are believed.

    Parameters
    ----------
    tests : sequence of Test

    Returns
    -------
    list of Problem
    """
    found: list[Problem] = []
    for test in tests:
        found += _mixed_units(test)
        found += _over_saturated(test)
        found += _free_acid_with_ferric(test)
    return [*found, *_copies(tests)]


def _mixed_units(test: Test) -> Iterator[Problem]:
    """A jump of about a thousand in a column: two units in one."""
    for name, assays in test.solution.items():
        known = np.flatnonzero((assays.value > 0.0) & (assays.bound == 0))
        values = assays.value[known]
        if values.size < 3:
            continue
        steps = values[1:] / values[:-1]
        jumps = np.flatnonzero(np.maximum(steps, 1.0 / steps) > _JUMP[0])
        if jumps.size != 1:
            continue
        at = int(jumps[0]) + 1
        groups = (values[:at], values[at:])
        ratio = max(np.median(g) for g in groups) / min(np.median(g) for g in groups)
        if ratio > _JUMP[1] or any(g.max() > _TOGETHER * g.min() for g in groups):
            continue
        rows = [assays.rows[i] for i in known]
        low, high = (f"{np.median(g):.3g} g/L" for g in groups)
        yield Problem(
            test.files.get("readings", ""),
            rows[at],
            name,
            "ask",
            f"{name} of test {test.name} is about {low} up to row {rows[at - 1]} and {high} from "
            f"row {rows[at]}: two units in one column?",
            "one unit a column",
            "multiply or divide one part by 1000",
        )


@lru_cache(maxsize=1)
def _oxygen() -> tuple[Array, Array]:
    rows = read_table("oxygen_solubility").rows
    columns = ("temperature_degC", "oxygen_mg_per_L")
    celsius, oxygen = (np.array([row.number(c) for row in rows]) for c in columns)
    return celsius, oxygen


def oxygen_saturation_mg_per_L(temperature_K: float) -> float:
    """Return dissolved oxygen in fresh water under air at sea level [mg/L]; 0 to 60 degC.

    Examples
    --------
    >>> round(oxygen_saturation_mg_per_L(298.15), 2)
    8.26
    """
    celsius, oxygen = _oxygen()
    return float(np.interp(temperature_K - ZERO_CELSIUS_K, celsius, oxygen))


def _over_saturated(test: Test) -> Iterator[Problem]:
    oxygen = test.logged.get("DO_mg_per_L")
    if oxygen is None or np.isnan(oxygen).all():
        return
    limit = oxygen_saturation_mg_per_L(test.temperature_K)
    highest = int(np.nanargmax(oxygen))
    if oxygen[highest] <= _OVER_SATURATION * limit:
        return
    celsius = test.temperature_K - ZERO_CELSIUS_K
    yield Problem(
        test.files.get("readings", ""),
        _row_of_reading(test, highest),
        "DO (mg/L)",
        "note",
        f"{oxygen[highest]:g} mg/L of oxygen in test {test.name} is above air saturation, about "
        f"{limit:.1f} mg/L at {celsius:.0f} degC: oxygen sparged, or a fault of the probe?",
        "",
        "say so in the remark if oxygen was used",
    )


def _row_of_reading(test: Test, i: int) -> int | None:
    rows = next((assays.rows for assays in test.solution.values() if assays.rows), ())
    return rows[i] if i < len(rows) else None


def _free_acid_with_ferric(test: Test) -> Iterator[Problem]:
    """Ferric iron hydrolyses in an acid titration and reads as acid."""
    ferric = test.solution.get("Fe3+")
    if ferric is None or test.free_reagent_g_per_L is None or test.reagent != "H2SO4":
        return
    both = np.flatnonzero(~np.isnan(ferric.value) & ~np.isnan(test.free_reagent_g_per_L))
    if not both.size or ferric.value[both].max() < _FERRIC_THAT_MATTERS:
        return
    worst = int(both[np.argmax(ferric.value[both])])
    per_gram = 1.5 * molar_mass("H2SO4") / molar_mass("Fe")
    yield Problem(
        test.files.get("readings", ""),
        ferric.rows[worst],
        "free H2SO4",
        "note",
        f"free acid beside {ferric.value[worst]:.3g} g/L Fe3+ in test {test.name}: unless ferric "
        f"iron was masked, it may read up to {per_gram * ferric.value[worst]:.3g} g/L high",
        "",
        "say how it was titrated; with masked iron nothing is to do",
    )


def _copies(tests: Sequence[Test]) -> Iterator[Problem]:
    """Tests whose assays are the same, number for number."""
    by_assays: dict[tuple[tuple[str, tuple[float, ...]], ...], list[Test]] = {}
    for test in tests:
        key = tuple(
            (name, tuple(np.nan_to_num(assays.value, nan=-1.0)))
            for name, assays in sorted(test.solution.items())
        )
        if key and max(_count(values) for _, values in key) >= _FEWEST_COPIED:
            by_assays.setdefault(key, []).append(test)
    for key, alike in by_assays.items():
        if len(alike) > 1:
            names = " and ".join(test.name for test in alike)
            count = max(_count(values) for _, values in key)
            yield Problem(
                alike[1].files.get("readings", ""),
                _row_of_reading(alike[1], 0),
                "test",
                "ask",
                f"tests {names} have the same assays in {count} rows: copied?",
                "readings of its own for each test",
                "look at the certificates, and correct one of them",
            )


def _count(values: Iterable[float]) -> int:
    return sum(value >= 0.0 for value in values)
