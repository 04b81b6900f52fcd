"""Damaged sheets end in a message or a result, never in a traceback."""

from pathlib import Path

import numpy as np
import pytest

from leachkin.errors import InputProblems
from leachkin.files import read_sheet
from leachkin.testwork import (
    balance_table,
    explain_balance,
    metal_balance,
    observe,
    read_tests,
    reagent_use,
)

GOOD = Path(__file__).parent / "good"
PIECES = [
    *(",", ";", "\t", "\n", '"', ".", "-", "<", ">", "#REF!", "nil", "1e308", "-1", "0", "298"),
    *("\ufeff", "\x00", "\u00b5", "\\", "=1+1", " ", "B1", "B2", "b 1", "24:00", "1,5", "nan"),
    *("99999999999", "1e-300", "()", "(g/L)", "(oz/t)", "note", "pan", "filtrate", "returned"),
]


def mutated(text, generator):
    """One to three pieces of a text replaced, dropped, doubled or put in."""
    for _ in range(generator.integers(1, 4)):
        if generator.random() < 0.5:
            rows = [row.split(",") for row in text.split("\n")]
            row = rows[generator.integers(len(rows))]
            row[generator.integers(len(row))] = str(generator.choice(PIECES))
            text = "\n".join(",".join(cells) for cells in rows)
            continue
        start = int(generator.integers(len(text) + 1))
        end = start + int(generator.integers(0, 6))
        text = text[:start] + str(generator.choice([*PIECES, text[start:end] * 2])) + text[end:]
    return text


def everything(sheets, settings):
    """All that is done with sheets; a message is an end like any other."""
    tests, problems = read_tests(sheets, settings)
    for test in tests:
        reagent_use(test)
        for analyte in test.solution:
            for work in (metal_balance, observe, explain_balance):
                try:
                    work(test, analyte)
                except InputProblems as error:
                    problems += error.problems
        balance_table([metal_balance(test, analyte) for analyte in test.solution])
    return [str(problem) for problem in problems]


@pytest.mark.parametrize("seed", [pytest.param(s, marks=pytest.mark.slow) for s in range(1, 9)])
def test_mutations(tmp_path, settings, seed):
    generator = np.random.default_rng(seed)
    names = sorted(path.stem for path in GOOD.glob("*.csv"))
    good = {name: read_sheet(f"{name}.csv", GOOD) for name in names}
    for number in range(250):
        name = str(generator.choice(names))
        text = mutated((GOOD / f"{name}.csv").read_text(encoding="utf-8"), generator)
        path = tmp_path / f"{number}.csv"
        path.write_bytes(text.encode())
        try:
            sheets = good | {name: read_sheet(path.name, tmp_path)}
            texts = everything(sheets, settings)
        except InputProblems as error:
            texts = [str(problem) for problem in error.problems]
        except Exception as error:
            raise AssertionError(f"{name}: {text!r}") from error
        assert all(texts)
