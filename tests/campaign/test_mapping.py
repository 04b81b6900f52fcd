"""Headings of a laboratory's own, mapped once and reused."""

import pytest

from leachkin.campaign import check_campaign, read_campaign
from leachkin.errors import InputProblems

THEIRS = {"Cu (g/L)": "Cu_ICP_corr", "aliquot (mL)": "Vol taken", "test": "Roll"}
MAPPING = """[readings]
"cu_icp_corr" = "Cu (g/L)"
"Vol  taken" = "aliquot (mL)"
"Roll" = "test"
"""


@pytest.fixture
def theirs(folder):
    text = (folder / "readings.csv").read_text()
    for ours, name in THEIRS.items():
        text = text.replace(ours, name, 1)
    (folder / "readings.csv").write_text(text)
    return folder


def values(campaign):
    return {t.name: t.solution["Cu"].value.tolist() for t in campaign.tests}


def test_a_mapping_in_the_campaign_file(theirs, sheet_texts, tmp_path):
    path = theirs / "campaign.toml"
    with pytest.raises(InputProblems, match="unknown column 'Cu_ICP_corr'"):
        read_campaign(path)
    path.write_text(path.read_text() + MAPPING.replace("[readings]", "[mapping.readings]"))
    campaign = read_campaign(path)
    (theirs / "readings.csv").write_text(sheet_texts["readings.csv"])
    path.write_text(sheet_texts["campaign.toml"])
    assert values(campaign) == values(read_campaign(path))
    assert "3 headings are read by the mapping" in "\n".join(map(str, campaign.problems))


def test_a_mapping_file_is_reused_and_the_campaign_wins(theirs):
    (theirs / "lab.toml").write_text(MAPPING.replace('"Cu (g/L)"', '"Cu (mg/L)"'))
    path = theirs / "campaign.toml"
    text = path.read_text() + '[mapping]\nfile = "lab.toml"\n'
    path.write_text(text)
    one = values(read_campaign(path))["P1"][0]
    path.write_text(text + '[mapping.readings]\nCu_ICP_corr = "Cu (g/L)"\n')
    assert values(read_campaign(path))["P1"][0] == pytest.approx(1000.0 * one)


def test_a_column_is_left_out(theirs):
    path = theirs / "campaign.toml"
    text = MAPPING.replace("[readings]", "[mapping.readings]").replace('"Cu (g/L)"', '"ignore"')
    path.write_text(path.read_text() + text)
    assert read_campaign(path).tests[0].solution == {}


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("[reading]\nA = 'test'\n", "lab.toml, row 1: unknown table 'reading'.*readings"),
        ("[readings]\nA = 3\n", "lab.toml, row 1.*no table of headings"),
        ("[readings\n", "lab.toml, row 1.*not TOML"),
        (None, "no such file"),
    ],
)
def test_wrong_mapping_files(folder, content, message):
    if content is not None:
        (folder / "lab.toml").write_text(content)
    path = folder / "campaign.toml"
    path.write_text(path.read_text() + '[mapping]\nfile = "lab.toml"\n')
    with pytest.raises(InputProblems, match=message):
        read_campaign(path)


def test_a_mapping_that_fits_nothing_is_asked(folder):
    path = folder / "campaign.toml"
    path.write_text(path.read_text() + '[mapping.readings]\n"Cu gL" = "Cu (g/L)"\n')
    (question,) = [p for p in check_campaign(path).problems if p.level == "ask"]
    assert "no heading of the mapping is in this sheet, as 'cu gl'" in question.found
    assert "did you mean 'Cu (g/L)'" in question.try_this


def test_a_title_above_the_headings_is_left_out(folder):
    path = folder / "readings.csv"
    path.write_text("Job 4711 of the laboratory\n\n" + path.read_text())
    campaign = read_campaign(folder / "campaign.toml")
    assert len(campaign.tests[0].time_h) == 6
    told = "\n".join(str(p) for p in campaign.problems)
    assert "row 1 ('Job 4711 of the laboratory') above the headings is left out" in told
