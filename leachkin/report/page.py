"""The page: one HTML file that needs nothing else."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from importlib import resources
from typing import Any

from leachkin.campaign import CampaignResult
from leachkin.hazards import GENERAL_CAUTION
from leachkin.report.figures.style import ReportFigure
from leachkin.report.first_page import first_page
from leachkin.report.render import render_table
from leachkin.report.sections import Section, first_tables, sections
from leachkin.report.words import scope_line
from leachkin.result_table import ResultTable
from leachkin.tables import source_citation

#: A table of so many rows stays on one printed page.
_SHORT = 16


@dataclass(frozen=True)
class _ShownTable:
    """A table as HTML."""

    html: str
    short: bool


@dataclass(frozen=True)
class _Shown:
    """A section with its tables as HTML."""

    key: str
    title: str
    text: tuple[str, ...]
    figures: tuple[ReportFigure, ...]
    tables: tuple[_ShownTable, ...]

    @property
    def open_figures(self) -> list[ReportFigure]:
        """Those that everybody sees."""
        return [figure for figure in self.figures if not figure.folded]

    @property
    def folded_figures(self) -> list[ReportFigure]:
        """Those for who checks the fit."""
        return [figure for figure in self.figures if figure.folded]


def report_page(result: CampaignResult, figures: Sequence[ReportFigure]) -> str:
    """Return the report as one HTML page with everything in it.

    Parameters
    ----------
    result : CampaignResult
    figures : sequence of ReportFigure

    Returns
    -------
    str
        No script, no link to anything outside; whatever the user typed is escaped.
    """
    from jinja2 import Environment, StrictUndefined
    from markupsafe import Markup

    folder = resources.files("leachkin.report").joinpath("templates")
    environment = Environment(
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    template = environment.from_string(folder.joinpath("report.html.j2").read_text("utf-8"))
    style = Markup(folder.joinpath("report.css").read_text("utf-8"))
    return template.render(page=_page(result, figures), style=style)


def _page(result: CampaignResult, figures: Sequence[ReportFigure]) -> dict[str, Any]:
    first = first_page(result)
    run = result.run
    return {
        **vars(first),
        "title": result.title,
        "signatures": [{"role": role, "name": name} for role, name in first.signatures],
        "first_tables": _as_html(first_tables(result)),
        "sections": [_shown(section) for section in sections(result, figures)],
        "caution": GENERAL_CAUTION,
        "scope": scope_line(result),
        "version": run.version,
        "seed": run.seed,
        "options": [
            (name, value) for name, value in run.options.items() if value not in (None, {})
        ],
        "inputs": sorted(run.inputs.items()),
        "sources": [(key, source_citation(key)) for key in sorted(run.sources)],
    }


def _shown(section: Section) -> _Shown:
    from markupsafe import Markup

    figures = tuple(replace(f, svg=Markup(f.svg)) for f in section.figures)
    tables = tuple(_as_html(section.tables))
    return _Shown(section.key, section.title, section.text, figures, tables)


def _as_html(tables: Iterable[ResultTable]) -> list[_ShownTable]:
    """Tables as HTML; the renderer has escaped every cell."""
    from markupsafe import Markup

    return [
        _ShownTable(Markup(render_table(table, "html")), len(table.rows) <= _SHORT)
        for table in tables
    ]
