"""One result table as terminal text, CSV or HTML."""

from __future__ import annotations

import csv
import html
import io
import textwrap
from collections.abc import Sequence
from typing import Literal

from leachkin.problems import argument_error
from leachkin.report.numbers import format_column, is_numeric
from leachkin.result_table import ResultTable

Form = Literal["terminal", "csv", "html"]
_GAP = "  "
_SMALLEST_TEXT_COLUMN = 12
_NUMBER_WIDTH = 10
_MANY_COLUMNS = 8
_SHORT_TEXT = 12


def render_table(table: ResultTable, form: Form = "terminal", width: int | None = None) -> str:
    """Return a table as text.

    Parameters
    ----------
    table : ResultTable
    form : "terminal", "csv" or "html"
        Terminal text is plain and of fixed width, so that it can be copied; CSV keeps every
        digit; HTML is one ``<table>`` with everything escaped.
    width : int, optional
        For the terminal: wrap columns of text to about so many characters. Numbers are never
        cut. None for no wrapping.

    Returns
    -------
    str

    Raises
    ------
    InputProblems
        If the form is unknown.
    """
    if form == "terminal":
        return _terminal(table, width)
    if form == "csv":
        return _csv(table)
    if form == "html":
        return _html(table)
    raise argument_error("form", repr(form), "terminal, csv, html", "terminal")


def cells_as_text(table: ResultTable, empty: str = "-") -> list[list[str]]:
    """Return the rows of a table as text, each column with its significant digits.

    Where the unit stands in a column of its own, each number gets its own decimals.
    """
    mixed = any(column.key == "unit" for column in table.columns)
    columns = [
        format_column(column, [row[i] for row in table.rows], empty, one_by_one=mixed)
        for i, column in enumerate(table.columns)
    ]
    return [list(row) for row in zip(*columns, strict=True)]


def numeric_columns(table: ResultTable) -> list[bool]:
    """Return for each column whether it holds numbers, to be set to the right."""
    return [is_numeric([row[i] for row in table.rows]) for i in range(len(table.columns))]


def _terminal(table: ResultTable, width: int | None) -> str:
    numeric = numeric_columns(table)
    heads = [
        [column.heading, f"({column.unit})" if column.unit else ""] for column in table.columns
    ]
    body = cells_as_text(table)
    widths = _widths(heads, body, numeric, width)
    lines = [table_title(table), *_caption_lines(table, width), ""]
    lines += _lines(_head_cells(heads, widths), widths, numeric)
    lines.append(_GAP.join("-" * w for w in widths))
    for row in body:
        lines += _lines(
            [_wrapped(text, w) for text, w in zip(row, widths, strict=True)], widths, numeric
        )
    if not body:
        lines.append("(no rows)")
    return "\n".join(line.rstrip() for line in lines) + "\n"


def table_title(table: ResultTable) -> str:
    """Return the name of a table as a title: ``Heap figures``."""
    words = table.name.replace("_", " ").strip()
    return words[:1].upper() + words[1:]


def _caption_lines(table: ResultTable, width: int | None) -> list[str]:
    return textwrap.wrap(table.caption, max(width or 100, 40), break_on_hyphens=False)


def _widths(
    heads: list[list[str]], body: list[list[str]], numeric: list[bool], width: int | None
) -> list[int]:
    """Natural width of each column, text columns narrowed in turn to reach the asked width."""
    needed = []
    for i, head in enumerate(heads):
        cells = [row[i] for row in body]
        longest_word = max((len(word) for part in head for word in part.split()), default=1)
        floor = max([longest_word, *(len(c) for c in cells if numeric[i])])
        natural = max([floor, len(head[0]), len(head[1]), *(len(c) for c in cells)])
        needed.append(min(natural, max(floor, _NUMBER_WIDTH)) if numeric[i] else natural)
    if width is None:
        return needed
    spare = sum(needed) + len(_GAP) * (len(needed) - 1) - width
    while spare > 0:
        texts = [i for i, n in enumerate(numeric) if not n and needed[i] > _SMALLEST_TEXT_COLUMN]
        if not texts:
            break
        widest = max(texts, key=lambda i: needed[i])
        needed[widest] -= 1
        spare -= 1
    return needed


def _head_cells(heads: list[list[str]], widths: list[int]) -> list[list[str]]:
    """Wrapped headings with their units, set to the foot."""
    stacks = []
    for (name, unit), width in zip(heads, widths, strict=True):
        stacks.append([*_wrapped(name, width), *(_wrapped(unit, width) if unit else [])])
    tallest = max(len(stack) for stack in stacks)
    return [[""] * (tallest - len(stack)) + stack for stack in stacks]


def _wrapped(text: str, width: int) -> list[str]:
    return textwrap.wrap(" ".join(text.split()), max(width, 1), break_on_hyphens=False) or [""]


def _lines(cells: Sequence[Sequence[str]], widths: list[int], numeric: list[bool]) -> list[str]:
    tallest = max(len(cell) for cell in cells)
    lines = []
    for level in range(tallest):
        parts = []
        for cell, width, right in zip(cells, widths, numeric, strict=True):
            text = cell[level] if level < len(cell) else ""
            parts.append(text.rjust(width) if right else text.ljust(width))
        lines.append(_GAP.join(parts))
    return lines


def _csv(table: ResultTable) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow([column.title for column in table.columns])
    writer.writerows(["" if cell is None else cell for cell in row] for row in table.rows)
    return out.getvalue()


def _html(table: ResultTable) -> str:
    numeric = numeric_columns(table)
    parts = ['<table class="many">' if len(table.columns) > _MANY_COLUMNS else "<table>"]
    below = f"<span>{html.escape(table.caption)}</span>" if table.caption else ""
    parts.append(f"<caption>{html.escape(table_title(table))}{below}</caption>")
    parts.append("<thead><tr>" + "".join(_html_head(table, numeric)) + "</tr></thead>")
    parts.append("<tbody>")
    for row in cells_as_text(table, empty="\u2013"):
        cells = zip(row, numeric, strict=True)
        parts.append("<tr>" + "".join(_html_cell("td", text, n) for text, n in cells) + "</tr>")
    parts.append("</tbody></table>")
    return "\n".join(parts) + "\n"


def _html_head(table: ResultTable, numeric: list[bool]) -> list[str]:
    heads = []
    for column, right in zip(table.columns, numeric, strict=True):
        unit = f'<span class="unit">{html.escape(column.unit)}</span>' if column.unit else ""
        attribute = ' class="n"' if right else ""
        heads.append(f'<th scope="col"{attribute}>{html.escape(column.heading)} {unit}</th>')
    return heads


def _html_cell(tag: str, text: str, right: bool) -> str:
    kind = "n" if right else "k" if len(text) <= _SHORT_TEXT else ""
    attribute = f' class="{kind}"' if kind else ""
    return f"<{tag}{attribute}>{html.escape(text)}</{tag}>"
