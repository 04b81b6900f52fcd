import re

import pytest

from leachkin.campaign import read_campaign, run_campaign
from leachkin.errors import InputProblems

BUDGET = """format = 1
[campaign]
title = "Acid alone"
metals = ["Cu"]
[budget]
currency = "USD"
ore_rate = "1000 t/month"
[budget.consumption]
H2SO4 = "20 kg/t"
[budget.prices.H2SO4]
price = 120.0
purity = "80 %"
date = "2026-11-01"
delivered = true
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
        ('["ash_layer", "chemical"]', "[]", r"row 17.*a list with at least one entry"),
        ("[campaign]", "[tank]", r"no table \[campaign\]"),
        ('"readings.csv"', "'readings.csv\\u0007'", r"backslash"),
        ('[campaign]\ntitle = "Four bottles"\n', '[campaign\ntitle = "x"\n', r"row 2"),
    ],
)
def test_what_has_no_meaning_stops(edit, old, new, message):
    path = edit("campaign.toml", old, new)
    with pytest.raises(InputProblems) as stopped:
        read_campaign(path)
    assert re.search(message, str(stopped.value)), str(stopped.value)


@pytest.mark.parametrize(
    ("content", "message"),
    [(b"", "the file is empty"), (b"\x00\x01\xff\xfe" * 50, "not.*text|UTF-8")],
)
def test_a_file_that_is_no_sheet_stops(folder, content, message):
    (folder / "readings.csv").write_bytes(content)
    with pytest.raises(InputProblems, match=message):
        read_campaign(folder / "campaign.toml")


@pytest.mark.parametrize("missing", ["reason", "by"])
def test_an_exclusion_needs_a_reason_and_a_name(folder, missing):
    path = folder / "campaign.toml"
    row = len(path.read_text().splitlines()) + 1
    given = {"test": "P1", "time": "3 h", "reason": "spilled", "by": "bench chemist (invented)"}
    lines = [f'{key} = "{value}"' for key, value in given.items() if key != missing]
    with path.open("a") as file:
        file.write("\n".join(["[[exclude]]", *lines, ""]))
    with pytest.raises(InputProblems, match=rf"row {row}\b.*exclude.*{missing} is missing"):
        read_campaign(path)


def test_defaults_of_the_heap_are_registered(folder, heap_text):
    with (folder / "campaign.toml").open("a") as file:
        file.write(heap_text)
    result = run_campaign(read_campaign(folder / "campaign.toml"), "heap", draws=0)
    rows = {row.key: row for row in result.assumed}
    for name in ("contacted_fraction", "delivery_factor", "cure"):
        row = rows[f"heap.{name}"]
        assert row.by == "default of the program" and row.why and not row.in_band
    bare = run_campaign(read_campaign(folder / "campaign.toml"), "fit")
    assert not [row.key for row in bare.assumed if row.key.startswith("heap.")]


def test_what_is_given_is_no_assumption(folder):
    keys = {row.key for row in read_campaign(folder / "campaign.toml").assumed}
    assert not keys & {"precision.solution", "precision.tail", "fit.reference_size"}


def test_the_basis_of_a_price_is_registered(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(BUDGET)
    row = {row.key: row for row in read_campaign(path).assumed}["budget.prices.H2SO4.per"]
    assert (row.value, row.by) == ("t", "default of the program")


def test_overrides_are_checked_as_the_file_is(folder):
    path = folder / "campaign.toml"
    changed = read_campaign(path, {"fit.reference_temperature": "30 degC"})
    assert changed.settings.get("fit.reference_temperature") == pytest.approx(303.15)
    with pytest.raises(InputProblems, match="has no unit"):
        read_campaign(path, {"fit.reference_temperature": "30"})
    with pytest.raises(InputProblems, match="--set.*unknown key.*did you mean reference_temp"):
        read_campaign(path, {"fit.reference_temprature": "30 degC"})
    with pytest.raises(InputProblems, match="unknown table 'fot'"):
        read_campaign(path, {"fot.reference_temperature": "30 degC"})
    assert read_campaign(path).settings.get("fit.reference_temperature") == pytest.approx(298.15)


@pytest.mark.parametrize("name", ["H2SO4", '"H2SO4"'])
def test_an_override_may_quote_its_names(tmp_path, name):
    path = tmp_path / "campaign.toml"
    path.write_text(BUDGET)
    campaign = read_campaign(path, {f"budget.prices.{name}.price": "130"})
    assert campaign.settings.named["budget.prices"]["H2SO4"]["price"].value == 130.0


def test_an_override_replaces_value_and_range(folder, heap_text):
    ranged = "contacted_fraction = { value = 0.85, low = 0.7, high = 0.95 }\n[heap.sizes]"
    with (folder / "campaign.toml").open("a") as file:
        file.write(heap_text.replace("[heap.sizes]", ranged))
    path = folder / "campaign.toml"
    assert read_campaign(path).settings.values["heap.contacted_fraction"].has_range
    changed = read_campaign(path, {"heap.contacted_fraction": "80 %"})
    setting = changed.settings.values["heap.contacted_fraction"]
    assert setting.value == pytest.approx(0.8) and not setting.has_range


def test_every_input_is_hashed(folder):
    campaign = read_campaign(folder / "campaign.toml")
    names = {name.split("/")[-1] for name in campaign.inputs}
    assert names == {"campaign.toml", "tests.csv", "readings.csv", "closeout.csv", "heads.csv"}
    assert all(len(digest) == 64 for digest in campaign.inputs.values())
