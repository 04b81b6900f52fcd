"""docs/reference/units.md is what its script makes of the table."""

import runpy
from pathlib import Path

REFERENCE = Path(__file__).parents[2] / "docs" / "reference"


def test_the_page_is_up_to_date():
    page = runpy.run_path(str(REFERENCE / "make_units_page.py"))["page"]()
    written = (REFERENCE / "units.md").read_text(encoding="utf-8")
    assert written == page, "run python docs/reference/make_units_page.py"
    assert "| `oz/t` | ozt/st" in page
