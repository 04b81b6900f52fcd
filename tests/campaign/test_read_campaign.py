import pytest

from leachkin.campaign import campaign_file_page, check_campaign, read_campaign
from leachkin.errors import InputProblems

HEAP = """
[heap]
ore_rate = "250000 t/month"
lift_height = "6 m"
bulk_density = "1.65 t/m3"
irrigation = "8 L/h/m2"
cycle = "120 d"
temperature = "17 degC"
feed_reagent = "20 g/L"
[heap.sizes]
gates_gaudin_schuhmann = { top = "19 mm", slope = 0.65 }
"""


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("format = 1", "format = 2", r"campaign.toml, row 1.*format.*2"),
        ("[precision]", "[precison]", r"campaign.toml.*unknown table 'precison'.*precision"),
        ('title = "Four', 'titel = "Four', r"row 3.*unknown key 'titel'.*did you mean title"),
        ('tail = "3 %"', 'tail = "3"', r"row 13.*3"),
        ('tail = "3 %"', 'tail = "3 m"', r"row 13"),
        ('"25 degC"', '"25 mm"', r"fit.reference_temperature.*does not measure"),
        ('"readings.csv"', "'sub\\readings.csv'", r"backslash.*sub/readings.csv"),
        ('"readings.csv"', '"reading.csv"', r"no such file.*did you mean readings.csv"),
        ('["ash_layer", "chemical"]', '["ash_layr"]', r"unknown.*ash_layr.*ash_layer"),
        ('[campaign]\ntitle = "Four bottles"\n', '[campaign\ntitle = "x"\n', r"row 2"),
    ],
)
def test_what_has_no_meaning_stops(edit, old, new, message):
    path = edit("campaign.toml", old, new)
    with pytest.raises(InputProblems) as stopped:
        read_campaign(path)
    assert pytest.importorskip("re").search(message, str(stopped.value)), str(stopped.value)


@pytest.mark.parametrize(
    ("content", "message"),
    [(b"", "the file is empty"), (b"\x00\x01\xff\xfe" * 50, "not.*text|UTF-8")],
)
def test_a_file_that_is_no_sheet_stops(folder, content, message):
    (folder / "readings.csv").write_bytes(content)
    with pytest.raises(InputProblems, match=message):
        read_campaign(folder / "campaign.toml")


def test_an_exclusion_needs_a_reason_and_a_name(folder):
    with (folder / "campaign.toml").open("a") as file:
        file.write('[[exclude]]\ntest = "P1"\ntime = "3 h"\n')
    with pytest.raises(InputProblems, match="reason") as stopped:
        read_campaign(folder / "campaign.toml")
    assert "by" in str(stopped.value)


def test_defaults_of_the_heap_are_registered(folder):
    with (folder / "campaign.toml").open("a") as file:
        file.write(HEAP)
    from leachkin.campaign import run_campaign

    campaign = read_campaign(folder / "campaign.toml")
    result = run_campaign(campaign, "heap", draws=0)
    keys = {row.key for row in result.assumed}
    assert {"heap.contacted_fraction", "heap.delivery_factor", "heap.cure"} <= keys


def test_overrides_are_checked_as_the_file_is(folder):
    path = folder / "campaign.toml"
    changed = read_campaign(path, {"fit.reference_temperature": "30 degC"})
    assert changed.settings.get("fit.reference_temperature") == pytest.approx(303.15)
    with pytest.raises(InputProblems, match="has no unit"):
        read_campaign(path, {"fit.reference_temperature": "30"})
    with pytest.raises(InputProblems, match="did you mean"):
        read_campaign(path, {"fit.reference_temprature": "30 degC"})


def test_every_input_is_hashed(folder):
    campaign = read_campaign(folder / "campaign.toml")
    names = {name.split("/")[-1] for name in campaign.inputs}
    assert names == {"campaign.toml", "tests.csv", "readings.csv", "closeout.csv", "heads.csv"}
    assert all(len(digest) == 64 for digest in campaign.inputs.values())


def test_check_counts_tests_and_gives_lines_to_type(edit):
    path = edit("closeout.csv", "Q2,residue", "Q1,residue")
    outcome = check_campaign(path)
    assert len(outcome.tests) == 4
    assert "4 tests" in outcome.summary
    assert outcome.counts["running"] == 1
    edit("readings.csv", "P1,1,20,", "P1,1,20,-")
    outcome = check_campaign(path)
    assert outcome.stops == 0
    assert any('write "<' in line for line in outcome.paste)


def test_the_reference_page_is_that_of_the_schema():
    from pathlib import Path

    page = Path(__file__).parents[2] / "docs" / "reference" / "campaign_file.md"
    assert page.read_text(encoding="utf-8").strip() == campaign_file_page().strip()
