"""Stage commands on small campaigns: tables, what-ifs, JSON, exit codes, nothing half written."""

import json
import re

import pytest

from leachkin.report import read_results


def test_tank_prints_the_train(invoke, zinc):
    """Four tanks of 15 min; values worked out for this case by survival of the summed exposure."""
    result = invoke("tank", zinc, "--draws", 0)
    assert result.exit_code == 0
    for row in ("61.00    23.16", "78.83    13.85", "85.27    10.49", "87.80     9.17"):
        assert row in result.stdout
    assert "FROM PRINT" in result.stdout
    assert "assumed, not measured: 6 values" in result.stderr
    assert "next: leachkin budget" in result.stderr


def test_a_key_of_the_stage_may_be_short(invoke, zinc):
    warm = invoke("tank", zinc, "--draws", 0, "--set", "temperature=65 degC").stdout
    assert warm == invoke("tank", zinc, "--draws", 0, "--set", "tank.temperature=65 degC").stdout
    assert "88.84" in warm


def test_vary_gives_one_row_a_combination(invoke, zinc):
    words = ("tank", zinc, "--draws", 0, "--vary", "temperature=35,50,65 degC")
    rows = json.loads(invoke(*words, "--json").stdout)
    assert [row["tank.temperature"] for row in rows] == ["35 degC", "50 degC", "65 degC"]
    extracted = [row["tank_extraction"] for row in rows]
    assert extracted == sorted(extracted)
    both = json.loads(invoke(*words, "--vary", "feed_reagent=55,70 g/L", "--json").stdout)
    assert len(both) == 6
    table = invoke(*words)
    assert table.exit_code == 0
    assert "87.80" in table.stdout


def test_json_is_results_json(invoke, zinc):
    data = json.loads(invoke("tank", zinc, "--draws", 0, "--json").stdout)
    assert data["schema"] == 1
    assert data["heap"] is None
    assert data["tank"]["extraction"]["value"][-1] == pytest.approx(0.8780, rel=0, abs=5e-5)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("heap",), r"there is no table \[heap\]"),
        (("tank", "--set", "tmperature=65 degC"), "did you mean temperature"),
        (("tank", "--set", "temperature=65"), "has no unit"),
        (("tank", "--set", "temperature=warm"), "not a number"),
        (("tank", "--vary", "feed_reagnt=1,2 g/L"), "did you mean feed_reagent"),
    ],
)
def test_what_has_no_meaning_stops_with_the_reason(invoke, zinc, words, message):
    result = invoke(words[0], zinc, *words[1:])
    assert result.exit_code == 1
    assert "Traceback" not in result.output
    assert result.stdout == ""
    assert re.search(message, result.stderr), result.stderr


def test_extraction_and_its_explanation(invoke, bench):
    table = invoke("extraction", bench)
    assert table.exit_code == 0
    assert "B1" in table.stdout
    assert "Closure" in table.stdout
    assert "next: leachkin fit" in table.stderr
    lines = invoke("extraction", bench, "--explain", "B1", "--metal", "Cu").stdout.splitlines()
    assert 8 <= len(lines) <= 24
    assert "Calculated head" in "\n".join(lines)
    assert "Reconciled extraction" in "\n".join(lines)


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (("--explain", "b1"), 1, "did you mean B1"),
        (("--explain", "B1", "--metal", "Zn"), 1, "Zn"),
        (("--metal", "Cu"), 2, "--metal goes with --explain TEST"),
    ],
)
def test_wrong_explanations(invoke, bench, words, code, message):
    result = invoke("extraction", bench, *words)
    assert result.exit_code == code
    assert message in result.stderr


def test_extraction_given_directly_has_no_balance_and_that_is_said(invoke, tmp_path):
    path = tmp_path / "curve.csv"
    path.write_text("time (h),extraction (%)\n1,10\n2,20\n4,35\n8,55\n")
    result = invoke("extraction", path)
    assert result.exit_code == 1
    assert "nothing for leachkin extraction" in result.stderr
    assert "leachkin fit" in result.stderr


def test_check_counts_and_ends_with_what_to_type(invoke, bench):
    good = invoke("check", bench)
    assert good.exit_code == 0
    assert "2 tests: 2 ready" in good.stdout
    path = bench.parent / "readings.csv"
    path.write_text(path.read_text().replace("B1,6,20,20,0.9", "B1,6,20,20,high"))
    bad = invoke("check", bench)
    assert bad.exit_code == 1
    assert 'readings.csv, row 3, column "Cu (g/L)"' in bad.stdout
    assert "'high'" in bad.stdout


def test_fit_of_a_campaign_says_verdict_and_parameters(invoke, bench):
    result = invoke("fit", bench, "--draws", 0)
    assert result.exit_code == 0
    assert "tau_" in result.stdout
    assert "Behind the" in result.stdout
    assert "oxide/Cu: " in result.stderr


def test_run_writes_a_report_and_says_where(invoke, zinc, tmp_path):
    out = tmp_path / "out"
    result = invoke("run", zinc, "--out", out, "--draws", 0)
    assert result.exit_code == 0
    assert "87.8" in result.stdout
    assert f"open {out.as_posix()}/report.html" in result.stderr
    assert read_results(out)["run"]["options"]["draws"] == 0


def test_a_folder_in_use_is_refused_before_anything_runs(invoke, zinc, tmp_path, monkeypatch):
    def never(*words, **settings):
        raise AssertionError("nothing may run")

    monkeypatch.setattr("leachkin.campaign.run_campaign", never)
    result = invoke("run", zinc, "--out", tmp_path)
    assert result.exit_code == 1
    assert "the folder is not empty" in result.stderr
    assert not list(tmp_path.glob("*.part"))


def test_a_disk_that_is_full_is_a_message(invoke, zinc, tmp_path, monkeypatch):
    def full(tables, path):
        raise OSError(28, "No space left on device", str(path))

    monkeypatch.setattr("leachkin.report.write.write_xlsx", full)
    result = invoke("run", zinc, "--out", tmp_path / "out", "--draws", 0)
    assert result.exit_code == 1
    assert "No space left on device" in result.stderr
    assert sorted(p.name for p in tmp_path.iterdir()) == ["campaign.toml"]
