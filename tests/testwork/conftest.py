"""Sheets for the tests of testwork."""

from pathlib import Path

import pytest

from leachkin.files import read_sheet
from leachkin.testwork import TestworkSettings, read_tests

HERE = Path(__file__).parent


@pytest.fixture
def settings():
    """Precision as a laboratory would state it."""
    return TestworkSettings(
        metals=("Cu",),
        reagent="H2SO4",
        precision={
            "solution": (0.0, 0.015),
            "tail": (0.0, 0.03),
            "head": (0.0, 0.02),
            "residue": (0.0, 0.003),
        },
    )


@pytest.fixture
def read_with(settings):
    """Read the good sheets, some of them replaced by other files; tests by name and problems."""

    def read(replaced=None, without=(), used=settings):
        files = {p.stem: p for p in sorted((HERE / "good").glob("*.csv"))} | (replaced or {})
        sheets = {
            name: read_sheet(path.name, path.parent)
            for name, path in files.items()
            if name not in without
        }
        tests, problems = read_tests(sheets, used)
        opening = [p for sheet in sheets.values() for p in sheet.problems]
        return {test.name: test for test in tests}, [*opening, *problems]

    return read


@pytest.fixture
def read_texts(tmp_path, settings):
    """Read sheets given as text by name; tests by name and problems."""

    def read(used=settings, **texts):
        sheets = {}
        for name, text in texts.items():
            (tmp_path / f"{name}.csv").write_text(text, encoding="utf-8")
            sheets[name] = read_sheet(f"{name}.csv", tmp_path)
        tests, problems = read_tests(sheets, used)
        return {test.name: test for test in tests}, list(problems)

    return read
