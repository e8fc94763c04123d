"""The step that fits every response of a study.

A stated order that the runs cannot support is refused; the default falls back to what can be told
apart, and says so.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import stdtr

from wideberth.errors import Fault, RefusedError
from wideberth.fit.anova import by_degree
from wideberth.fit.between import batch_units, between_blocks, unknown_between
from wideberth.fit.checks import checks_of
from wideberth.fit.circumstances import circumstances, left_out_runs
from wideberth.fit.columns import (
    degree,
    in_printed_order,
    model_matrix,
    model_terms,
    product_factors,
    stated_terms,
)
from wideberth.fit.exact import exact_model
from wideberth.fit.findings import findings_of, worst_grade
from wideberth.fit.lack_of_fit import lack_of_fit, replicate_groups
from wideberth.fit.least_squares import (
    LeastSquares,
    aliased_with,
    cook_distance,
    independent_columns,
    is_noise_free,
    least_squares,
    press,
    studentized,
)
from wideberth.fit.pooling import batch_error
from wideberth.fit.records import FittedTerm, Model, Models, RunDiagnosis, Term
from wideberth.study.records import Finding, FloatArray, IntArray, Response, Study


def fit(study: Study) -> Models:
    """Fit all responses, in the study's order.

    Raises
    ------
    RefusedError
        When a stated order cannot be supported by the runs; all such responses at once.
    """
    models: list[Model] = []
    faults: list[Fault] = []
    for response in study.responses:
        if response.formula is not None:
            models.append(exact_model(study, response))
            continue
        fault = _unsupported_order(study, response) or _unknown_between(study, response)
        if fault is not None:
            faults.append(fault)
        else:
            models.append(_fitted_model(study, response))
    if faults:
        raise RefusedError(faults)
    return Models(study, tuple(models))


def rows_fitted(study: Study, response: Response) -> IntArray:
    """Give the indices of the runs that a measured response is fitted to."""
    column = study.measured.index(response)
    present = study.runs.fitted & np.isfinite(study.runs.measured[:, column])
    rows: IntArray = np.flatnonzero(present).astype(np.int64)
    return rows


def _unsupported_order(study: Study, response: Response) -> Fault | None:
    if response.order is None and response.terms is None:
        return None
    rows = rows_fitted(study, response)
    terms = _asked_terms(study, response, rows)
    matrix = model_matrix(study, terms, rows)
    kept = independent_columns(matrix)
    lost = [i for i in range(len(terms)) if i not in kept]
    if not lost:
        return None
    sets = [_alias_names(matrix, terms, kept, column) for column in lost]
    listed = response.terms is not None
    asked = "the listed model" if listed else f"a model of order {response.order}"
    return Fault(
        f"{response.name}: {asked} has terms that {len(rows)} runs"
        f" cannot tell apart: {'; '.join(sets)}",
        f"study.toml, responses.{response.name}.model.{'terms' if listed else 'order'}",
        "list fewer terms, or add runs"
        if listed
        else "leave the order out to fit what can be told apart, lower it, or add runs",
    )


def _asked_terms(study: Study, response: Response, rows: IntArray) -> tuple[Term, ...]:
    """Give the terms of a model whose order or terms are stated."""
    blocks = study.runs.block[rows]
    if response.terms is not None:
        return stated_terms(study, response.terms, blocks)
    return model_terms(study, response.order or 2, blocks)


def _unknown_between(study: Study, response: Response) -> Fault | None:
    return unknown_between(
        study, response, _terms(study, response, rows_fitted(study, response))[0]
    )


def _alias_names(matrix: FloatArray, terms: tuple[Term, ...], kept: list[int], column: int) -> str:
    others = aliased_with(matrix, column, [i for i in kept if i < column] or kept)
    return " and ".join([terms[column].name, *(terms[i].name for i in others)][:6])


def _supported_terms(
    study: Study, response: Response, rows: IntArray
) -> tuple[tuple[Term, ...], tuple[Finding, ...]]:
    """Choose the terms of the default model: all that the runs can tell apart."""
    terms, found = _moving_terms(study, response, rows)
    while True:
        matrix = model_matrix(study, terms, rows)
        kept = independent_columns(matrix)
        lost = [i for i in range(len(terms)) if i not in kept]
        if not lost:
            break
        terms, finding = _without_aliased(study, response, terms, matrix, kept)
        found.append(finding)
    return terms, tuple(found)


def _without_aliased(
    study: Study,
    response: Response,
    terms: tuple[Term, ...],
    matrix: FloatArray,
    kept: list[int],
) -> tuple[tuple[Term, ...], Finding]:
    """Drop the terms of highest degree in every set that cannot be told apart, all of each set."""
    dropped: set[int] = set()
    against: set[int] = set()
    for column in (i for i in range(len(terms)) if i not in kept):
        group = [column, *aliased_with(matrix, column, [i for i in kept if i < column])]
        degrees = {i: degree(terms[i], len(study.numeric)) for i in group}
        highest = max(degrees.values())
        dropped |= {i for i in group if degrees[i] == highest}
        against |= set(group)
    names = ", ".join(terms[i].name for i in sorted(dropped))
    rest = ", ".join(terms[i].name for i in sorted(against - dropped))
    text = f"{response.name}: the runs cannot tell apart {names}{f' from {rest}' if rest else ''}"
    left = tuple(term for i, term in enumerate(terms) if i not in dropped)
    return left, Finding("look", f"{text}; left out of the model.", response.name)


def _moving_terms(
    study: Study, response: Response, rows: IntArray
) -> tuple[tuple[Term, ...], list[Finding]]:
    """Leave out factors that never moved or only moved together with others."""
    terms = model_terms(study, 2, study.runs.block[rows])
    k = len(study.numeric)
    plain = [i for i, t in enumerate(terms) if degree(t, k) <= 1 and t.contrast is None]
    matrix = model_matrix(study, terms, rows)[:, plain]
    kept = independent_columns(matrix)
    found, still = [], set()
    for place, i in enumerate(plain):
        if place in kept or terms[i].block is not None or terms[i].monomial == 0:
            continue
        others = aliased_with(matrix, place, [p for p in kept if p < place])
        names = [terms[plain[p]].name for p in others if terms[plain[p]].name != "1"]
        together = f"moved together with {', '.join(names)}" if names else "never moved"
        with_block = any(terms[plain[p]].block is not None for p in others)
        found.append(
            Finding(
                "do not use" if with_block else "look",
                f"{response.name}: {terms[i].name} {together}; its own effect is not known.",
                response.name,
            )
        )
        still.add(terms[i].monomial - 1)
    terms = tuple(t for t in terms if not still & set(product_factors(t.monomial, k)))
    return terms, found


def _terms(
    study: Study, response: Response, rows: IntArray
) -> tuple[tuple[Term, ...], tuple[Finding, ...]]:
    """Choose a model's terms, in printed order, with what is to be said about the choice."""
    found: tuple[Finding, ...] = ()
    if response.order is None and response.terms is None:
        terms, found = _supported_terms(study, response, rows)
    else:
        terms = _asked_terms(study, response, rows)
    if response.terms is not None:
        found = (_listed(response),)
    return tuple(terms[i] for i in in_printed_order(terms)), found


def _listed(response: Response) -> Finding:
    shown = ", ".join("*".join(names) for names in response.terms or () if names)
    text = (
        f"{response.name}: only the listed terms are fitted ({shown or 'the constant alone'}); if"
        " they were picked by looking at these runs, intervals and guards are too sure."
    )
    return Finding("look", text, response.name)


def _fitted_model(study: Study, response: Response) -> Model:
    rows = rows_fitted(study, response)
    terms, found = _terms(study, response, rows)
    y = study.runs.measured[rows, study.measured.index(response)]
    weight = None if study.runs.weight is None else study.runs.weight[rows]
    matrix = model_matrix(study, terms, rows)
    fitted = least_squares(matrix, y, weight)
    exact_fit = fitted.df > 0 and is_noise_free(fitted, y)
    reasons: dict[str, str] = {}
    s, df, pooled = batch_error(fitted, response.known_sd, exact_fit=exact_fit)
    if s is None:
        reasons["s"] = "there are as many terms as runs, so nothing is left to estimate the noise"
    between = None if s is None else between_blocks(study, response, terms, fitted, s, df)
    within, covariance = s, fitted.covariance
    if between is not None:
        s, covariance = batch_units(between, terms)
    lack, why = (
        (None, "the model describes the runs exactly")
        if exact_fit
        else lack_of_fit(fitted, y, replicate_groups(study, rows))
    )
    if lack is None:
        reasons["lack_of_fit"] = why
    total = float(fitted.weight @ (y - np.average(y, weights=fitted.weight)) ** 2)
    constant = float(np.ptp(y)) <= 1e-12 * float(np.abs(y).max(initial=0.0))
    r2, adjusted, press_value, r2_press = _quality(fitted, total, constant, reasons)
    model = Model(
        response=response.name,
        unit=response.unit,
        exact=False,
        order=max(degree(term, len(study.numeric)) for term in terms),
        terms=terms,
        coefficients=fitted.coefficients,
        covariance=covariance,
        table=_table(terms, fitted, within, df),
        n_runs=len(rows),
        df_residual=fitted.df,
        df_error=df,
        s=s,
        r2=r2,
        r2_adjusted=adjusted,
        press=press_value,
        r2_press=r2_press,
        lack_of_fit=lack,
        runs=_runs(study, rows, y, fitted, exact_fit=exact_fit),
        noise_free=exact_fit and not s,
        findings=found,
        grade="fine",
        reasons=reasons,
        left_out=left_out_runs(study, response, terms, fitted, within, df),
        pooled=pooled,
        between=between,
        checks=() if exact_fit else checks_of(study, rows, terms, fitted, response.name),
        anova=by_degree(terms, matrix, y, fitted, lack, len(study.numeric)),
    )
    return _graded(study, model, response, y)


def _graded(study: Study, model: Model, response: Response, y: FloatArray) -> Model:
    findings = (
        *model.findings,
        *findings_of(model, response, y),
        *circumstances(study, response, model),
    )
    return replace(model, findings=findings, grade=worst_grade(findings))


def _quality(
    fitted: LeastSquares, total: float, constant: bool, reasons: dict[str, str]
) -> tuple[float | None, float | None, float | None, float | None]:
    """Give R2, adjusted R2, PRESS and PRESS R2, with the reason for each that is missing."""
    n = len(fitted.residuals)
    if constant:
        for name in ("r2", "r2_adjusted", "press", "r2_press"):
            reasons[name] = "all measured values are the same"
        return None, None, None, None
    r2 = 1.0 - fitted.rss / total
    adjusted = 1.0 - (fitted.rss / fitted.df) / (total / (n - 1)) if fitted.df > 0 else None
    if adjusted is None:
        reasons["r2_adjusted"] = "no residual degrees of freedom are left"
    value = press(fitted)
    if value is None:
        reasons["press"] = reasons["r2_press"] = (
            "at least one run has leverage 1: the model cannot be fitted without it"
        )
    return r2, adjusted, value, None if value is None else 1.0 - value / total


def _table(
    terms: tuple[Term, ...], fitted: LeastSquares, s: float | None, df: int
) -> tuple[FittedTerm, ...]:
    rows = []
    for i, term in enumerate(terms):
        value = float(fitted.coefficients[i])
        if not s:
            rows.append(FittedTerm(term.name, value, None, None, None))
            continue
        se = s * float(np.sqrt(fitted.covariance[i, i]))
        t = value / se
        rows.append(FittedTerm(term.name, value, se, t, float(2 * stdtr(df, -abs(t)))))
    return tuple(rows)


def _runs(
    study: Study, rows: IntArray, y: FloatArray, fitted: LeastSquares, *, exact_fit: bool
) -> tuple[RunDiagnosis, ...]:
    outer, cook = studentized(fitted), cook_distance(fitted)
    known = not exact_fit
    return tuple(
        RunDiagnosis(
            row=study.runs.rows[row],
            observed=float(y[i]),
            fitted=float(fitted.fitted[i]),
            residual=float(fitted.residuals[i]),
            leverage=float(fitted.leverage[i]),
            studentized=float(outer[i]) if known and np.isfinite(outer[i]) else None,
            cook=float(cook[i]) if known and np.isfinite(cook[i]) else None,
            weight=float(fitted.weight[i]),
        )
        for i, row in enumerate(rows)
    )
