"""Printing: tables and JSON to stdout, remarks and progress to stderr."""

from __future__ import annotations

import json
import shutil
import sys
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from leachkin.campaign import CampaignResult
    from leachkin.problems import Problem
    from leachkin.result_table import ResultTable


#: Columns of text wrap at about so many characters where stdout is no terminal.
_FILE_WIDTH = 140


def print_tables(tables: Iterable[ResultTable]) -> None:
    """Print tables to stdout; words wrap to the terminal, numbers are never cut."""
    from leachkin.report import render_table

    width = shutil.get_terminal_size().columns if sys.stdout.isatty() else _FILE_WIDTH
    for position, table in enumerate(tables):
        if position:
            click.echo()
        click.echo(render_table(table, "terminal", width), nl=False)


def print_json(data: Any) -> None:
    """Print plain data as JSON to stdout; a number that is not finite is refused."""
    click.echo(json.dumps(data, indent=2, ensure_ascii=False, allow_nan=False))


def remark(text: str) -> None:
    """Print one remark to stderr."""
    click.echo(text, err=True)


def progress_line() -> Callable[[int, int], None] | None:
    """Return a ``(done, total)`` that draws on stderr, None where nobody looks at it."""
    if not sys.stderr.isatty():
        return None

    def show(done: int, total: int) -> None:
        end = "\n" if done >= total else ""
        click.echo(f"\r  {done} of {total} steps", nl=False, err=True)
        if end:
            click.echo(err=True)

    return show


def say_what_was_assumed(result: CampaignResult) -> None:
    """Say on stderr how much was assumed, and what was noticed."""
    if result.assumed:
        from leachkin.report import worst_assumptions

        worst = "; ".join(worst_assumptions(result.assumed))
        count = len(result.assumed)
        values = f"{count} value" + ("s" if count > 1 else "")
        remark(f"assumed, not measured: {values}" + (f": {worst}" if worst else ""))
    else:
        remark("assumed: nothing beyond the sheets and settings.")
    print_problems(result.problems)


def print_problems(problems: Iterable[Problem], *, to_stdout: bool = False) -> None:
    """Print problems, stops first; on stderr unless they are the result."""
    order = {"stop": 0, "ask": 1, "note": 2}
    for problem in sorted(problems, key=lambda problem: order[problem.level]):
        click.echo(f"{problem.level}: {problem}", err=not to_stdout)
