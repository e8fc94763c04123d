"""Random problems for searches and proofs."""

from __future__ import annotations

import numpy as np

from support.brute import second_order
from support.build import central_composite, make_study
from wideberth.fit.models import fit
from wideberth.study.records import Goal, Limit

GUARDS = ("none", "mean", "batch", "share")


def random_models(seed):
    """A random study: 1 to 6 factors, 2 to 6 responses, mixed goals, one or two guarded limits."""
    rng = np.random.default_rng(seed)
    k = 1 + seed % 6
    x = central_composite(k, n_centre=4 if k < 5 else 2)
    p = 1 + 2 * k + k * (k - 1) // 2
    values, goals, limits = {}, {}, {}
    n_responses = int(rng.integers(2, 7))
    for i in range(n_responses):
        beta = rng.standard_normal(p) * np.r_[0.0, np.full(k, 3.0), np.full(p - 1 - k, 1.5)]
        y = 50 + second_order(x) @ beta + 0.6 * rng.standard_normal(len(x))
        low, high = np.quantile(y, [0.15, 0.85])
        exponents = tuple(float(e) for e in rng.choice([0.5, 1.0, 2.0], 2))
        priority = float(rng.choice([1.0, 2.0, 3.0]))
        want = rng.choice(["more", "less", "near"])
        name = f"y{i}"
        values[name] = y
        if want == "near":
            ideal = ((2 * low + high) / 3, (low + 2 * high) / 3)
            if rng.random() < 0.5:
                ideal = ((low + high) / 2,) * 2
            goals[name] = Goal("near", (low - 2, high + 2), ideal, exponents, priority)
        else:
            ends = (low, high) if want == "more" else (high, low)
            goals[name] = Goal(want, (ends[0],), (ends[1],), (exponents[0],) * 2, priority)
        if i == n_responses - 1 or (i == 1 and n_responses > 4):
            guard = GUARDS[(seed // 6 + i) % 4]
            limits[name] = Limit(None, float(np.quantile(y, 0.75)), guard, 0.95, 0.9)
            # a goal that pulls against its own limit would be one surface of equal optima
            if rng.random() < 0.5 or want == "more":
                del goals[name]
    return fit(make_study(x, values, goals=goals, limits=limits))
