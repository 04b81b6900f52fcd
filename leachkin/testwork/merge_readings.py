"""Readings of one test from several sheets: a bench log and the assays of a laboratory, by time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import Problem
from leachkin.testwork.readings_sheet import Readings
from leachkin.testwork.records import Array, Assays

_SAME_TIME_H = 1e-6
_SAME_VALUE = 1e-9


def merged(first: Readings, second: Readings, test: str, problems: list[Problem]) -> Readings:
    """Return the readings of two sheets as one, in order of time.

    Parameters
    ----------
    first, second : Readings
        Of the same test; what the first one holds stays.
    test : str
    problems : list of Problem
        Added to where the two hold different numbers for the same.

    Returns
    -------
    Readings
    """
    places, time_h = _places(first.time_h, second.time_h)
    told: list[str] = []

    def join(one: Array | None, other: Array | None, what: str) -> Array | None:
        if one is None and other is None:
            return None
        return _joined(one, other, places, time_h.size, what, told)

    def join_all(one: Mapping[str, Array], other: Mapping[str, Array]) -> dict[str, Array]:
        names = dict.fromkeys([*one, *other])
        pairs = {name: join(one.get(name), other.get(name), name) for name in names}
        return {name: values for name, values in pairs.items() if values is not None}

    rows = np.zeros(time_h.size, dtype=np.int64)
    rows[places[1]] = second.rows
    rows[places[0]] = first.rows
    result = replace(
        first,
        time_h=time_h,
        aliquot_mL=join(first.aliquot_mL, second.aliquot_mL, "aliquot"),
        makeup_mL=join(first.makeup_mL, second.makeup_mL, "make-up"),
        pH=join(first.pH, second.pH, "pH"),
        temperature_K=join(first.temperature_K, second.temperature_K, "temperature"),
        assays=_joined_assays(first.assays, second.assays, places, time_h.size, told),
        solids_assays=_joined_assays(
            first.solids_assays, second.solids_assays, places, time_h.size, told
        ),
        vessel=join_all(first.vessel, second.vessel),
        free_g_per_L=join_all(first.free_g_per_L, second.free_g_per_L),
        added_g=join_all(first.added_g, second.added_g),
        makeup_metal_g_per_L=join_all(first.makeup_metal_g_per_L, second.makeup_metal_g_per_L),
        logged=join_all(first.logged, second.logged),
        rows=tuple(int(row) for row in rows),
    )
    if told:
        problems.append(_differs(first, second, test, told))
    return result


Places = tuple[NDArray[np.int64], NDArray[np.int64]]


def _places(one: Array, other: Array) -> tuple[Places, Array]:
    """Where the rows of each go in the union of the times."""
    new = np.array(
        [i for i, t in enumerate(other) if not np.any(np.abs(one - t) <= _SAME_TIME_H)],
        dtype=np.int64,
    )
    order = np.argsort(np.concatenate([one, other[new]]), kind="stable")
    where = np.empty(order.size, dtype=np.int64)
    where[order] = np.arange(order.size)
    second = np.empty(other.size, dtype=np.int64)
    second[new] = where[one.size :]
    for i in np.setdiff1d(np.arange(other.size), new):
        second[i] = where[int(np.argmin(np.abs(one - other[i])))]
    return (where[: one.size], second), np.concatenate([one, other[new]])[order]


def _joined(
    one: Array | None, other: Array | None, places: Places, count: int, what: str, told: list[str]
) -> Array:
    result = np.full(count, np.nan)
    if other is not None:
        result[places[1]] = other
    if one is not None:
        before = result[places[0]]
        both = ~np.isnan(before) & ~np.isnan(one)
        if np.any(both & (np.abs(before - one) > _SAME_VALUE * np.abs(one))):
            told.append(what)
        result[places[0]] = np.where(np.isnan(one), before, one)
    return result


def _joined_assays(
    first: Mapping[str, Assays],
    second: Mapping[str, Assays],
    places: Places,
    count: int,
    told: list[str],
) -> dict[str, Assays]:
    found = {}
    for name in dict.fromkeys([*first, *second]):
        one, other = first.get(name), second.get(name)
        value = _joined(
            None if one is None else one.value,
            None if other is None else other.value,
            places,
            count,
            name,
            told,
        )
        sd, bound = np.full(count, np.nan), np.zeros(count, dtype=np.int64)
        rows = np.zeros(count, dtype=np.int64)
        for assays, where in ((other, places[1]), (one, places[0])):
            if assays is not None:
                has = ~np.isnan(assays.value)
                sd[where[has]], bound[where[has]] = assays.sd[has], assays.bound[has]
                rows[where[has]] = np.asarray(assays.rows)[has]
        found[name] = Assays(value, sd, bound, tuple(int(row) for row in rows))
    return found


def _differs(first: Readings, second: Readings, test: str, told: list[str]) -> Problem:
    what = ", ".join(dict.fromkeys(told))
    return Problem(
        second.file,
        second.rows[0] if second.rows else None,
        "",
        "ask",
        f"{what} of test {test} differs from {first.file} at the same time; that of {first.file} "
        "is used meanwhile",
        "one number for each reading",
        "correct one of the two",
    )
