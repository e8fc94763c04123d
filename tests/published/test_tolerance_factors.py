"""One-sided normal tolerance factors: NIST e-Handbook, Owen (1963), ISO 16269-6 (from memory)."""

import numpy as np
import pytest
from scipy import integrate, stats

from support.published import agrees, checks
from wideberth.fit.tolerance import tolerance_factor

EXACT = {n: c for n, c in checks("tolerance_factors").items() if c["method"] == "one_sided_exact"}


@pytest.mark.parametrize("name", list(EXACT))
def test_one_sided_factor(name):
    check = EXACT[name]
    factor = float(tolerance_factor(1 / check["n"], check["n"] - 1, check["p"], check["g"]))
    assert agrees(factor, check)
    assert not agrees(factor, check, spoiled=True)


@pytest.mark.parametrize("df", [2, 7, 30, 400])
@pytest.mark.parametrize("h", [1e-4, 0.05, 0.4, 1.6])
def test_against_direct_integration(df, h):
    factor = float(tolerance_factor(h, df, 0.99, 0.95))
    z = stats.norm.ppf(0.99)

    def given_spread(w):
        return stats.norm.cdf((factor * w - z) / np.sqrt(h)) * stats.chi.pdf(w * np.sqrt(df), df)

    reach, _ = integrate.quad(given_spread, 0, 20 / np.sqrt(df) + 2, limit=400)
    assert reach * np.sqrt(df) == pytest.approx(0.95, abs=1e-7)
