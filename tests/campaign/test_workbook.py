"""One workbook as a campaign: a settings sheet, tables or bench sheets on tabs, no TOML."""

import csv
import io

import openpyxl
import pytest
from click.testing import CliRunner

from leachkin.campaign import check_campaign, read_campaign, run_campaign
from leachkin.cli.main import main
from leachkin.errors import InputProblems

SETTINGS = [
    ("key", "value", "unit"),
    ("campaign.title", "Four bottles", None),
    ("campaign.metals", "Cu", None),
    ("campaign.reagent", "H2SO4", None),
    ("[precision]", None, None),
    ("solution", 1.5, "%"),
    ("tail", "3 %", None),
    ("head", 2, "%"),
    ("residue", 0.3, "%"),
    (None, None, None),
    ("fit.laws", "ash_layer, chemical", None),
    ("fit.reference_temperature", 25, "degC"),
    ("fit.reference_size", 1.416, "mm"),
    ("fit.reference_reagent", 20, "g/L"),
    ("fit.reagent_order", 1, None),
    ("campaign.prepared_by", None, None),
]


def number(cell):
    try:
        return float(cell)
    except ValueError:
        return cell or None


@pytest.fixture
def book(sheet_texts):
    """A workbook with the tables of the campaign and its settings."""
    made = openpyxl.Workbook()
    made.active.title = "settings"
    for row in SETTINGS:
        made.active.append(row)
    for name in ("tests", "readings", "heads", "closeout"):
        sheet = made.create_sheet(name)
        for row in csv.reader(io.StringIO(sheet_texts[f"{name}.csv"])):
            sheet.append([number(cell) for cell in row])
    return made


def saved(book, tmp_path):
    path = tmp_path / "job.xlsx"
    book.save(path)
    return path


def test_a_workbook_gives_what_the_campaign_file_gives(book, folder, tmp_path):
    one = read_campaign(saved(book, tmp_path))
    other = read_campaign(folder / "campaign.toml")
    assert one.title == other.title
    assert {k: s.value for k, s in one.settings.values.items() if not k.startswith("tables")} == {
        k: s.value for k, s in other.settings.values.items() if not k.startswith("tables")
    }
    results = [run_campaign(c, "fit", draws=0) for c in (one, other)]
    laws = [r.kinetics["oxide/Cu"].fit for r in results]
    assert laws[0].sum_of_squares == pytest.approx(laws[1].sum_of_squares, rel=1e-9)
    assert list(one.inputs) == ["job.xlsx"]


def test_ranges_and_tables_of_many(book, tmp_path):
    sheet = book["settings"]
    sheet["D1"], sheet["E1"], sheet["F1"], sheet["G1"] = "low", "high", "source", "by"
    heap = {"ore_rate": ("250000", "t/month"), "lift_height": (6, "m"), "cycle": (120, "d"),
            "bulk_density": (1.65, "t/m3"), "irrigation": (8, "L/h/m2"),
            "temperature": (17, "degC"), "feed_reagent": (20, "g/L")}  # fmt: skip
    for key, (value, unit) in heap.items():
        sheet.append([f"heap.{key}", value, unit])
    sheet.append(["heap.contacted_fraction", 0.85, None, 0.75, 0.95, "judgement", "A. B."])
    sheet.append(["heap.sizes.gates_gaudin_schuhmann.top", 19, "mm"])
    sheet.append(["heap.sizes.gates_gaudin_schuhmann.class_edges_mm", "19; 9.5; 2.36; 0.05"])
    exclude = book.create_sheet("exclude")
    exclude.append(["test", "time", "reason", "by"])
    exclude.append(["P1", "3 h", "spilled", "A. B."])
    prices = book.create_sheet("budget.prices")
    prices.append(["reagent", "price", "purity", "date", "delivered"])
    prices.append(["H2SO4", 120, "98 %", "2026-11-01", "yes"])
    sheet.append(["budget.currency", "USD"])
    campaign = read_campaign(saved(book, tmp_path))
    setting = campaign.settings.values["heap.contacted_fraction"]
    assert (setting.low, setting.high, setting.by) == (0.75, 0.95, "A. B.")
    edges = campaign.settings.get("heap.sizes.gates_gaudin_schuhmann.class_edges_mm")
    assert edges == (19.0, 9.5, 2.36, 0.05)
    assert campaign.settings.named["budget.prices"]["H2SO4"]["price"].value == 120.0
    (group,) = campaign.settings.repeated["exclude"]
    assert group["reason"].value == "spilled"


@pytest.mark.parametrize(
    ("row", "message"),
    [
        (("fit.lawss", "chemical", None), r"job.xlsx#settings, row 17.*unknown key 'lawss'"),
        (("heat.lift", 3, "m"), r"row 17.*unknown table 'heat'"),
        (("title", "x", None), r"row 17.*names no table"),
        (("fit.reference_size", "big", None), r"row 17|row 13"),
        (("precision.tail", 3, None), r"has no unit|'3'"),
    ],
)
def test_wrong_settings_are_told_by_row(book, tmp_path, row, message):
    sheet = book["settings"]
    sheet["A5"], sheet["A6"], sheet["A7"] = None, "precision.solution", "note"
    sheet["A8"], sheet["A9"] = "precision.head", "precision.residue"
    sheet.append(row)
    if row[0] == "title":
        sheet["A7"] = None
    with pytest.raises(InputProblems, match=message):
        read_campaign(saved(book, tmp_path))


def bench(sheet, name, readings):
    sheet.append(["Test no", name, None, "Sample", "oxide"])
    sheet.append(["Charge g (dry)", 500, None, "Soln mL", 1000])
    sheet.append(["T \u00b0C", 25, None, "Size", "-1.70+1.18 mm"])
    sheet.append(["Start H2SO4 g/L", 20, None, "Aliquots", "replaced by reagent solution"])
    sheet.append(["Head Cu %", 0.68])
    sheet.append([])
    sheet.append(["Time h", "Aliquot mL", "Cu g/L"])
    for row in readings:
        sheet.append(row)
    sheet.append([])
    sheet.append(["Residue g", 485])
    sheet.append(["Tail Cu %", 0.11])


@pytest.fixture
def bench_book():
    made = openpyxl.Workbook()
    made.active.title = "B1"
    rows = [(1, 20, 0.9), (3, 20, 1.4), (8, 20, 2.0), (16, 20, 2.4), (30, 20, 2.6), (60, 20, 2.7)]
    bench(made.active, "B1", rows)
    other = [(time, aliquot, round(0.97 * copper, 3)) for time, aliquot, copper in rows]
    bench(made.create_sheet("B2"), "B2", other)
    return made


def test_bench_sheets_alone_are_read_and_the_metal_is_asked(bench_book, tmp_path):
    path = saved(bench_book, tmp_path)
    campaign = read_campaign(path)
    assert [test.name for test in campaign.tests] == ["B1", "B2"]
    assert campaign.metals == ("Cu",)
    (question,) = [p for p in campaign.problems if p.level == "ask"]
    assert "there are no settings: metals Cu and reagent H2SO4 are taken" in question.found
    result = CliRunner().invoke(main, ["extraction", str(path)])
    assert result.exit_code == 0, result.output
    assert "B2" in result.stdout


def test_bench_sheets_with_settings(bench_book, tmp_path):
    settings = bench_book.create_sheet("Settings")
    for row in SETTINGS[:5]:
        settings.append(row)
    campaign = read_campaign(saved(bench_book, tmp_path))
    assert [test.name for test in campaign.tests] == ["B1", "B2"]
    assert [p for p in campaign.problems if p.level == "ask"] == []


def test_a_bench_sheet_as_csv(bench_book, tmp_path):
    path = tmp_path / "bench.csv"
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file)
        for row in bench_book["B1"].iter_rows(values_only=True):
            writer.writerow(row)
    assert [test.name for test in read_campaign(path).tests] == ["B1"]


def test_bench_sheets_named_in_a_campaign_file(bench_book, tmp_path):
    saved(bench_book, tmp_path)
    path = tmp_path / "campaign.toml"
    text = 'format = 1\n[campaign]\nmetals = ["Cu"]\n[tables]\nbench = "job.xlsx"\n'
    path.write_text(text)
    campaign = read_campaign(path)
    assert [test.name for test in campaign.tests] == ["B1", "B2"]
    assert campaign.settings.get("precision.solution") is not None
    path.write_text(text.replace("job.xlsx", "campaign.toml"))
    with pytest.raises(InputProblems, match="no table of readings was found"):
        read_campaign(path)


def test_a_workbook_of_something_else(tmp_path):
    made = openpyxl.Workbook()
    made.active.append(["a", "b"])
    path = saved(made, tmp_path)
    with pytest.raises(InputProblems, match=r"none of the sheets Sheet is one that is known"):
        read_campaign(path)


def test_check_of_a_workbook_prints_rows_to_paste(bench_book, tmp_path):
    sheet = bench_book["B1"]
    sheet["A5"], sheet["B5"] = "Head Au oz/t", 0.05
    outcome = check_campaign(saved(bench_book, tmp_path))
    assert outcome.settings == ('sheets.ton = "short"',)
    assert outcome.settings_block() == '[sheets]\nton = "short"'
    assert outcome.settings_block(workbook=True) == "sheets.ton\tshort"
    result = CliRunner().invoke(main, ["check", str(tmp_path / "job.xlsx")])
    assert 'To paste into the sheet "settings"' in result.stdout
    assert result.stdout.strip().endswith(outcome.summary)


def test_a_stop_at_opening_leaves_the_rest(edit):
    """One failed formula stops the run and leaves every test to be counted."""
    outcome = check_campaign(edit("readings.csv", "P1,1,20,", "P1,1,20,#REF!\nP1,1.5,20,"))
    assert outcome.stops == 1
    assert len(outcome.tests) == 4
    assert outcome.counts["ready"] == 4
