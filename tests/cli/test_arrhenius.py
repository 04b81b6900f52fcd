import json
import re

import pytest
from click.testing import CliRunner

from leachkin.cli.main import main
from leachkin.published_checks.cases import read_data


@pytest.fixture
def arrhenius(tmp_path):
    def call(text, *options):
        path = tmp_path / "rates.csv"
        path.write_text(text, encoding="utf-8")
        return CliRunner().invoke(main, ["arrhenius", str(path), *options])

    return call


def iodide():
    headings, columns = read_data("arrhenius_hydrogen_iodide")
    rows = [",".join(f"{cell:g}" for cell in row) for row in zip(*columns, strict=True)]
    return "\n".join([",".join(headings), *rows])


def test_hydrogen_iodide_gives_the_published_energy(arrhenius):
    result = arrhenius(iodide(), "--json")
    assert result.exit_code == 0
    assert "186.3" in arrhenius(iodide()).stdout
    text = json.dumps(json.loads(result.stdout))
    assert "186.3" in text


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "the file is empty"),
        ("temperature,rate constant\n25,1\n35,2\n45,3\n", "no unit in the heading"),
        ("temperature (degX),rate constant\n25,1\n35,2\n45,3\n", "unknown unit 'degX'"),
        ("temperature (degC),rate\n25,1\n35,2\n", "unknown column 'rate'"),
        ("temperature (degC),remark\n25,1\n35,2\n", "no column 'rate constant'"),
        ("temperature (degC),k\n25,1\n35,high\n45,3\n", "row 3.*'high' is not a number"),
        ("temperature (degC),k\n25,1\n35,\n45,3\n", "row 3.*the cell is empty"),
        ("temperature (degC),k\n25,1\n35,-2\n45,3\n", "row 3.*a rate constant of -2"),
    ],
)
def test_wrong_input_is_told_with_its_place(arrhenius, text, message):
    result = arrhenius(text)
    assert result.exit_code == 1
    assert "Traceback" not in result.output
    assert re.search(message, result.stderr), result.stderr
