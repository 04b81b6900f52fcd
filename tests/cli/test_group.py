"""The group: help, names, exit codes."""

import subprocess
import sys

import pytest
from click.testing import CliRunner

from leachkin.cli.main import _COMMANDS, main


@pytest.fixture
def invoke():
    return lambda *words: CliRunner().invoke(main, list(words))


def test_help_lists_what_exists_and_nothing_else(invoke):
    result = invoke("--help")
    assert result.exit_code == 0
    for name in _COMMANDS:
        assert f"\n  {name} " in result.stdout
    assert "NotImplemented" not in result.stdout


@pytest.mark.parametrize("name", list(_COMMANDS))
def test_every_command_has_help(invoke, name):
    result = invoke(name, "--help")
    assert result.exit_code == 0
    assert result.stdout.startswith("Usage: ")
    assert "Error" not in result.output


def test_version(invoke):
    result = invoke("--version")
    assert result.exit_code == 0
    assert result.stdout.startswith("leachkin ")


def test_an_unknown_command_is_wrong_usage_and_names_the_nearest(invoke):
    result = invoke("budgt", "x.toml")
    assert result.exit_code == 2
    assert "there is no command 'budgt'. Did you mean budget?" in result.stderr


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("heap", "x.toml", "--set", "lift"), "is not KEY=VALUE"),
        (("heap", "x.toml", "--vary", "a.b=1,,2"), "an empty value between commas"),
        (("heap", "x.toml", "--level", "95"), "0.5<=x<=0.999"),
        (("heap", "x.toml", "--draws", "-1"), "x>=0"),
        (("heap",), "Missing argument 'CAMPAIGN'"),
        (("run", "x.toml"), "Missing option '--out'"),
    ],
)
def test_wrong_usage_is_exit_2(invoke, words, message):
    result = invoke(*words)
    assert result.exit_code == 2
    assert message in result.stderr
    assert result.stdout == ""


@pytest.mark.parametrize(
    "name", ["check", "extraction", "fit", "tank", "heap", "cementation", "budget", "arrhenius"]
)
def test_a_file_that_is_not_there_is_exit_1_with_a_message(invoke, tmp_path, name):
    result = invoke(name, f"{tmp_path.as_posix()}/nothing.csv")
    assert result.exit_code == 1
    assert "Stopped: 1 problem." in result.stderr
    assert "there is no such file" in result.stderr
    assert "Traceback" not in result.output
    assert result.stdout == ""


def test_a_broken_program_is_not_hidden(invoke, monkeypatch):
    monkeypatch.setattr("leachkin.published_checks.verify", lambda: 1 / 0)
    assert isinstance(invoke("verify").exception, ZeroDivisionError)


def test_an_ascii_console_gets_question_marks_not_a_traceback(tmp_path):
    name = f"{tmp_path.as_posix()}/\u03bcg_\u00b0.csv"
    run = subprocess.run(
        [sys.executable, "-m", "leachkin", "arrhenius", name],
        capture_output=True,
        text=True,
        env={"PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"},
    )
    assert run.returncode == 1
    assert "Traceback" not in run.stderr
    assert "?g_?.csv" in run.stderr
