import pickle

import pytest

from leachkin.errors import InputProblems, UnitError, nearest_names
from leachkin.problems import Problem, argument_error, stop_if_any, unknown_name


def test_errors_survive_pickling():
    problem = Problem("a.csv", 3, "Cu (g/L)", "stop", "'x' is not a number", "a number", "2.5")
    error = pickle.loads(pickle.dumps(InputProblems([problem])))
    assert error.problems == (problem,)
    assert str(error) == str(problem)
    unit = pickle.loads(pickle.dumps(UnitError("a", "b", "c", ambiguous=True)))
    assert (unit.found, unit.allowed, unit.try_this, unit.ambiguous) == ("a", "b", "c", True)


def test_a_problem_says_where_what_allowed_and_what_to_try():
    problem = Problem("a.csv", 3, "Cu (g/L)", "stop", "'x' is not a number", "a number", "2.5")
    assert str(problem) == (
        "a.csv, row 3, column \"Cu (g/L)\": 'x' is not a number. Allowed: a number. Try: 2.5"
    )


def test_argument_errors_are_value_errors():
    with pytest.raises(ValueError, match=r"lift_m: -2 m. Allowed: above 0 m"):
        raise argument_error("lift_m", "-2 m", "above 0 m")


def test_only_stops_stop():
    note = Problem("a.csv", 1, "x", "note", "seen")
    stop_if_any([note])
    with pytest.raises(InputProblems, match="unknown column 'tmie'.*did you mean time"):
        stop_if_any([note, unknown_name("column", "tmie", ["time", "pH"])])


def test_nearest_names_ignore_case():
    assert nearest_names("BUDGT", ["budget", "heap"]) == ["budget"]
