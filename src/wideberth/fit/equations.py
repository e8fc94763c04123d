"""A model's equation in the factors' own units, for those who compute it elsewhere."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import product

import numpy as np

from wideberth.fit.records import Model, level_names, surface
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import term_names
from wideberth.study.coding import to_coded
from wideberth.study.records import Study


@dataclass(frozen=True, slots=True)
class Equation:
    """Term to coefficient, own units; a factor on a log scale enters as its natural logarithm.

    ``levels`` says for which levels of the categorical factors it holds; blocks at their average.
    """

    levels: Mapping[str, str]
    terms: Mapping[str, float]


def own_units(study: Study, model: Model) -> tuple[Equation, ...]:
    """Write a model in own units, once for every combination of levels.

    Terms that no combination of the model's columns can move are left out.
    """
    factors = study.numeric
    names = tuple(f"ln({f.name})" if f.scale == "log" else f.name for f in factors)
    written = term_names(names)
    k = len(factors)
    # coded = origin + slope * own, after the logarithm where there is one
    ends = to_coded(factors, np.array([[f.low for f in factors], [f.high for f in factors]]))
    stretched = np.array(
        [
            [np.log(v) if f.scale == "log" else v for f, v in zip(factors, row, strict=True)]
            for row in ([f.low for f in factors], [f.high for f in factors])
        ]
    ).reshape(2, k)
    slope = (ends[1] - ends[0]) / (stretched[1] - stretched[0])
    origin = ends[0] - slope * stretched[0]
    equations = []
    for levels in product(*(range(len(f.levels)) for f in study.categorical)):
        coded = surface(model, study, levels=levels).coefficients
        moved = Stack.from_coefficients(coded, k).restrict(origin, np.diag(slope))
        values = moved.coefficients()
        possible = {term.monomial for term in model.terms}
        kept = [i for i in range(len(values)) if i in possible or values[i] != 0.0]
        equations.append(
            Equation(
                level_names(study.categorical, levels),
                {written[i]: float(values[i]) for i in kept},
            )
        )
    return tuple(equations)
