"""Independent lines of evidence for a mechanism, each scored by what the data allow.

Fit ranking, size exponent, stirring and activation energy are judged apart; energy is a hint
only, because one mineral may span every band of it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Literal

import numpy as np

from leachkin.errors import InputProblems
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.other_laws import MECHANISTIC, canonical_law, law_terms
from leachkin.kinetics.rank import Ranking, in_words
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed

Score = Literal["consistent", "conflicting", "undetermined"]

#: Power of the size in the time of each resistance by theory; film up to 2 round small grains.
SIZE_EXPONENTS = {
    "film": (1.0, 2.0),
    "ash_layer": (2.0, 2.0),
    "chemical": (1.0, 1.0),
    "shrinking_film": (1.5, 2.0),
}
#: Bands of activation energy in kJ/mol [common practice]: diffusion below, chemical step above.
DIFFUSION_BELOW_kJ_per_mol, CHEMICAL_ABOVE_kJ_per_mol = 20.0, 40.0
#: Stirring speeds closer than this, relative, are the same.
SAME_SPEED = 0.02
#: Powers of the stirring speed in the rate that are searched, and a power too small for a film.
STIRRING_BOUNDS = (-1.0, 2.0)
LITTLE_STIRRING = 0.2
STIRRING_STEP = 0.05


@dataclass(frozen=True)
class EvidenceLine:
    """One line: what was looked at, its score, what was found and what the mechanism asks."""

    line: str
    score: Score
    found: str
    asked: str
    hint_only: bool = False


@dataclass(frozen=True)
class Evidence:
    """The lines for one mechanism.

    Attributes
    ----------
    law : str
    lines : tuple of EvidenceLine
    verdict : str
        In one or two sentences.
    score : "consistent", "conflicting" or "undetermined"
        Conflicting if a line that is not a mere hint is; consistent if ranking and one more are.
    """

    law: str
    lines: tuple[EvidenceLine, ...]
    verdict: str
    score: Score

    def line(self, name: str) -> EvidenceLine:
        """Return a line by name."""
        for line in self.lines:
            if line.line == name:
                return line
        raise argument_error("name", repr(name), ", ".join(line.line for line in self.lines))

    def table(self) -> ResultTable:
        """Return the lines as a table."""
        columns = (
            Column("line", "Line of evidence"),
            Column("score", "Score"),
            Column("found", "Found"),
            Column("asked", f"Asked by {self.law}"),
            Column("hint_only", "A hint only"),
        )
        records = [vars(line) for line in self.lines]
        return ResultTable.from_records("evidence", columns, records, self.verdict)


def gather_evidence(
    observed: Sequence[Observed], ranking: Ranking, law: str | None = None, **same: Any
) -> Evidence:
    """Return the lines of evidence for a mechanism.

    Parameters
    ----------
    observed : sequence of Observed
        The tests that were ranked.
    ranking : Ranking
    law : str, optional
        A mechanistic law of the ranking; the one it names first where left out.
    **same
        As given to ``rank_tests`` for the fits.

    Returns
    -------
    Evidence

    Raises
    ------
    InputProblems
        For an empirical law, or one that could not be fitted.
    """
    name = canonical_law(law) if law else _first(ranking)
    if name not in MECHANISTIC:
        raise argument_error("law", name, ", ".join(MECHANISTIC))
    fit = ranking.fit_of(name)
    if fit is None or not fit.converged:
        raise argument_error("law", name, "a law that could be fitted")
    parts = [kind for kind in _parts(name) if kind not in fit.not_needed]
    lines = (
        ranking_line(ranking, name),
        size_line(observed, name, parts, same),
        stirring_line(observed, name, parts, same),
        energy_line(fit, parts),
    )
    score = _overall(lines)
    return Evidence(name, lines, _verdict(name, lines, score), score)


def _first(ranking: Ranking) -> str:
    if ranking.mechanisms:
        return ranking.mechanisms[0]
    return next((row.law for row in ranking.rows if row.mechanistic), ranking.rows[0].law)


def _parts(law: str) -> tuple[str, ...]:
    terms = law_terms(law)
    return (law,) if terms == ("clock",) else terms


def ranking_line(ranking: Ranking, law: str) -> EvidenceLine:
    """Return what the ranking says of a law."""
    named = ranking.mechanisms
    found = f"named: {', '.join(named)}" if named else "no mechanism named"
    asked = "the only law named"
    if law not in named:
        score: Score = "conflicting" if named else "undetermined"
    else:
        score = "consistent" if len(named) == 1 else "undetermined"
    return EvidenceLine("fit ranking", score, found, asked)


def size_line(
    observed: Sequence[Observed], law: str, parts: Sequence[str], same: dict[str, Any]
) -> EvidenceLine:
    """Return whether the size exponents, fitted free, are those of theory."""
    asked = "; ".join(f"{_words(kind)} {_range(*SIZE_EXPONENTS[kind])}" for kind in parts)
    try:
        fit = fit_tests(observed, law, **{**same, **_freed(law, same)})
    except InputProblems as error:
        return EvidenceLine("size exponent", "undetermined", str(error), asked)
    found = [_parameter(fit, "size_exponent", kind) for kind in parts]
    scores = [_size_score(p, *SIZE_EXPONENTS[kind]) for p, kind in zip(found, parts, strict=True)]
    return EvidenceLine("size exponent", _together(scores), _found(found), asked)


def _freed(law: str, same: dict[str, Any]) -> dict[str, Any]:
    if law_terms(law) == ("clock",):
        return {"free": (*(same.get("free") or ()), "size_exponent")}
    return {"size_exponents": "free"}


def _size_score(parameter: Parameter | None, low: float, high: float) -> Score:
    """Score one exponent: an interval that holds both 1 and 2 tells nothing."""
    if parameter is None or parameter.low is None or parameter.high is None:
        return "undetermined"
    if parameter.high < low or parameter.low > high:
        return "conflicting"
    tells = low < high or not (parameter.low <= 1.0 and parameter.high >= 2.0)
    return "consistent" if tells else "undetermined"


def energy_line(fit: FitResult, parts: Sequence[str]) -> EvidenceLine:
    """Return the bands that the activation energies lie in: a hint only."""
    asked = "; ".join(
        f"{_words(kind)} {'above 40' if kind == 'chemical' else 'below 20'} kJ/mol"
        for kind in parts
    )
    found = [_parameter(fit, "activation_energy", kind) for kind in parts]
    scores = [_energy_score(p, kind) for p, kind in zip(found, parts, strict=True)]
    return EvidenceLine("activation energy", _together(scores), _found(found), asked, True)


def _energy_score(parameter: Parameter | None, kind: str) -> Score:
    if parameter is None or parameter.low is None or parameter.high is None:
        return "undetermined"
    above = parameter.low >= CHEMICAL_ABOVE_kJ_per_mol
    below = parameter.high <= DIFFUSION_BELOW_kJ_per_mol
    if not (above or below):
        return "undetermined"
    return "consistent" if above == (kind == "chemical") else "conflicting"


def stirring_line(
    observed: Sequence[Observed], law: str, parts: Sequence[str], same: dict[str, Any]
) -> EvidenceLine:
    """Return whether the rate answers to stirring as the mechanism asks."""
    film = "film" in parts or "shrinking_film" in parts
    asked = "faster with stirring" if film else "no answer to stirring"
    speeds = {o.stirring_rpm for o in observed if o.stirring_rpm is not None}
    known = all(o.stirring_rpm is not None for o in observed)
    if not known or max(speeds) <= min(speeds) * (1.0 + SAME_SPEED):
        why = "no series at several stirring speeds: the film cannot be excluded"
        return EvidenceLine("stirring", "undetermined", why, asked)
    power, low, high = stirring_power(observed, law, **same)
    found = f"rate with the power {power:.2f} of the speed ({low:.2f} to {high:.2f})"
    return EvidenceLine("stirring", _stirring_score(low, high, film), found, asked)


def _stirring_score(low: float, high: float, film: bool) -> Score:
    if low > 0.0:
        return "consistent" if film else "conflicting"
    if high < LITTLE_STIRRING:
        return "conflicting" if film else "consistent"
    return "undetermined"


def stirring_power(
    observed: Sequence[Observed], law: str, **same: Any
) -> tuple[float, float, float]:
    """Return the power of the stirring speed in the whole rate, and its interval.

    Every time is multiplied by (speed / mean speed)^power, the law fitted again, and the power
    with the smallest sum of squares taken; the interval is by its curvature there.

    Parameters
    ----------
    observed : sequence of Observed
        All with a stirring speed.
    law : str
    **same
        As in ``fit_tests``.

    Raises
    ------
    InputProblems
        Without two different speeds.
    """
    from scipy.optimize import minimize_scalar

    speeds = [o.stirring_rpm for o in observed if o.stirring_rpm]
    if len(speeds) < len(observed) or max(speeds) <= min(speeds) * (1.0 + SAME_SPEED):
        raise argument_error("observed", "one stirring speed", "two or more speeds, all known")
    middle = float(np.exp(np.mean(np.log(speeds))))

    def fitted(power: float) -> FitResult:
        paced = [
            _paced(o, (speed / middle) ** power) for o, speed in zip(observed, speeds, strict=True)
        ]
        return fit_tests(paced, law, **same)

    options = {"xatol": 0.2 * STIRRING_STEP}
    best = minimize_scalar(
        lambda power: fitted(power).sum_of_squares,
        bounds=STIRRING_BOUNDS,
        method="bounded",
        options=options,
    )
    power = float(best.x)
    middle_fit = fitted(power)
    sides = [fitted(power + step).sum_of_squares for step in (-STIRRING_STEP, STIRRING_STEP)]
    bend = (sum(sides) - 2.0 * middle_fit.sum_of_squares) / STIRRING_STEP**2
    if bend <= 0.0:
        return power, -math.inf, math.inf
    estimate = middle_fit.estimate
    sd = math.sqrt(2.0 * estimate.scatter_variance / bend)
    half = estimate.multiplier(middle_fit.level) * sd
    return power, power - half, power + half


def _paced(observed: Observed, factor: float) -> Observed:
    """Return a test with all its times multiplied, and no speed that a fit could answer to."""
    history = observed.history
    if history is not None:
        history = replace(history, time_h=factor * history.time_h)
    return replace(
        observed,
        time_h=factor * observed.time_h,
        row_time_h=factor * observed.row_time_h,
        history=history,
        stirring_rpm=None,
    )


def _parameter(fit: FitResult, stem: str, kind: str) -> Parameter | None:
    clock = law_terms(fit.law_name) == ("clock",)
    name = stem if clock else f"{stem}_{kind}"
    return next((p for p in fit.parameters if p.name == name and p.method != "held"), None)


def _found(parameters: Sequence[Parameter | None]) -> str:
    said = []
    for p in parameters:
        if p is None:
            continue
        ends = ["open" if end is None else f"{end:.3g}" for end in (p.low, p.high)]
        said.append(f"{p.name} {p.value:.3g} ({ends[0]} to {ends[1]})")
    return "; ".join(said) or "not varied in the tests"


def _words(kind: str) -> str:
    return kind.replace("_", " ")


def _range(low: float, high: float) -> str:
    return f"{low:g}" if low == high else f"{low:g} to {high:g}"


def _together(scores: Sequence[Score]) -> Score:
    if "conflicting" in scores:
        return "conflicting"
    return "consistent" if scores and set(scores) == {"consistent"} else "undetermined"


def _overall(lines: Sequence[EvidenceLine]) -> Score:
    firm = [line for line in lines if not line.hint_only]
    if any(line.score == "conflicting" for line in firm):
        return "conflicting"
    agree = [line for line in firm if line.score == "consistent"]
    ranked = any(line.line == "fit ranking" for line in agree)
    return "consistent" if ranked and len(agree) > 1 else "undetermined"


def _verdict(law: str, lines: Sequence[EvidenceLine], score: Score) -> str:
    by_score = {
        one: [line.line for line in lines if line.score == one]
        for one in ("consistent", "conflicting", "undetermined")
    }
    told = "; ".join(f"{one}: {', '.join(names)}" for one, names in by_score.items() if names)
    return f"For {in_words(law)} the evidence is {score} ({told})."
