"""Every bad input of tests/bad_inputs is told as its table says, by place and in plain words."""

import csv
import re
import shutil
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from leachkin.campaign import check_campaign, read_campaign, run_campaign
from leachkin.cli.main import main

FOLDER = Path(__file__).parents[1] / "bad_inputs"
with (FOLDER / "expected.csv").open(encoding="utf-8") as file:
    EXPECTED = list(csv.DictReader(file))
NAMES = sorted({path.name.split(".")[0] for path in FOLDER.glob("[0-9]*")})


def laid_out(name, folder):
    """The good campaign with the files of one bad input in place of its own."""
    shutil.copytree(FOLDER / "good", folder, dirs_exist_ok=True)
    for path in FOLDER.glob(f"{name}.*"):
        shutil.copy(path, folder / path.name.split(".", 1)[1])
    settings = folder / "campaign.toml"
    if (folder / "sieves.csv").exists():
        text = settings.read_text(encoding="utf-8")
        settings.write_text(text.replace("[tables]\n", '[tables]\nsieves = "sieves.csv"\n'))
    return settings


def told(name, folder):
    """Everything that a user is told, by level or place."""
    path = laid_out(name, folder)
    outcome = check_campaign(path)
    texts = {level: [str(p) for p in outcome.problems if p.level == level]
             for level in ("stop", "ask", "note")}  # fmt: skip
    texts["read"] = [
        f"{t.name} {a} {v:g}" for t in outcome.tests for a, x in t.solution.items() for v in x.value
    ]
    if outcome.stops:
        return texts
    result = run_campaign(read_campaign(path), draws=0)
    texts["ask"] += [str(p) for p in result.problems if p.level == "ask"]
    texts["note"] += [str(p) for p in result.problems if p.level == "note"]
    texts["caution"] = [f"{c.name} {c.state}" for c in result.cautions]
    fits = [stage.fit for stage in result.kinetics.values() if stage.fit is not None]
    texts["fit"] = [warning for fit in fits for warning in fit.warnings]
    texts["result"] = [str(row) for table in result.tables() for row in table.rows]
    texts["result"] += [str(note) for note in result.notes]
    return texts


@pytest.mark.parametrize("name", NAMES)
def test_message(name, tmp_path):
    rows = [row for row in EXPECTED if row["name"] == name]
    assert rows, f"expected.csv has nothing for {name}"
    texts = told(name, tmp_path)
    for row in rows:
        found = texts.get(row["level"], [])
        assert any(re.search(row["message"], text) for text in found), "\n".join(
            [f"{name}, {row['level']}: {row['message']}", *found]
        )


def test_the_table_has_no_row_without_a_file():
    assert {row["name"] for row in EXPECTED} == set(NAMES)


def test_the_good_campaign_is_good(tmp_path):
    outcome = check_campaign(laid_out("none", tmp_path))
    assert outcome.problems == ()


@pytest.mark.parametrize("name", NAMES[::6])
def test_the_command_never_ends_in_a_traceback(name, tmp_path):
    path = str(laid_out(name, tmp_path))
    for command in ("check", "extraction"):
        result = CliRunner().invoke(main, [command, path])
        assert result.exception is None or isinstance(result.exception, SystemExit), result.output
        assert result.exit_code in (0, 1)


PIECES = [
    *(",", ";", "\t", "\n", '"', ".", "-", "<", "#REF!", "nil", "1e308", "-99", "0", "298", "BDL"),
    *("\ufeff", "\x00", "\u00b5", "\\", "=1+1", " ", "B1", "b 1", "24:00", "1,5", "nan", "avg"),
    *("()", "(g/L)", "(oz/t)", "(mesh)", "note", "pan", "EXAMPLE", "Time h", "2026-03-01", "%"),
]


def mutated(text, generator):
    for _ in range(generator.integers(1, 4)):
        start = int(generator.integers(len(text) + 1))
        end = start + int(generator.integers(0, 9))
        text = text[:start] + str(generator.choice([*PIECES, text[start:end] * 2])) + text[end:]
    return text


def mutate_and_check(tmp_path, generator, count):
    names = ["tests.csv", "readings.csv", "heads.csv", "closeout.csv", "campaign.toml"]
    path = laid_out("none", tmp_path)
    good = {name: (tmp_path / name).read_text(encoding="utf-8") for name in names}
    for _ in range(count):
        name = str(generator.choice(names))
        text = mutated(good[name], generator)
        (tmp_path / name).write_bytes(text.encode("utf-8"))
        try:
            outcome = check_campaign(path)
        except Exception as error:
            raise AssertionError(f"{name}: {text!r}") from error
        assert all(str(problem) for problem in outcome.problems)
        (tmp_path / name).write_text(good[name], encoding="utf-8")


def test_some_mutations(tmp_path):
    mutate_and_check(tmp_path, np.random.default_rng(1), 40)


@pytest.mark.study
@pytest.mark.parametrize("seed", range(2, 12))
def test_a_thousand_mutations(tmp_path, seed):
    mutate_and_check(tmp_path, np.random.default_rng(seed), 1000)
