"""A two-level stage of the literature: curvature test and path of steepest ascent.

Montgomery, Design and Analysis of Experiments, chapter on response surface methods, the example of
the process with reaction time (35 min, 5 a coded unit) and temperature (155 degF, 5 a coded unit)
and nine runs (from memory; the printed sums of squares follow from the printed yields).
"""

import numpy as np
import pytest

from support.build import make_study, more
from wideberth.plan.stage import finished_stage

TIME = [30, 30, 40, 40, 35, 35, 35, 35, 35]
TEMPERATURE = [150, 160, 150, 160, 155, 155, 155, 155, 155]
YIELD = [39.3, 40.0, 40.9, 41.5, 40.3, 40.5, 40.7, 40.2, 40.6]


@pytest.fixture(scope="module")
def stage():
    study = make_study(
        np.column_stack([TIME, TEMPERATURE]).astype(float),
        {"yield": np.array(YIELD)},
        names=("time", "temperature"),
        low=(30, 150),
        high=(40, 160),
        allowed={"time": (20, 200), "temperature": (100, 250)},
        goals={"yield": more(40, 90)},
    )
    return finished_stage(study)


def test_the_first_order_model(stage):
    (one,) = stage.responses
    assert one.mean == pytest.approx(40.44, abs=0.005)
    assert one.slopes == pytest.approx((0.775, 0.325), abs=5e-4)
    sizes = {effect.term: effect.change for effect in one.effects}
    # the interaction coefficient is printed as -0.025
    assert sizes["time*temperature"] == pytest.approx(2 * -0.025, abs=1e-9)
    # the error mean square is printed as 0.0430
    assert one.s**2 == pytest.approx(0.0430, abs=5e-5)


def test_the_curvature_test(stage):
    bend = stage.responses[0].curvature
    # printed: mean of the two-level runs 40.425, of the centre runs 40.46; F = 0.063
    assert bend.difference == pytest.approx(40.425 - 40.46, abs=1e-9)
    assert bend.df == 4
    assert bend.f == pytest.approx(0.063, abs=5e-4)
    assert bend.p > 0.8


def test_the_path(stage):
    assert stage.decision.do == "path"
    path = stage.path
    # printed: a step of 1 in time goes with 0.42 in temperature
    assert path.direction == pytest.approx((1.0, 0.42), abs=0.005)
    tenth = path.steps[9]
    # printed for the tenth step, with the temperature step rounded to 2: 85 min, 175 degF
    assert tenth.setting["time"] == 85
    assert tenth.setting["temperature"] == pytest.approx(175, abs=1.0)
    assert "two runs in succession" in path.rule
