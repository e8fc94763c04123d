"""Montgomery, Design and Analysis of Experiments: the two-factor 13-run central composite example.

Figures from memory, recomputed (see checks.toml); axial distance 1.414 as printed.
"""

import numpy as np
import pytest

from support.build import make_study
from support.published import agrees, checks, columns
from wideberth.fit.models import fit
from wideberth.surface.ridge import shape

ALL = checks("chem_process_ccd")


@pytest.fixture(scope="module")
def fitted():
    data = columns("chem_process_ccd.csv")
    x = np.column_stack([data["x1"], data["x2"]])
    values = {name: data[name] for name in ("yield", "viscosity", "mol_weight")}
    models = fit(make_study(x, values, names=("x1", "x2"), orders={"mol_weight": 1}))
    return models, {one.response: one for one in shape(models)}


def _value(fitted, name):
    models, shapes = fitted
    model, check = models["yield"], ALL[name]
    lack, lines = model.lack_of_fit, {}
    rss = model.s**2 * model.df_residual
    stationary = shapes["yield"].stationary
    if name.startswith("coef"):
        table = models[check["response"]].table
        return next(row.coded for row in table if row.term == check["term"])
    if name.startswith("standard error"):
        return next(row.se for row in model.table if row.term == check["term"])
    values = sorted(eigen.value for eigen in shapes["yield"].eigenvalues)
    lines = {
        "stationary x1 yield": stationary.coded["x1"],
        "stationary x2 yield": stationary.coded["x2"],
        "stationary value yield": stationary.mean,
        "larger eigenvalue yield": values[1],
        "smaller eigenvalue yield": values[0],
        "stationary time (min)": 85 + 5 * stationary.coded["x1"],
        "stationary temperature (F)": 175 + 5 * stationary.coded["x2"],
        "residual SS yield": rss,
        "residual MS yield": model.s**2,
        "pure-error SS yield": lack.ss_pure,
        "pure-error MS yield": lack.ss_pure / lack.df[1],
        "lack-of-fit SS yield": lack.ss_lack,
        "lack-of-fit MS yield": lack.ss_lack / lack.df[0],
        "lack-of-fit F yield": lack.f,
        "lack-of-fit p yield": lack.p,
        "R2 yield": model.r2,
        "adjusted R2 yield": model.r2_adjusted,
        "PRESS yield": model.press,
        "predicted R2 yield": model.r2_press,
    }
    return lines[name]


@pytest.mark.parametrize("name", list(ALL))
def test_figure(fitted, name):
    value = _value(fitted, name)
    assert agrees(value, ALL[name])
    assert not agrees(value, ALL[name], spoiled=True)
