"""Certified least-squares values: NIST StRD linear regression, data sets Pontius and Longley."""

import numpy as np
import pytest

from support.published import checks, columns
from wideberth.fit.least_squares import least_squares


def _fit(name):
    data = columns(f"{name}.csv")
    y = data["y"]
    if name == "pontius":
        x = data["x"]
        return least_squares(np.column_stack([np.ones_like(x), x, x * x]), y), y
    columns_x = [data[f"x{i}"] for i in range(1, 7)]
    return least_squares(np.column_stack([np.ones_like(y), *columns_x]), y), y


TERMS = {"1": 0, "x": 1, "x^2": 2, **{f"x{i}": i for i in range(1, 7)}}


def _value(fit, y, check):
    s = np.sqrt(fit.rss / fit.df)
    if check.startswith("coef"):
        return fit.coefficients[TERMS[check.removeprefix("coef ")]]
    if check.startswith("sd of coef"):
        place = TERMS[check.removeprefix("sd of coef ")]
        return s * np.sqrt(fit.covariance[place, place])
    if check == "residual sd":
        return s
    assert check == "R2"
    return 1 - fit.rss / ((y - y.mean()) ** 2).sum()


@pytest.mark.parametrize(
    ("name", "check"), [(n, c) for n in ("pontius", "longley") for c in checks(n)]
)
def test_certified_digits(name, check):
    fit, y = _fit(name)
    reference = checks(name)[check]
    tolerance = reference.get("suggested_double_rel_tol", 1e-9)
    value = _value(fit, y, check)
    assert value == pytest.approx(reference["value"], rel=tolerance, abs=0.0)
    assert value != pytest.approx(reference["value"] * (1 + 3 * tolerance), rel=tolerance, abs=0.0)
