"""What-ifs: one row a value, and the same figures as a run of its own."""

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.campaign import read_campaign, run_campaign, what_if
from leachkin.errors import InputProblems

FILE = Path(__file__).parent / "true_constants.toml"


@pytest.fixture(scope="module")
def lifts():
    vary = {"lift_height": ["4", "6", "8 m"]}
    return what_if(FILE, "heap", vary=vary, set={"heap.cycle": "60 d"}, draws=0)


def test_one_row_a_value_with_the_unit_of_the_last(lifts):
    assert lifts.column("heap.lift_height") == ["4 m", "6 m", "8 m"]


def test_solution_per_tonne_goes_with_one_over_the_lift(lifts):
    # 8 L/h/m2 over 60 d on a column of lift * 1.65 t/m3
    applied = 0.008 * 24.0 * 60.0 / (np.array([4.0, 6.0, 8.0]) * 1.65)
    assert_allclose(np.array(lifts.column("m3_per_t"), float), applied, rtol=1e-12)
    extracted = np.array(lifts.column("extracted"), float)
    assert np.all(np.diff(extracted) < 0.0)
    assert_allclose(extracted[1], 66.02, rtol=0, atol=0.05)


def test_a_key_without_table_is_that_of_the_stage():
    vary = {"ferric": ["0", "1", "4 g/L"]}
    table = what_if(FILE, "cementation", vary=vary, set={"heap.cycle": "20 d"}, draws=0)
    assert table.column("cementation.ferric") == ["0 g/L", "1 g/L", "4 g/L"]


def test_the_caption_names_stage_and_key(lifts):
    assert lifts.caption == "heap, varied: heap.lift_height"


def test_every_combination_has_its_row():
    vary = {"cementation.ferric": ["0 g/L", "1 g/L"], "cementation.recovery": ["90 %", "95 %"]}
    table = what_if(FILE, "cementation", vary=vary, draws=0)
    pairs = list(zip(*(table.column(key) for key in vary), strict=True))
    assert pairs == [("0 g/L", "90 %"), ("0 g/L", "95 %"), ("1 g/L", "90 %"), ("1 g/L", "95 %")]
    net = np.array(table.column("precipitant_net"), float)
    # 1 g of ferric iron takes half a gram of iron: Fe + 2 Fe3+ = 3 Fe2+
    assert_allclose(net[2:] - net[:2], 0.5, rtol=1e-9)


def test_a_fit_kept_between_rows_gives_what_a_fresh_run_gives(folder, heap_text):
    with (folder / "campaign.toml").open("a") as file:
        file.write(heap_text)
    path = folder / "campaign.toml"
    cures = ("0 kg/t", "2 kg/t")
    table = what_if(path, "heap", vary={"heap.cure": cures}, draws=8)
    for position, cure in enumerate(cures):
        heap = run_campaign(read_campaign(path, {"heap.cure": cure}), "heap", draws=8).heap
        for column, value in zip(
            ("extracted", "extracted_low", "extracted_high"),
            (heap.extracted.value, heap.extracted.low, heap.extracted.high),
            strict=True,
        ):
            assert_allclose(table.column(column)[position], 100 * value[-1], rtol=1e-12)


@pytest.mark.parametrize("cures", [["0 kg/t", "500 kg/t"], ["500 kg/t", "0 kg/t"]])
def test_a_row_that_cannot_be_done_says_why_and_spoils_no_other(cures):
    table = what_if(FILE, "heap", vary={"heap.cure": cures}, set={"heap.cycle": "60 d"}, draws=0)
    rows = {row["heap.cure"]: row for row in table.to_records()}
    assert rows["500 kg/t"]["extracted"] is None
    assert rows["500 kg/t"]["not_done"].startswith("heap not done: ")
    assert rows["0 kg/t"]["not_done"] is None
    assert_allclose(rows["0 kg/t"]["extracted"], 61.71, rtol=0, atol=0.05)


def test_progress_counts_the_rows():
    seen = []
    what_if(
        FILE,
        "cementation",
        vary={"cementation.ferric": ["0 g/L", "1 g/L"]},
        set={"heap.cycle": "20 d"},
        draws=0,
        progress=lambda done, of: seen.append((done, of)),
    )
    assert seen == [(1, 2), (2, 2)]


@pytest.mark.parametrize(
    ("vary", "message"),
    [
        ({"heap.lift_hight": ["4 m"]}, "unknown key 'lift_hight'.*did you mean lift_height"),
        ({"heep.lift_height": ["4 m"]}, "unknown table 'heep'.*heap"),
        ({"heap.lift_height": ["4", "6"]}, "'4' has no unit"),
        ({"heap.lift_height": ["4 kg", "6 kg"]}, "does not measure"),
        ({"heap.lift_height": ["4 m", "-6 m"]}, "-6 m.*above 0 m"),
        ({"heap.lift_height": []}, "0 combinations.*1 to 200"),
        (
            {"heap.cycle": [f"{i} d" for i in range(1, 16)], "heap.cure": ["1 kg/t"] * 14},
            "210 combinations.*1 to 200.*fewer values",
        ),
    ],
)
def test_what_has_no_meaning_stops(vary, message):
    with pytest.raises(InputProblems, match=message):
        what_if(FILE, "heap", vary=vary, set={"heap.cycle": "20 d"}, draws=0)


def with_two_gangues(edit, folder):
    """Split the bottles over two domains; the second takes up more acid beyond its copper."""
    for bottle in ("P2", "Q2"):
        edit("tests.csv", f"{bottle},oxide", f"{bottle},mixed")
    edit("heads.csv", "oxide,0.68", "oxide,0.68\nmixed,0.68")
    header, *rows = (folder / "readings.csv").read_text().splitlines()
    lines = [f"{header},free H2SO4 (g/L)"]
    for row in rows:
        copper, gangue = float(row.rsplit(",", 1)[1]), 2.0 if row[1] == "1" else 5.0
        lines.append(f"{row},{20.0 - 1.543 * copper - gangue:.4f}")
    (folder / "readings.csv").write_text("\n".join([*lines, ""]))


@pytest.mark.slow
def test_another_domain_has_its_own_gangue(edit, folder, heap_text):
    with_two_gangues(edit, folder)
    path = edit("campaign.toml", '["ash_layer", "chemical"]\n', '["ash_layer"]\n')
    with path.open("a") as file:
        file.write(heap_text)
    domains = ["oxide", "mixed"]
    table = what_if(path, "heap", vary={"heap.domain": domains}, draws=0)
    for domain, taken in zip(domains, table.column("reagent_taken"), strict=True):
        alone = run_campaign(read_campaign(path, {"heap.domain": domain}), "heap", draws=0)
        assert alone.gangue is not None
        assert_allclose(taken, alone.heap.taken_kg_per_t.value[-1], rtol=1e-12)
    assert table.column("reagent_taken")[1] > table.column("reagent_taken")[0] + 2.0
