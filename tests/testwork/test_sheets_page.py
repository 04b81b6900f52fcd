"""docs/reference/sheets.md names every column that is read, table by table."""

from pathlib import Path

import pytest

from leachkin.testwork import closeout_sheet, heads_sheet, readings_sheet, sieves_sheet, tests_sheet

PAGE = Path(__file__).parents[2] / "docs" / "reference" / "sheets.md"


@pytest.mark.parametrize(
    ("name", "module"),
    [
        ("tests", tests_sheet),
        ("readings", readings_sheet),
        ("heads", heads_sheet),
        ("closeout", closeout_sheet),
        ("sieves", sieves_sheet),
    ],
)
def test_every_column_is_documented(name, module):
    section = PAGE.read_text(encoding="utf-8").split(f"\n## {name}\n")[1].split("\n## ")[0]
    headings = [field.heading for field in module.FIELDS]
    headings += [family.heading.format(family.examples[0]) for family in module.FAMILIES]
    assert [h for h in headings if f"`{h}`" not in section] == []
