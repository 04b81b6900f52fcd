"""Tests of need: which further term the data ask for, each fitted and judged on its own."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from leachkin.errors import InputProblems
from leachkin.kinetics.fit_result import FitResult, Parameter
from leachkin.kinetics.fit_tests import fit_tests
from leachkin.kinetics.nested import NestedTest, nested_test
from leachkin.problems import unknown_name
from leachkin.result_table import Column, ResultTable
from leachkin.testwork import Observed

#: A term is needed where chance gives its gain less often than this, whatever term it is: each
#: chance counts as many times as terms were tried (Bonferroni).
NEEDED_CHANCE = 0.01

#: What each term changes in the fit, and what stands for it where the data ask for it.
TERM_OPTIONS: dict[str, dict[str, Any]] = {
    "lag": {"terms": ("lag",)},
    "soluble": {"terms": ("soluble",)},
    "fade": {"terms": ("fade",)},
    "loss": {"terms": ("loss",)},
    "slow fraction": {"slow_law": "chemical"},
    "reagent order": {"reagent_order": "free"},
    "size exponents": {"size_exponents": "free"},
    "ultimate by test": {"ultimate": "by test"},
}
MEANING = {
    "lag": "nothing dissolves at first: wetting, or a film to break",
    "soluble": "a part dissolves at once: soluble salts, or metal in the water",
    "fade": "the rate falls faster than the law allows: passivation",
    "loss": "metal leaves the solution again: precipitation or preg-robbing",
    "slow fraction": "a second, slower mineral or size",
    "reagent order": "the order in the reagent is not the one held",
    "size exponents": "the sizes do not scale by theory",
    "ultimate by test": "charges differ in what can be leached, beyond their size",
}
#: Parameters that belong to a term.
_OWN = {
    "lag": ("lag",),
    "soluble": ("soluble_share",),
    "fade": ("fade",),
    "loss": ("loss_capacity", "loss_rate"),
    "slow fraction": ("slow_share",),
    "reagent order": ("reagent_order",),
}


@dataclass(frozen=True)
class TermTest:
    """Whether the data ask for one further term.

    Attributes
    ----------
    term : str
    test : NestedTest or None
        None where the larger law could not be fitted; ``note`` says why.
    needed : bool
    aicc_gain : float
        Fall of AICc: where several terms are needed, the one with the largest explains most.
    parameters : tuple of Parameter
        Of the term, as fitted.
    fit : FitResult or None
    note : str
    """

    term: str
    test: NestedTest | None
    needed: bool = False
    aicc_gain: float = 0.0
    parameters: tuple[Parameter, ...] = ()
    fit: FitResult | None = None
    note: str = ""


def tests_of_need(
    observed: Sequence[Observed],
    law: str,
    tried: Sequence[str] | None = None,
    **same: Any,
) -> tuple[TermTest, ...]:
    """Return, for each term, whether the data ask for it beside a law.

    Parameters
    ----------
    observed : sequence of Observed
    law : str
    tried : sequence of str, optional
        Of :data:`TERM_OPTIONS`; all that the tests can tell about where left out.
    **same
        As in ``fit_tests``, for both fits; a term that stands there already is not tried.

    Returns
    -------
    tuple of TermTest
        In the order asked for. Needed where chance gives such a gain less than once in 100 among
        all terms tried; the test is conservative for a term that cannot be negative.

    Raises
    ------
    InputProblems
        For an unknown term, or where the law itself cannot be fitted.
    """
    asked = list(TERM_OPTIONS if tried is None else tried)
    for term in asked:
        if term not in TERM_OPTIONS:
            raise InputProblems([unknown_name("term", term, TERM_OPTIONS, column="terms")])
    base = fit_tests(observed, law, **same)
    found = [_tested(observed, law, term, base, same) for term in asked]
    judged = sum(one.test is not None for one in found)
    return tuple(replace(one, needed=_needed(one, judged)) for one in found)


def need_table(tests: Sequence[TermTest]) -> ResultTable:
    """Return tests of need as a table."""
    columns = (
        Column("term", "Further term"),
        Column("needed", "Needed"),
        Column("chance", "Chance of its gain", digits=2),
        Column("gain", "Fall of AICc", digits=3),
        Column("kind", "Test"),
        Column("value", "Fitted"),
        Column("meaning", "Would mean"),
        Column("note", "Note"),
    )
    return ResultTable.from_records("tests_of_need", columns, map(_record, tests))


def _record(one: TermTest) -> dict[str, Any]:
    return {
        "term": one.term,
        "needed": one.needed,
        "chance": None if one.test is None else one.test.chance,
        "gain": None if one.test is None else one.aicc_gain,
        "kind": "" if one.test is None else one.test.kind,
        "value": "; ".join(f"{p.name} {p.value:.3g} {p.unit}".rstrip() for p in one.parameters),
        "meaning": MEANING[one.term],
        "note": one.note,
    }


def _tested(
    observed: Sequence[Observed],
    law: str,
    term: str,
    base: FitResult,
    same: Mapping[str, Any],
) -> TermTest:
    wider = _wider(term, same)
    if wider is None:
        return TermTest(term, None, note="already in the law")
    try:
        fit = fit_tests(observed, law, **wider)
    except InputProblems as error:
        return TermTest(term, None, note=str(error))
    if not base.converged:
        return TermTest(term, None, fit=fit, note=base.message)
    if not fit.converged:
        gain = base.aicc - fit.aicc  # a minimum further down could only add to it
        what = "would gain" if gain > 0.0 else "no gain so far"
        return TermTest(term, None, False, gain, (), fit, f"{what}, but {fit.message}")
    if len(fit.names) <= len(base.names):
        return TermTest(term, None, note="the tests do not vary what it needs")
    found = nested_test(fit, base)
    stem = "ultimate" if term == "ultimate by test" else "size_exponent"
    names = _OWN.get(term) or tuple(n for n in fit.names if n.startswith(stem))
    parameters = tuple(p for p in fit.parameters if p.name in names)
    gain = base.aicc - fit.aicc
    return TermTest(term, found, False, gain, parameters, fit)


def _needed(one: TermTest, judged: int) -> bool:
    """Return whether chance gives the best of so many terms such a gain less than once in 100."""
    return one.test is not None and one.test.chance * judged < NEEDED_CHANCE


def _wider(term: str, same: Mapping[str, Any]) -> dict[str, Any] | None:
    """Return the options with a term added, None where it is there."""
    added = TERM_OPTIONS[term]
    if "terms" in added:
        present = tuple(same.get("terms", ()))
        if set(added["terms"]) <= set(present):
            return None
        return {**same, "terms": (*present, *added["terms"])}
    name, value = next(iter(added.items()))
    if same.get(name) == value or (name == "slow_law" and same.get(name) is not None):
        return None
    return {**same, name: value}
