"""The model of a response that is known exactly by its formula."""

from __future__ import annotations

import numpy as np

from wideberth.fit.records import FittedTerm, Model, Term
from wideberth.quadratic.terms import n_terms, pairs, term_names
from wideberth.study.records import Finding, Response, Study


def exact_model(study: Study, response: Response) -> Model:
    """Turn a formula in own units into coded coefficients, exactly."""
    names = tuple(factor.name for factor in study.numeric)
    k = len(names)
    middle = np.array([(f.low + f.high) / 2 for f in study.numeric])
    half = np.array([(f.high - f.low) / 2 for f in study.numeric])
    beta = np.zeros(n_terms(k))
    first, second = pairs(k)
    product_place = {
        (a, b): 1 + 2 * k + i for i, (a, b) in enumerate(zip(first, second, strict=True))
    }
    formula = response.formula
    for factors, number in (formula.terms if formula else {}).items():
        places = sorted(names.index(name) for name in factors)
        if not places:
            beta[0] += number
        elif len(places) == 1:
            (j,) = places
            beta[0] += number * middle[j]
            beta[1 + j] += number * half[j]
        else:
            a, b = places
            beta[0] += number * middle[a] * middle[b]
            beta[1 + a] += number * half[a] * middle[b]
            beta[1 + b] += number * half[b] * middle[a]
            place = 1 + k + a if a == b else product_place[(a, b)]
            beta[place] += number * half[a] * half[b]
    terms = tuple(Term(name, place) for place, name in enumerate(term_names(names)))
    reason = "known exactly by its formula"
    return Model(
        response=response.name,
        unit=response.unit,
        exact=True,
        order=2,
        terms=terms,
        coefficients=beta,
        covariance=np.zeros((len(beta), len(beta))),
        table=tuple(
            FittedTerm(t.name, float(b), None, None, None) for t, b in zip(terms, beta, strict=True)
        ),
        n_runs=0,
        df_residual=0,
        df_error=0,
        s=0.0,
        r2=None,
        r2_adjusted=None,
        press=None,
        r2_press=None,
        lack_of_fit=None,
        runs=(),
        noise_free=False,
        findings=(Finding("fine", f"{response.name} is {reason}.", response.name),),
        grade="fine",
        reasons=dict.fromkeys(("r2", "r2_adjusted", "press", "r2_press", "lack_of_fit"), reason),
    )
