"""Which intervals a campaign gives: the method asked for, what stands in for it, what is said."""

import json
import sys
from dataclasses import replace

import numpy as np
import pytest

from leachkin.campaign import read_campaign, run_campaign
from leachkin.campaign.stage_intervals import with_intervals
from leachkin.errors import InputProblems

NEEDS_EMCEE = "emcee is not installed: pip install 'leachkin[posterior]'"
HOURS = (1, 2, 5, 10, 20, 40)


@pytest.fixture(scope="module")
def file(tmp_path_factory):
    """Eight tests of plain extraction under chemical control, 25 and 45 degC, two sizes."""
    generator = np.random.default_rng(12)
    lines = ["test,time (h),extraction (%),temperature (degC),size (mm)"]
    for mm in (2.0, 6.0):
        for celsius, tau in ((25, 30.0), (45, 12.0)):
            for repeat in (1, 2):
                for hour in HOURS:
                    X = 1 - (1 - min(hour / (tau * mm / 2.0), 1.0)) ** 3
                    E = 85 * X + 1.0 * generator.standard_normal()
                    lines.append(
                        f"{mm:g}-{celsius}-{repeat},{hour},{max(E, 0):.2f},{celsius},{mm:g}"
                    )
    path = tmp_path_factory.mktemp("intervals") / "rolls.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def result_of(file, **settings):
    named = {f"fit.{name}": value for name, value in settings.items()}
    return run_campaign(read_campaign(file, {"fit.laws": "chemical", **named}), "fit", draws=0)


def stage_of(result):
    (stage,) = result.kinetics.values()
    return stage


@pytest.fixture(scope="module")
def plain(file):
    return result_of(file)


def test_profile_is_the_default_and_no_assumption(plain):
    stage = stage_of(plain)
    assert stage.intervals == "profile"
    assert stage.fit.parameter("tau_chemical").method == "profile likelihood"
    assert not any("intervals" in row.key for row in plain.assumed)


@pytest.mark.parametrize(
    ("asked", "words"), [("linearised", "linearised"), ("bootstrap", "bootstrap of 8 groups")]
)
@pytest.mark.slow
def test_the_method_asked_for_stands_beside_every_interval(file, asked, words):
    stage = stage_of(result_of(file, intervals=asked))
    assert stage.intervals == asked
    found = [p for p in stage.fit.parameters if p.low is not None and "head" not in p.name]
    assert found and all(p.method.startswith(words) for p in found)


def test_the_energy_beside_the_two_steps_has_the_same_interval(plain):
    stage = stage_of(plain)
    name = "activation_energy_chemical"
    assert stage.two_step.whole.parameter(name) == stage.fit.parameter(name)
    assert stage.diagnostics.arrhenius[0].shared == stage.fit.parameter(name)


@pytest.mark.slow
def test_posterior_draws_make_the_bands(file, plain):
    pytest.importorskip("emcee", reason=NEEDS_EMCEE)
    result = result_of(file, intervals="posterior")
    stage = stage_of(result)
    assert stage.fit.sampled is not None
    drawn = stage.fit.draw(50, 1)
    assert set(map(float, drawn.resistances[0].ln_tau)) <= set(
        map(float, stage.fit.sampled.draws[:, 0])
    )
    said = json.loads(json.dumps(result.to_dict()))["kinetics"]["ore/metal"]
    assert said["intervals"] == "posterior"
    assert said["posterior"]["long_enough"] is stage.fit.sampled.long_enough
    assert 0 < said["posterior"]["acceptance"] < 1
    assert stage_of(plain).fit.sampled is None
    again = stage_of(result_of(file, intervals="posterior"))
    assert np.array_equal(again.fit.sampled.draws, stage.fit.sampled.draws)


def test_without_the_package_profile_stands_instead_and_the_install_line_is_said(file, monkeypatch):
    monkeypatch.setitem(sys.modules, "emcee", None)
    result = result_of(file, intervals="posterior")
    stage = stage_of(result)
    assert stage.intervals == "profile"
    assert stage.fit.parameter("tau_chemical").method == "profile likelihood"
    (problem,) = [p for p in result.problems if p.column == "fit.intervals"]
    assert problem.level == "ask"
    assert "python -m pip install 'leachkin[posterior]'" in problem.found


def test_an_unknown_method_stops_with_the_choices(file):
    with pytest.raises(InputProblems, match="'linearised', 'profile', 'bootstrap', 'posterior'"):
        result_of(file, intervals="jackknife")


def test_results_json_holds_methods_remarks_and_diagnostics(plain):
    said = json.loads(json.dumps(plain.to_dict(), allow_nan=False))["kinetics"]["ore/metal"]
    assert said["intervals"] == "profile" and said["posterior"] is None
    assert said["alternatives"] == []
    tau = next(p for p in said["parameters"] if p["name"] == "tau_chemical")
    assert tau["method"] == "profile likelihood" and "remark" in tau
    found = said["diagnostics"]
    assert len(found["rows"]) == 8 * len(HOURS)
    assert sum(row["leverage"] for row in found["rows"]) == pytest.approx(
        len(found["correlation"]["parameters"])
    )
    assert len(found["rates_by_size_mm"]) == 8 and found["rates_by_strength_g_per_L"] is None


def test_other_laws_that_are_left_get_intervals_too(plain):
    stage = stage_of(plain)
    other = replace(stage.fit, aicc=stage.fit.aicc + 1)
    rows = (*stage.ranking.rows, replace(stage.ranking.rows[0], law="film", fit=other))
    ranking = replace(stage.ranking, rows=rows, indistinguishable=("chemical", "film"))
    found, problems = with_intervals(replace(stage, ranking=ranking), None, 1, {})
    assert problems == ()
    (alternative,) = found.alternatives
    assert alternative.parameter("tau_chemical").method == "profile likelihood"


def test_bands_that_rest_on_another_interval_are_noted(file):
    """Readings before the bend only: the linearised interval of the ultimate is another one."""
    lines = file.read_text(encoding="utf-8").splitlines()
    early = [lines[0], *(line for line in lines[1:] if float(line.split(",")[1]) <= 5)]
    short = file.with_name("early.csv")
    short.write_text("\n".join(early) + "\n", encoding="utf-8")
    result = result_of(short, ultimate="one")
    stage = stage_of(result)
    remarked = [p.name for p in stage.fit.parameters if p.remark]
    assert remarked
    assert any("bands are drawn from the linearised covariance" in note for note in result.notes)
