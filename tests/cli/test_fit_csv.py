"""``leachkin fit`` on one CSV of extraction against time."""

import json

import pytest

from leachkin.published_checks.cases import read_data

BY_HAND = 0.995  # h, straightened line through the origin (levenspiel1999, ch. 25 problem)


@pytest.fixture
def csv_of(tmp_path):
    def write(text):
        path = tmp_path / "curve.csv"
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return write


def uo3():
    _, (time, conversion) = read_data("uo3_reduction")
    rows = "".join(f"{t},{x}\n" for t, x in zip(time, conversion, strict=True))
    return f"time (h),conversion (fraction)\n{rows}"


def test_uo3_is_chemical_with_the_fitted_time_beside_the_straightened(invoke, csv_of):
    result = invoke("fit", csv_of(uo3()), "--set", "fit.ultimate=1")
    assert result.exit_code == 0
    assert "Chemical reaction at the core" in result.stderr
    row = next(
        line
        for line in result.stdout[result.stdout.index("DIAGNOSTIC ONLY") :].splitlines()
        if line.startswith("chemical")
    )
    assert [float(word) for word in row.split()[1:4]] == [
        1.036,
        1.0,
        pytest.approx(BY_HAND, abs=5e-4, rel=0),
    ]
    assert "next: leachkin run" in result.stderr


def test_json_of_a_curve_holds_the_ranking(invoke, csv_of):
    data = json.loads(invoke("fit", csv_of(uo3()), "--json").stdout)
    (stage,) = data["kinetics"].values()
    assert stage["law"] == "chemical"
    assert len(stage["ranking"]) > 5


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (b"", "the file is empty"),
        (b"\xff\xfet\x00i", "begins as UTF-16 text"),
        (b"PK\x03\x04zip", "a workbook or a zip archive"),
        ("time (h),extraction\n", "no rows under them"),
        ("time,extraction\n1,0.1\n2,0.2\n3,0.3\n4,0.4\n", "no unit in the heading"),
        ("time (h),result\n1,0.1\n2,0.2\n", "no extraction column"),
        ("time (h),extraction\n1,0.1\n2,abc\n3,0.3\n4,0.5\n", 'row 3, column "extraction": .abc.'),
        ("time (h),extraction\n1,0.1\n5,0.2\n3,0.3\n4,0.5\n", "row 4.*time goes back"),
        ("time (fortnight),extraction\n1,0.1\n2,0.2\n3,0.3\n", "unknown unit 'fortnight'"),
    ],
)
def test_wrong_files_are_told_with_their_place(invoke, csv_of, text, message):
    import re

    result = invoke("fit", csv_of(text))
    assert result.exit_code == 1
    assert "Traceback" not in result.output
    assert result.stdout == ""
    assert re.search(message, result.stderr), result.stderr


def test_a_backslash_in_a_path_is_told(invoke):
    result = invoke("fit", "data\\curve.csv")
    assert result.exit_code == 1
    assert "\\" in result.stderr
    assert "Traceback" not in result.output


@pytest.mark.parametrize(
    ("asked", "words"), [("linearised", "linearised"), ("profile", "profile likelihood")]
)
def test_the_method_of_the_intervals_is_asked_for_and_named(invoke, csv_of, asked, words):
    result = invoke("fit", csv_of(uo3()), "--intervals", asked, "--json")
    assert result.exit_code == 0
    (stage,) = json.loads(result.stdout)["kinetics"].values()
    assert stage["intervals"] == asked
    methods = [p["method"] for p in stage["parameters"] if p["low"] is not None]
    assert methods and all(words in method for method in methods)
    table = invoke("fit", csv_of(uo3()), "--intervals", asked).stdout
    assert words in table


def test_an_unknown_method_of_intervals_is_wrong_usage(invoke, csv_of):
    result = invoke("fit", csv_of(uo3()), "--intervals", "jackknife")
    assert result.exit_code == 2
    assert "linearised" in result.stderr
