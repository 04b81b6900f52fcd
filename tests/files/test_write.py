"""A folder of results is there whole or not at all."""

import json

import numpy as np
import pytest

from leachkin.errors import InputProblems
from leachkin.files import whole_directory, write_csv, write_json, write_text
from leachkin.result_table import Column, ResultTable


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_the_folder_appears_at_the_end(tmp_path):
    out = tmp_path / "deep" / "out"
    with whole_directory(out) as part:
        assert part.name == "out.part"
        write_text("a\r\nb", part / "a.txt")
        assert not out.exists()
    assert (out / "a.txt").read_bytes() == b"a\nb\n"
    assert names(out.parent) == ["out"]


def test_nothing_stays_after_an_error(tmp_path):
    with pytest.raises(RuntimeError, match="broke off"), whole_directory(tmp_path / "out") as part:
        write_text("half", part / "a.txt")
        raise RuntimeError("broke off")
    assert names(tmp_path) == []


def test_a_folder_with_something_in_it_is_kept(tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    with whole_directory(out) as part:  # an empty one may be used
        write_text("1", part / "results.json")
    with pytest.raises(InputProblems, match="not empty.*--overwrite"), whole_directory(out):
        pass
    assert names(tmp_path) == ["out"]
    with whole_directory(out, overwrite=True, marker="results.json") as part:
        write_text("2", part / "results.json")
    assert (out / "results.json").read_text() == "2\n"
    assert names(tmp_path) == ["out"]


def test_an_error_leaves_the_earlier_results(tmp_path):
    out = tmp_path / "out"
    with whole_directory(out) as part:
        write_text("1", part / "results.json")
    with pytest.raises(KeyError), whole_directory(out, overwrite=True):
        raise KeyError("x")
    assert (out / "results.json").read_text() == "1\n"
    assert names(tmp_path) == ["out"]


def refused(message, out, **options):
    with (
        pytest.raises(InputProblems, match=message),
        whole_directory(out, overwrite=True, **options),
    ):
        pass


def test_only_results_are_replaced(tmp_path, monkeypatch):
    out = tmp_path / "sheets"
    out.mkdir()
    (out / "tests.csv").write_text("a")
    refused("no results.json in it", out, marker="results.json")
    refused("holds tests.csv, which was read", out, inputs=[out / "tests.csv"])
    monkeypatch.chdir(out)
    refused("the working folder", ".")
    assert names(tmp_path) == ["sheets"]
    assert names(out) == ["tests.csv"]


def test_files_links_and_roots_are_no_folder(tmp_path):
    (tmp_path / "file").write_text("a")
    refused("a file or a link", tmp_path / "file")
    refused("the root of a drive", "/")


def test_two_runs_do_not_write_one_folder(tmp_path):
    out = tmp_path / "out"
    with whole_directory(out) as part:
        write_text("1", part / "a.txt")
        with pytest.raises(InputProblems, match="another run is writing it"), whole_directory(out):
            pass
    assert names(out) == ["a.txt"]


def test_json_has_plain_numbers(tmp_path):
    write_json({"b": np.array([1.5, 2.0]), "a": (np.float64(0.1), None, "\u00b5")}, tmp_path / "a")
    text = (tmp_path / "a").read_text(encoding="utf-8")
    assert json.loads(text) == {"b": [1.5, 2.0], "a": [0.1, None, "\u00b5"]}
    assert list(json.loads(text)) == ["b", "a"]
    with pytest.raises(ValueError, match=r"heap.pls\[1\]: nan cannot be written"):
        write_json({"heap": {"pls": [1.0, float("nan")]}}, tmp_path / "b")
    with pytest.raises(TypeError, match="heap: object cannot be written"):
        write_json({"heap": object()}, tmp_path / "b")


def test_csv_has_plain_numbers_of_all_digits(tmp_path):
    table = ResultTable("t", (Column("x", "X", "g/L"), Column("y", "Y")), ((np.float64(0.1), 2),))
    write_csv(table, tmp_path / "a.csv")
    assert (tmp_path / "a.csv").read_bytes() == b"X (g/L),Y\n0.1,2\n"
