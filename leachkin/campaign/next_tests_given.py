"""The candidates that a campaign names under ``[[candidates]]``."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from leachkin.campaign.campaign import Campaign
from leachkin.campaign.next_tests_bench import Pattern, nearest
from leachkin.campaign.settings import Group, Settings
from leachkin.constants import ZERO_CELSIUS_K
from leachkin.errors import InputProblems
from leachkin.kinetics import Candidate
from leachkin.problems import Problem, unknown_name
from leachkin.testwork import SizeDistribution

TABLE = "candidates"


def given_candidates(
    settings: Settings, file: str, patterns: Sequence[Pattern]
) -> tuple[Candidate, ...]:
    """Return the candidates of a campaign, what is left out as in the nearest test.

    Raises
    ------
    InputProblems
        Every candidate that has no meaning, with its line.
    """
    groups = settings.repeated.get(TABLE, ())
    tests = [pattern.name for pattern in patterns]
    problems = [p for group in groups for p in _problems(group, tests, file)]
    if problems:
        raise InputProblems(problems)
    found = [_candidate(group, patterns) for group in groups]
    names = [one.name for one in found]
    twice = [i for i, name in enumerate(names) if name in names[:i]]
    if twice:
        again = (
            _stop("name", f"two named {names[i]}", "a name of its own for each") for i in twice
        )
        raise InputProblems(
            [p.at(file=file, row=_line(groups[i])) for i, p in zip(twice, again, strict=True)]
        )
    return tuple(found)


def candidate_problems(campaign: Campaign) -> tuple[Problem, ...]:
    """Return what is wrong with the candidates of a campaign, each with its line."""
    tests = [test.name for test in campaign.tests] + [one.test for one in campaign.observed]
    groups = campaign.settings.repeated.get(TABLE, ())
    return tuple(p for group in groups for p in _problems(group, tests, campaign.file))


def _line(group: Group) -> int | None:
    return min((s.line for s in group.values() if s.line is not None), default=None)


def _value(group: Group, name: str) -> float | None:
    return float(group[name].value) if name in group else None


def _problems(group: Group, tests: Sequence[str], file: str) -> list[Problem]:
    problems = [*_size_problems(group), *_time_problems(group)]
    like = group.get("like")
    if like is not None and like.value not in tests:
        problems.append(unknown_name("test", str(like.value), tests, column="like"))
    if not set(group) - {"name", "like", "repeats", "cost"} and like is None:
        problems.append(
            _stop(
                TABLE,
                "a candidate without conditions",
                "like, or one or more of temperature, size, reagent, times, stirring",
                'add temperature = "40 degC", or like = a test to run again',
            )
        )
    return [p.at(file=file, row=_line(group)) for p in problems]


def _size_problems(group: Group) -> list[Problem]:
    size, lower, upper = (_value(group, n) for n in ("size", "size_lower", "size_upper"))
    if size is not None and (lower is not None or upper is not None):
        return [_stop("size", "size and size_lower or size_upper", "one of the two ways")]
    if (lower is None) != (upper is None):
        end = "size_upper" if upper is None else "size_lower"
        return [_stop("size", f"no {end}", "both ends of the fraction", f'add {end} = "... mm"')]
    if lower is not None and upper is not None and lower >= upper:
        found = f"size_lower {lower:g} mm is not below size_upper {upper:g} mm"
        return [_stop("size", found, "lower below upper", "exchange the two")]
    return []


def _time_problems(group: Group) -> list[Problem]:
    if "times" not in group:
        return []
    times = np.array(group["times"].value, dtype=float)
    if (np.diff(times) <= 0.0).any():
        found = f"times {', '.join(f'{t:g}' for t in times)} h"
        return [_stop("times", found, "rising", "put them in order")]
    return []


def _stop(column: str, found: str, allowed: str, try_this: str = "") -> Problem:
    return Problem("", None, column, "stop", found, allowed, try_this)


def _pattern(group: Group, patterns: Sequence[Pattern]) -> Pattern:
    if "like" in group:
        return next(p for p in patterns if p.name == group["like"].value)
    sizes = _sizes(group)
    size = None if sizes is None else sizes.mass_mean_mm
    return nearest(patterns, _value(group, "temperature"), size, _value(group, "reagent"))


def _sizes(group: Group) -> SizeDistribution | None:
    if "size" in group:
        return SizeDistribution.single(float(group["size"].value))
    if "size_lower" in group and "size_upper" in group:
        edges = [float(group["size_lower"].value), float(group["size_upper"].value)]
        return SizeDistribution.from_classes(edges, [1.0])
    return None


def _name(group: Group, patterns: Sequence[Pattern]) -> str:
    if "name" in group:
        return str(group["name"].value)
    like, sizes = _pattern(group, patterns), _sizes(group)
    parts = []
    if "temperature" in group:
        parts.append(f"{float(group['temperature'].value) - ZERO_CELSIUS_K:.3g} degC")
    if sizes is not None:
        parts.append(f"{sizes.mass_mean_mm:.3g} mm")
    if "reagent" in group:
        parts.append(f"{float(group['reagent'].value):.3g} g/L")
    if "times" in group:
        parts.append(f"to {float(group['times'].value[-1]):.3g} h")
    if "stirring" in group:
        parts.append(f"{float(group['stirring'].value):.3g} rpm")
    return f"{like.name} again" if not parts else ", ".join(parts)


def _candidate(group: Group, patterns: Sequence[Pattern]) -> Candidate:
    like = _pattern(group, patterns)
    left = [
        word
        for word, keys in (
            ("temperature", ("temperature",)),
            ("size", ("size", "size_lower")),
            ("strength", ("reagent",)),
            ("times", ("times",)),
        )
        if not set(keys) & set(group)
    ]
    return like.candidate(
        _name(group, patterns),
        temperature_K=_value(group, "temperature"),
        sizes=_sizes(group),
        reagent_g_per_L=_value(group, "reagent"),
        time_h=np.array(group["times"].value, dtype=float) if "times" in group else None,
        stirring_rpm=_value(group, "stirring"),
        repeats=int(group["repeats"].value) if "repeats" in group else 1,
        cost=_value(group, "cost"),
        why=f"{', '.join(left)} as in {like.name}" if left else "",
    )
