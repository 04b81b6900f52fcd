"""``leachkin``: the group of commands, each loaded when it is called.

Asking for help imports click and nothing heavier: the short texts stand in a static table, and
the command modules import the stages inside their functions.
"""

from __future__ import annotations

import errno
import importlib
import sys
from collections.abc import Sequence
from typing import Any

import click

from leachkin.errors import LeachkinError, nearest_names

_COMMANDS = {
    "run": ("leachkin.cli.run", "Run every stage whose table is there and write the report."),
    "template": ("leachkin.cli.template", "A workbook to fill in."),
    "check": ("leachkin.cli.check", "List every problem with file, row and column."),
    "extraction": ("leachkin.cli.extraction", "Metal balance and extraction of every test."),
    "fit": ("leachkin.cli.fit", "Fit and rank rate laws, with intervals."),
    "tank": ("leachkin.cli.stages", "Extraction and reagent tank by tank."),
    "heap": ("leachkin.cli.stages", "Heap extraction by day, supply against demand."),
    "cementation": ("leachkin.cli.stages", "Scrap iron or zinc dust by sink."),
    "budget": ("leachkin.cli.stages", "Reagents by use, tonnes a month and cost."),
    "next-tests": ("leachkin.cli.next_tests", "Which further tests would tell most."),
    "arrhenius": ("leachkin.cli.arrhenius", "Activation energy from rate constants."),
    "verify": ("leachkin.cli.verify", "Recompute published values beside the print."),
}

_EPILOG = (
    "Results go to stdout, remarks to stderr. Exit code 0: done; 1: stopped, with the reason; "
    "2: wrong usage. A calculation aid: it replaces no site risk assessment and no local code."
)


class Stop(click.ClickException):
    """A known error: every problem on stderr, exit code 1, no traceback."""

    exit_code = 1

    def show(self, file: Any = None) -> None:
        """Print the message to stderr."""
        click.echo(self.message, file=file, err=file is None)


class LazyCommands(click.Group):
    """A group that imports a command only when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 - click's signature
        """Return the names in the order of the work."""
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import and return a command, None if there is no such command."""
        del ctx
        if cmd_name not in _COMMANDS:
            return None
        module = importlib.import_module(_COMMANDS[cmd_name][0])
        command: click.Command = getattr(module, cmd_name.replace("-", "_"))
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the list of commands from the static table, importing none of them."""
        del ctx
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in _COMMANDS.items()])

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Return the command called, or stop with the nearest names."""
        name = args[0]
        if not name.startswith("-") and name not in _COMMANDS:
            near = nearest_names(name, _COMMANDS)
            hint = f" Did you mean {' or '.join(near)}?" if near else ""
            ctx.fail(f"there is no command {name!r}.{hint} See leachkin --help.")
        return super().resolve_command(ctx, args)

    def invoke(self, ctx: click.Context) -> Any:
        """Run a command; a known error becomes a message and exit code 1."""
        try:
            return super().invoke(ctx)
        except LeachkinError as error:
            raise Stop(stop_message(error)) from error
        except OSError as error:
            if error.errno == errno.EPIPE or error.filename is None:
                raise
            raise Stop(f"Stopped.\n  {error.filename}: {error.strerror}") from error

    def main(self, args: Sequence[str] | None = None, *more: Any, **settings: Any) -> Any:
        """Run the program; a console that knows no such letter gets a question mark."""
        _forgive_encoding()
        if not more:
            settings.setdefault("prog_name", "leachkin")
        return super().main(args, *more, **settings)


def stop_message(error: LeachkinError) -> str:
    """Return every problem of an error, one below the other."""
    problems = getattr(error, "problems", None)
    lines = [str(problem) for problem in problems] if problems else [str(error)]
    count = f"{len(lines)} problems" if len(lines) > 1 else "1 problem"
    return "\n".join([f"Stopped: {count}.", *(f"  {line}" for line in lines)])


def _forgive_encoding() -> None:
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="replace")


def _print_version(ctx: click.Context, param: click.Parameter, value: bool) -> None:
    del param
    if not value or ctx.resilient_parsing:
        return
    from leachkin.run_record import program_version

    click.echo(f"leachkin {program_version()}")
    ctx.exit()


@click.command(
    cls=LazyCommands,
    name="leachkin",
    epilog=_EPILOG,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
@click.option(
    "--version",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_print_version,
    help="Show the version and exit.",
)
def main() -> None:
    """From leach test sheets to extraction, kinetics, plant, cementation and a reagent budget."""
