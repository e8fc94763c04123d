"""``fit`` at the door: report, figures, what was left out; and ``recommend`` with every run."""

import json
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from wideberth.cli import main

DEMO = Path(__file__).parents[2] / "studies" / "process" / "hydrogenation"


def _run(*arguments):
    return CliRunner().invoke(main, [str(a) for a in arguments])


@pytest.fixture
def leaving_out(tmp_path):
    study = tmp_path / "study"
    shutil.copytree(DEMO, study)
    with (study / "study.toml").open("a", encoding="utf-8") as file:
        file.write('[[leave_out]]\nrows = [11]\nreason = "stirrer stopped"\n')
    return study


def test_the_report_prints_equations_variance_checks_and_runs():
    said = _run("fit", DEMO, "--report").stdout
    for part in ("equation in own units", "analysis of variance", "pure error", "checks",
                 "drift over run order", "simulated", "Cook", "catalyst*pressure"):  # fmt: skip
        assert part in said
    assert "analysis of variance" not in _run("fit", DEMO).stdout


def test_figures_are_drawn_the_same_every_time(tmp_path):
    first = _run("fit", DEMO, "--figures", tmp_path / "a")
    assert first.exit_code == 0
    assert first.stdout.count("wrote ") == 4
    _run("fit", DEMO, "--figures", tmp_path / "b")
    names = sorted(path.name for path in (tmp_path / "a").iterdir())
    assert names == [
        "residuals-1-yield.svg",
        "residuals-2-hydroxylamine.svg",
        "residuals-3-heat-rate.svg",
        "residuals.svg",
    ]
    for name in names:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes()


def test_figures_that_cannot_be_written_are_said(tmp_path):
    (tmp_path / "a").write_text("a file", encoding="utf-8")
    result = _run("fit", DEMO, "--figures", tmp_path / "a")
    assert result.exit_code == 2
    assert "cannot be written" in result.stderr


def test_json_of_fit_holds_equations_checks_and_variance(leaving_out):
    content = json.loads(_run("fit", leaving_out, "--json").stdout)["responses"]
    fitted = content["yield"]
    assert fitted["left_out"][0]["reason"] == "stirrer stopped"
    assert {part["source"] for part in fitted["anova"]} >= {"linear", "residual", "total"}
    assert {check["kind"] for check in fitted["checks"]} >= {"normal scores"}
    cost = content["batch_cost"]["own_units"][0]["terms"]
    assert cost["catalyst"] == pytest.approx(180)
    assert cost["1"] == pytest.approx(1900)


def test_what_is_left_out_is_said_by_fit_and_recommend(leaving_out):
    sentence = "Row 11 is left out: stirrer stopped."
    assert sentence in _run("fit", leaving_out).stdout
    said = _run("recommend", leaving_out, "--quiet").stdout
    assert sentence in said
    assert "With every run fitted: catalyst" in said
    answer = json.loads(_run("recommend", leaving_out, "--json").stdout)
    plain = json.loads(_run("recommend", DEMO, "--json").stdout)
    assert answer["with_every_run"]["setpoint"] == plain["setpoint"]
    assert answer["with_every_run"]["desirability"] == plain["desirability"]
    assert plain["with_every_run"] is None
