"""The folder of results: JSON, page, workbook, CSV tables and SVG figures, whole or not at all."""

from __future__ import annotations

import re
from collections.abc import Iterable
from contextlib import suppress
from pathlib import Path

from leachkin.campaign import CampaignResult
from leachkin.files import whole_directory, write_csv, write_json, write_text, write_xlsx
from leachkin.report.chosen_figures import report_figures
from leachkin.report.page import report_page
from leachkin.result_table import ResultTable

#: A folder without this file is never replaced.
MARKER = "results.json"


def write_report(result: CampaignResult, out: str | Path, overwrite: bool = False) -> Path:
    """Write the results of a run and return the folder.

    Parameters
    ----------
    result : CampaignResult
    out : str or Path
        New or empty. Written as ``OUT.part`` and renamed once.
    overwrite : bool
        Replace a folder of earlier results.

    Returns
    -------
    Path
        The folder, with ``results.json``, ``report.html``, ``results.xlsx``, ``tables/*.csv`` and
        ``figures/*.svg``.

    Raises
    ------
    InputProblems
        If the folder is not empty, or is not one of earlier results.
    """
    tables = result.tables()
    figures = report_figures(result)
    page = report_page(result, figures)
    with whole_directory(out, overwrite, marker=MARKER) as part:
        write_json(result.to_dict(), part / MARKER)
        write_text(page, part / "report.html")
        write_xlsx(tables, part / "results.xlsx")
        for folder in ("tables", "figures"):
            (part / folder).mkdir()
        for table, name in zip(tables, file_names(tables), strict=True):
            write_csv(table, part / "tables" / f"{name}.csv")
        for figure in figures:
            write_text(figure.svg, part / "figures" / f"{figure.name}.svg")
    return Path(out)


def file_names(tables: Iterable[ResultTable]) -> list[str]:
    """Return a file name for each table: plain letters, no two the same."""
    names: list[str] = []
    for table in tables:
        base = re.sub(r"[^A-Za-z0-9]+", "_", table.name).strip("_") or "table"
        name, count = base, 2
        while name in names:
            name, count = f"{base}_{count}", count + 1
        names.append(name)
    return names


class _OnlyChecked(Exception):  # noqa: N818 - never leaves this module
    """Raised to give a folder up again that was only asked for."""


def check_out(out: str | Path, overwrite: bool = False) -> None:
    """Raise InputProblems now if :func:`write_report` could not use a folder later.

    Parameters
    ----------
    out : str or Path
    overwrite : bool
    """
    with suppress(_OnlyChecked), whole_directory(out, overwrite, marker=MARKER):
        raise _OnlyChecked
