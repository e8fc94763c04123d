"""Coverage of the region for the optimum in simulation: 300 studies a cell.

The reference is the prototype's region on exact draws, an ellipsoid joined with the studentised
shortfall, high noise, 500 studies a cell; ours may not fall below it by more than three combined
standard errors. Truths, noise, goals and the radius region are those of the prototype.
"""

from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more
from wideberth.decide.problem import arena, build_problem
from wideberth.decide.search import find_best
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.progress import silent
from wideberth.study.records import RegionChoice
from wideberth.uncertainty.assess import edge_test
from wideberth.uncertainty.cloud import cloud_of
from wideberth.uncertainty.location import in_region, optimum_region
from wideberth.uncertainty.records import Joined

STUDIES = 300
REFERENCE_STUDIES = 500
N_DRAWS = 256
NAMES = ("a", "b", "c")
NOISE = 5.0
REFERENCE = {
    ("interior", 2): 0.952,
    ("edge", 2): 0.946,
    ("interior", 3): 0.992,
    ("edge", 3): 0.948,
}


def _scene(kind, k):
    radius = (2**k) ** 0.25
    one = np.ones(k) / np.sqrt(k)
    other = np.array([(-1.0) ** i for i in range(k)]) / np.sqrt(k)
    if k % 2:
        other = other - one * (other @ one)
        other /= np.linalg.norm(other)

    def away(x, centre):
        return ((x - centre) ** 2).sum(axis=-1)

    def third(x):
        return 40 + 3 * x[..., 0] - 2 * x[..., 1] + 1.5 * x[..., 0] * x[..., 1]

    if kind == "interior":
        first, second = 0.35 * radius * one, -0.35 * radius * other
        truths = (lambda x: 90 - 6 * away(x, first), lambda x: 30 + 5 * away(x, second), third)
        return radius, truths, (more(60, 95), less(60, 20), more(20, 60))
    first = 1.6 * radius * (one + 0.5 * other) / np.sqrt(1.25)
    second = 0.9 * radius * other
    truths = (lambda x: 90 - 2.5 * away(x, first), lambda x: 30 + 2 * away(x, second), third)
    goals = (more(20, 100), less(90, 15), more(20, 60))
    if k > 2:
        goals = (more(0, 100), less(110, 15), more(20, 60))
    return radius, truths, goals


@pytest.mark.parametrize(("kind", "k"), list(REFERENCE))
def test_the_region_covers_the_true_optimum_as_often_as_the_reference(kind, k):
    radius, truths, goals = _scene(kind, k)
    x = central_composite(k, n_centre={2: 5, 3: 6}[k])
    means = np.stack([truth(x) for truth in truths], axis=1)
    sign = np.array([1.0, -1.0, 1.0])
    mix = np.linalg.cholesky((0.5 + 0.5 * np.eye(3)) * np.outer(sign, sign))
    rng = np.random.default_rng(0)

    def problem_of(y):
        values = {name: y[:, j] for j, name in enumerate(NAMES)}
        region = RegionChoice("radius", radius)
        goal = dict(zip(NAMES, goals, strict=True))
        models = fit(make_study(x, values, goals=goal, region=region))
        return models, build_problem(models, seed=1, room=False)

    _, clear = problem_of(means + 1e-5 * rng.standard_normal(means.shape))
    optimum = find_best(arena(clear, (), "means")).x
    assert (np.linalg.norm(optimum) > 0.99 * radius) == (kind == "edge")
    hits = 0
    for study in range(STUDIES):
        noise = NOISE * rng.standard_normal(means.shape) @ mix.T
        models, problem = problem_of(means + noise)
        draws = draw_coefficients(models, N_DRAWS, study)
        middle = problem.region.middle[None, :]
        cloud = cloud_of(problem, draws, "simultaneous", middle, silent)
        region = optimum_region(problem, cloud.x, 0.95)
        test = edge_test(problem, draws, (), "simultaneous", cloud.x)
        if test is not None:
            region = replace(region, joined=Joined(test, test.critical(0.95)))
        hits += bool(in_region(problem, region, optimum))
    covered, expected = hits / STUDIES, REFERENCE[kind, k]
    error = np.sqrt(
        covered * (1 - covered) / STUDIES + expected * (1 - expected) / REFERENCE_STUDIES
    )
    assert covered >= expected - 3 * error
