"""The worked studies: data from their scripts, and answers that show what their READMEs say."""

import importlib.util
import shutil
from pathlib import Path

import numpy as np
import pytest

from wideberth.decide.recommend import recommend, solve
from wideberth.fit.models import fit
from wideberth.operate.outward import outward
from wideberth.operate.window import window, window_around
from wideberth.study.reading import read_study

STUDIES = Path(__file__).parents[2] / "studies" / "process"


def _script(name):
    path = STUDIES / name / "make_data.py"
    spec = importlib.util.spec_from_file_location(f"make_data_{name}", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize("name", ["plating", "ridge"])
def test_the_sheet_comes_from_the_script_and_says_it_is_invented(name):
    assert (STUDIES / name / "runs.csv").read_text(encoding="utf-8") == _script(name).sheet()
    assert "invented" in (STUDIES / name / "README.md").read_text(encoding="utf-8")


def test_the_staged_study_is_what_its_plans_wrote_filled_in():
    first, both = _script("emulsion").sheets()
    folder = STUDIES / "emulsion"
    assert (folder / "runs.csv").read_text(encoding="utf-8") == first
    assert (folder / "both-stages.csv").read_text(encoding="utf-8") == both
    assert both.startswith(first)
    assert "invented" in (folder / "README.md").read_text(encoding="utf-8")


def test_the_seal_of_the_staged_study_truly_stays_cool_in_every_run_made(tmp_path):
    shutil.copytree(STUDIES / "emulsion", tmp_path / "emulsion")
    shutil.copy(tmp_path / "emulsion" / "both-stages.csv", tmp_path / "emulsion" / "runs.csv")
    study, script = read_study(tmp_path / "emulsion"), _script("emulsion")
    for setting in study.runs.numeric_actual:
        mean = script.truth((setting - script.MIDDLE) / script.HALF)["seal"] + 0.5
        assert mean + 2.33 * script.NOISE["seal"] < 82
    assert recommend(fit(study)).status == "met"


def test_plating_is_met_and_a_tighter_limit_conflicts(tmp_path):
    choice = recommend(fit(read_study(STUDIES / "plating")))
    assert choice.status == "met"
    assert choice.ruling.startswith("nickel_content at most")
    tight = tmp_path / "tight"
    shutil.copytree(STUDIES / "plating", tight)
    text = (tight / "study.toml").read_text(encoding="utf-8")
    changed = text.replace("limit = { high = 22 }", "limit = { high = 15 }")
    assert changed != text
    (tight / "study.toml").write_text(changed, encoding="utf-8")
    conflict = recommend(fit(read_study(tight)))
    assert conflict.status == "conflict"
    assert "spread" in {name for name, _, _ in conflict.conflicts[0].limits}
    assert window(fit(read_study(tight))).status == "none"


def test_the_stated_truth_of_plating_holds_all_over_the_window():
    script = _script("plating")
    box = window(fit(read_study(STUDIES / "plating")))
    low, high = (np.array(ends) for ends in zip(*box.ranges.values(), strict=True))
    rng = np.random.default_rng(0)
    for place in rng.uniform(low, high, (2000, 4)):
        means = script.truth((place - script.MIDDLE) / script.HALF)
        assert 12 <= means["nickel_content"] <= 15
        assert means["spread"] <= 22
        assert means["stress"] <= 145
        assert means["thickness"] >= 6


def test_the_true_best_of_ridge_lies_beyond_what_was_tried():
    problem, choice = solve(fit(read_study(STUDIES / "ridge")))
    assert choice.status == "met"
    assert any("edge of the region" in text for text in choice.edge)
    assert window_around(problem, choice).status == "proven"
    runs = outward(problem, choice).runs
    assert len(runs) == 3
    # the stated truth really rises there: the runs are worth making
    script = _script("ridge")
    names = ("pressure", "crossflow", "solids")

    def flux(setting):
        place = np.array([setting[name] for name in names])
        return script.truth((place - script.MIDDLE) / script.HALF)["flux"]

    assert flux(runs[0].setting) > flux(choice.setpoint)
