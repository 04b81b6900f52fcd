"""A template, filled in as a person would, runs as it is."""

import openpyxl
import pytest
from click.testing import CliRunner

from leachkin.campaign import (
    TEMPLATE_KINDS,
    check_campaign,
    read_campaign,
    run_campaign,
    write_template_workbook,
)
from leachkin.cli.main import main
from leachkin.cli.template import KINDS
from leachkin.errors import InputProblems

SHARES = {25: (0.22, 0.38, 0.55, 0.68, 0.77, 0.81), 45: (0.33, 0.53, 0.70, 0.78, 0.82, 0.83)}
TIMES = (1, 3, 8, 16, 30, 60)
STAGES = {
    "bottle-rolls": ("balances", "kinetics"),
    "copper-heap": ("balances", "kinetics", "heap", "cementation", "budget"),
    "gold-tanks": ("balances", "kinetics", "tank", "cementation", "budget"),
    "acid-tanks": ("balances", "kinetics", "tank", "budget"),
}


def filled(path, kind):
    """Every example in the settings taken as the value, four tests in the tables."""
    book = openpyxl.load_workbook(path)
    settings = book["settings"]
    for row in settings.iter_rows(min_row=2):
        row[1].value = 2 if row[0].value == "heap.cure" else row[8].value  # no gangue here
    one = TEMPLATE_KINDS[kind]
    metals = [metal.strip() for metal in one.metals.split(",")]
    gold = kind == "gold-tanks"
    head = 1.85 if gold else 0.68  # g/t or per cent
    per_L = head * (0.5 if gold else 5.0)  # mg/L or g/L when all of 500 g is in 1 L
    free = f"free {one.reagent} (g/L)"
    for name, celsius in (("P1", 25), ("P2", 25), ("Q1", 45), ("Q2", 45)):
        size = 75 if gold else "-1.7+1.18"
        add(book["tests"], {
            "test": name, "domain": "oxide", "kind": one.test_kind, "dry solids (g)": 500,
            "solution (mL)": 1000, "size (mm)": size, "P80 (um)": size,
            "temperature (degC)": celsius, f"start {one.reagent} (g/L)": 20,
            "aliquots": "not replaced",
        })  # fmt: skip
        for number, (time, share) in enumerate(zip(TIMES, SHARES[celsius], strict=True)):
            share *= 1.0 + 0.01 * ((number * 7 + int(name[1]) + celsius) % 3 - 1)
            assays = {f"{m} ({one.solution})": round(per_L * share, 4) for m in metals}
            add(book["readings"], {"test": name, "time (h)": time, "aliquot (mL)": 0.001,
                                   free: 20, **assays})  # fmt: skip
        left = head * (1.0 - SHARES[celsius][-1]) * 500 / 485
        grades = {f"{m} ({one.grade})": round(left, 5) for m in metals}
        add(book["closeout"], {"test": name, "product": "residue", "mass (g)": 485, **grades})
    for replicate in (1, 2):
        grades = {f"{m} ({one.grade})": head for m in metals}
        add(book["heads"], {"domain": "oxide", "replicate": replicate, **grades})
    book.save(path)


def add(sheet, record):
    sheet.append([record.get(cell.value) for cell in sheet[1]])


@pytest.mark.parametrize("kind", sorted(TEMPLATE_KINDS))
def test_an_empty_template_asks_nothing(tmp_path, kind):
    path = write_template_workbook(tmp_path / "job", kind)
    outcome = check_campaign(path)
    assert [str(p) for p in outcome.problems if p.level != "note"] == []
    assert any("left out as an example" in p.found for p in outcome.problems)


@pytest.mark.parametrize("kind", sorted(TEMPLATE_KINDS))
def test_a_filled_template_runs(tmp_path, kind):
    path = write_template_workbook(tmp_path, kind)
    filled(path, kind)
    campaign = read_campaign(path)
    questions = {p.paste for p in campaign.problems if p.level == "ask"}
    assert questions <= {"sheets.size_slope = 0.65"}, [str(p) for p in campaign.problems]
    result = run_campaign(campaign, draws=0)
    assert [test.state for test in campaign.tests] == (
        ["waiting for an answer"] if questions else ["ready"]
    ) * 4
    assert [name for name in STAGES[kind] if not getattr(result, name)] == []


def test_lists_and_notes_are_there(tmp_path):
    book = openpyxl.load_workbook(write_template_workbook(tmp_path, "copper-heap"))
    assert book.sheetnames == ["notes", "settings", "tests", "readings", "heads", "closeout"]
    lists = {str(v.sqref): v.formula1 for v in book["tests"].data_validations.dataValidation}
    assert any("not replaced" in formula for formula in lists.values())
    assert any("scrap iron" in v.formula1 for v in book["settings"].data_validations.dataValidation)
    assert book["tests"]["D1"].comment.text.startswith("Dry, not as received")
    assert book["tests"]["A2"].font.italic and not book["tests"]["A1"].font.italic


def test_the_same_template_twice_is_the_same_file(tmp_path):
    one = write_template_workbook(tmp_path / "a", "gold-tanks").read_bytes()
    assert write_template_workbook(tmp_path / "b", "gold-tanks").read_bytes() == one


def test_wrong_use(tmp_path):
    write_template_workbook(tmp_path, "bottle-rolls")
    with pytest.raises(InputProblems, match="there is such a file already"):
        write_template_workbook(tmp_path, "bottle-rolls")
    with pytest.raises(InputProblems, match="unknown kind 'columns'"):
        write_template_workbook(tmp_path, "columns")
    (tmp_path / "file").write_text("")
    with pytest.raises(InputProblems, match="there is such a file already"):
        write_template_workbook(tmp_path / "file", "bottle-rolls")


def test_the_command(tmp_path):
    assert set(KINDS) == set(TEMPLATE_KINDS)
    result = CliRunner().invoke(main, ["template", str(tmp_path / "new"), "--kind", "acid-tanks"])
    assert result.exit_code == 0, result.output
    assert result.stdout.strip().endswith("new/acid-tanks.xlsx")
    assert CliRunner().invoke(main, ["template", str(tmp_path), "--kind", "x"]).exit_code == 2
