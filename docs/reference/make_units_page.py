"""Write units.md from the table of spellings:  python docs/reference/make_units_page.py"""

from itertools import groupby
from pathlib import Path

from leachkin.tables import read_table

PAGE = Path(__file__).with_name("units.md")
TOP = """# Units that are read

Made from `leachkin/tables/data/unit_spellings.csv` by `make_units_page.py`.

A unit stands in the heading of a column, in round or square brackets (`Cu (mg/L)`), or behind a
number in a settings file (`irrigation = "8 L/h/m2"`). Spaces inside a unit, the two micro signs,
superscripts and degree signs make no difference; capitals do. A spelling that is not in this list
is refused with the nearest one, and one with more than one meaning is asked back.
"""


def page():
    """Return the text of the page."""
    rows = read_table("unit_spellings").rows
    order = list(dict.fromkeys(row.text("kind") for row in rows))
    ordered = sorted(rows, key=lambda row: order.index(row.text("kind")))
    parts = [TOP]
    for kind, group in groupby(ordered, key=lambda row: row.text("kind")):
        known = list(group)
        plain = [f"`{r.text('spelling')}`" for r in known if r.text("ambiguous") == "no"]
        parts.append(f"\n## {kind.capitalize()}\n\n{', '.join(plain)}\n")
        asked = [r for r in known if r.text("ambiguous") == "yes"]
        if asked:
            parts.append("\n| asked back | write instead |\n|---|---|\n")
            parts += [f"| `{r.text('spelling')}` | {r.text('instead')} |\n" for r in asked]
        remarks = [r for r in known if r.text("ambiguous") == "no" and r.text("instead")]
        if remarks:
            parts.append("\n")
            parts += [f"- `{r.text('spelling')}`: {r.text('instead')}\n" for r in remarks]
    return "".join(parts)


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8", newline="\n")
