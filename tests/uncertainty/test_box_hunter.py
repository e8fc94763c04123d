"""Box and Hunter's exact region for a stationary point, as control of the draws.

The gradient of a fitted quadratic at a setting is linear in the coefficients, so
``g' V^-1 g / (k s^2)`` at the true stationary point is F with k and n - p degrees of freedom (Box
and Hunter 1954, Biometrika 41, 190-199; from memory). The draws must give the same region.
"""

import numpy as np
import pytest
from scipy import stats

from support.build import central_composite, make_study, more
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.quadratic.terms import feature_gradients, features


@pytest.mark.parametrize("k", [2, 3])
def test_the_exact_region_covers_95_of_100(k):
    x = central_composite(k, n_centre=5)
    f = features(x)
    inverse = np.linalg.inv(f.T @ f)
    truth = np.full(k, 0.35)
    rng = np.random.default_rng(k)
    y = 90 - 3 * ((x - truth) ** 2).sum(axis=1) + 2.0 * rng.standard_normal((10_000, len(x)))
    beta = y @ f @ inverse
    df = len(x) - f.shape[1]
    s2 = ((y - beta @ f.T) ** 2).sum(axis=1) / df
    slopes = feature_gradients(truth)
    gradient = beta @ slopes
    ratio = np.einsum("ni,ij,nj->n", gradient, np.linalg.inv(slopes.T @ inverse @ slopes), gradient)
    inside = ratio / k / s2 <= stats.f.ppf(0.95, k, df)
    assert inside.mean() == pytest.approx(0.95, abs=0.007)


def test_draws_give_the_same_region():
    rng = np.random.default_rng(4)
    x = central_composite(2, n_centre=5)
    y = 90 - 3 * (x**2).sum(axis=1) + x[:, 0] + 2.0 * rng.standard_normal(len(x))
    models = fit(make_study(x, {"y": y}, goals={"y": more(60, 95)}))
    model = models["y"]
    draws = draw_coefficients(models, 20_000, seed=1).of(model)
    for place in ([0.0, 0.0], [0.5, 0.2], [-0.6, 0.9], [1.0, -1.0]):
        slopes = feature_gradients(np.array(place))
        spread = model.s**2 * slopes.T @ model.covariance @ slopes
        gradient = model.coefficients @ slopes
        statistic = gradient @ np.linalg.solve(spread, gradient) / 2
        exact = stats.f.sf(statistic, 2, model.df_residual)
        moved = (draws - model.coefficients) @ slopes
        drawn = np.einsum("ni,ij,nj->n", moved, np.linalg.inv(spread), moved) / 2
        assert (drawn >= statistic).mean() == pytest.approx(exact, abs=0.012)
