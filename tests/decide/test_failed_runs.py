"""Runs that failed near the setpoint are named with their note; far ones are not."""

from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, make_study, more
from wideberth.decide.recommend import recommend
from wideberth.fit.models import fit

PEAK = np.array([0.3, -0.2])


def _findings(failed, *, at=None):
    x = np.vstack([central_composite(2, n_centre=4), failed])
    y = 10 - ((x - PEAK) ** 2).sum(axis=1)
    y += 0.05 * np.random.default_rng(1).standard_normal(len(x))
    y[-1] = np.nan
    kinds = [""] * (len(x) - 1) + ["failed"]
    study = make_study(x, {"y": y}, goals={"y": more(5, 11)}, kinds=kinds)
    notes = ("",) * (len(x) - 1) + ("gelled",)
    study = replace(study, runs=replace(study.runs, note=notes))
    return [f.text for f in recommend(fit(study), at=at).findings if "failed" in f.text]


@pytest.mark.parametrize(("away", "named"), [((0.4, -0.3), True), ((0.4, 0.7), False)])
def test_a_failed_run_is_named_when_it_lies_near(away, named):
    expected = ["The run in row 14 failed near this setting: gelled."] if named else []
    assert _findings(PEAK + away) == expected


def test_it_is_named_for_a_setting_of_ones_own_too():
    assert _findings(np.array([-1.0, 1.0]), at={"f0": -0.9, "f1": 0.8}) != []
