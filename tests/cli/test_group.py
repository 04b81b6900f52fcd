"""The group: help, names, exit codes."""

import subprocess
import sys

import pytest

from leachkin.cli.main import _COMMANDS


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
    "name", ["extraction", "fit", "tank", "heap", "cementation", "budget", "arrhenius"]
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


def test_check_reports_a_missing_file_as_its_result(invoke, tmp_path):
    result = invoke("check", f"{tmp_path.as_posix()}/nothing.csv")
    assert result.exit_code == 1
    assert "there is no such file" in result.stdout


@pytest.mark.parametrize("encoding", ["cp1252", "cp437", "latin-1", "ascii"])
def test_a_console_without_a_letter_never_crashes(tmp_path, encoding):
    name = f"{tmp_path.as_posix()}/\u03c4_\u2192.csv"
    run = subprocess.run(
        [sys.executable, "-m", "leachkin", "arrhenius", name],
        capture_output=True,
        env={"PYTHONIOENCODING": encoding, "PYTHONUTF8": "0"},
    )
    assert run.returncode == 1
    assert b"Traceback" not in run.stderr
    assert b"there is no such file" in run.stderr
    if encoding in ("cp1252", "latin-1"):
        assert b"?_?.csv" in run.stderr


@pytest.mark.skipif(sys.platform == "win32", reason="a POSIX pipe")
def test_a_reader_that_leaves_early_is_no_crash():
    run = subprocess.run(
        f"{sys.executable} -m leachkin verify | head -n 1",
        shell=True,
        capture_output=True,
        text=True,
    )
    assert "Traceback" not in run.stderr
    assert "Exception ignored" not in run.stderr
