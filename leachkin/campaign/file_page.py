"""The reference page of the campaign file, made from the schema so that the two cannot differ."""

from __future__ import annotations

from collections.abc import Iterator

from leachkin.campaign.schema import Key, TableSchema
from leachkin.campaign.schema_tables import SCHEMA

_HEAD = """# The campaign file

`campaign.toml` holds every setting of a campaign; the sheets hold the numbers of the bench. The
first line is `format = 1`. A stage runs if its table is there: bottles only, cementation only and
a budget only are all campaigns. A table or a key that is not on this page stops the run, with its
line and the nearest name.

- A quantity is text with a unit: `"8 L/h/m2"`, `"17 degC"`. A fraction is `0.95` or `"95 %"`.
- Where *range* says yes, `{ value = 0.85, low = 0.75, high = 0.95, source = "...", by = "..." }`
  may stand instead of the value. The range is drawn as a triangle with its peak at the value, and
  goes into the bands of the plant figures.
- A default that a run uses is a row of the assumption register in the report.
- `--set heap.lift_height="8 m"` replaces a value for one run, `--vary heap.lift_height="4 m,6 m"`
  compares values. Both are checked as the file is.

This page is made from the program:
`python -m leachkin.campaign.file_page > docs/reference/campaign_file.md`.
"""


def campaign_file_page() -> str:
    """Return the reference page of the campaign file as Markdown text."""
    parts = [_HEAD, *(_table_text(table) for table in SCHEMA.tables)]
    return "\n".join(parts).rstrip("\n") + "\n"


def _table_text(table: TableSchema) -> str:
    lines = [f"## {_title(table)}", "", table.meaning, ""]
    if table.free is not None:
        lines += [f"Any name = {table.free.meaning}, {_kind(table.free)}.", ""]
    if table.keys:
        lines += ["| key | what | kind | default | range |", "|---|---|---|---|---|"]
        lines += list(_rows(table))
        lines.append("")
    return "\n".join(lines)


def _title(table: TableSchema) -> str:
    if table.repeated:
        return f"`[[{table.path}]]`"
    return f"`[{table.path}.NAME]`" if table.named else f"`[{table.path}]`"


def _rows(table: TableSchema) -> Iterator[str]:
    for key in table.keys:
        cells = (
            f"`{key.name}`",
            key.meaning,
            _kind(key),
            _default(key),
            "yes" if key.ranged else "",
        )
        yield "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"


def _kind(key: Key) -> str:
    unit = f" in {key.unit} or what converts to it" if key.unit not in ("", "1") else ""
    choices = f": {', '.join(key.choices)}" if key.choices else ""
    return f"{key.kind}{choices}{unit}"


def _default(key: Key) -> str:
    if key.required:
        return "required"
    if key.default is None:
        return ""
    reason = f" ({key.why})" if key.why else ""
    return f"`{key.default}`{reason}"


if __name__ == "__main__":
    import sys

    sys.stdout.write(campaign_file_page())
