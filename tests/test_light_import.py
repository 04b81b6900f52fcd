"""Importing the package and asking for help load no heavy library."""

import subprocess
import sys

HEAVY = ("numpy", "scipy", "pandas", "lmfit", "matplotlib", "pint", "openpyxl", "jinja2")


def loaded_after(code: str) -> set[str]:
    run = subprocess.run(
        [sys.executable, "-W", "error", "-c", f"{code}\nimport sys; print(*sys.modules)"],
        capture_output=True,
        text=True,
        check=True,
    )
    return {name.split(".")[0] for name in run.stdout.split()}


def test_import_is_light():
    assert not loaded_after("import leachkin; leachkin.LeachkinError") & set(HEAVY)


def test_help_is_light():
    code = (
        "from click.testing import CliRunner\n"
        "from leachkin.cli.main import main\n"
        "assert CliRunner().invoke(main, ['--help']).exit_code == 0\n"
        "assert CliRunner().invoke(main, ['run', '--help']).exit_code == 0\n"
    )
    assert not loaded_after(code) & set(HEAVY)


def test_public_names_are_all_served():
    import leachkin

    for name in leachkin.__all__:
        assert getattr(leachkin, name) is not None
    assert not hasattr(leachkin, "no_such_name")


def test_the_reference_page_lists_the_public_names():
    import re
    from pathlib import Path

    import leachkin

    page = Path(__file__).parent.parent / "docs" / "reference" / "python.md"
    rows = [line.split("|")[1] for line in page.read_text().splitlines() if line.startswith("| `")]
    listed = {name for row in rows for name in re.findall(r"`(\w+)`", row)}
    assert listed == set(leachkin.__all__) - {"__version__"}
