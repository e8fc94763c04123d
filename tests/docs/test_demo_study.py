"""The demo study: its data come from its script, and its answer is true to the stated truth."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from scipy import stats

from wideberth.decide.recommend import recommend
from wideberth.fit.models import fit
from wideberth.study.reading import read_study

FOLDER = Path(__file__).parents[2] / "studies" / "process" / "hydrogenation"


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("make_data", FOLDER / "make_data.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def choice():
    return recommend(fit(read_study(FOLDER)))


def test_the_sheet_comes_from_the_script(script):
    assert (FOLDER / "runs.csv").read_text(encoding="utf-8") == script.sheet()


def test_the_safety_limit_is_proven_and_rules(choice):
    assert choice.status == "met"
    assert choice.ruling.startswith("heat_rate")
    heat = next(verdict for verdict in choice.limits if verdict.response == "heat_rate")
    assert heat.guard == "share"
    assert 0 <= heat.margin < 0.5


def test_the_stated_truth_meets_the_limit_all_over_the_room(script, choice):
    middle = np.array(list(choice.setpoint.values()))
    room = np.array([0.04, 0.2, 2.0])
    rng = np.random.default_rng(0)
    for place in middle + room * rng.uniform(-1, 1, (500, 3)):
        x = (place - script.MIDDLE) / script.HALF
        for reactor in script.REACTOR.values():
            mean = script.truth(x)["heat_rate"] + reactor["heat_rate"]
            assert stats.norm.cdf((45 - mean) / script.NOISE["heat_rate"]) >= 0.99
