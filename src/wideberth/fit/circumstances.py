"""What was done to the data before a model was fitted, said with the model.

Runs left out with a reason, weights, repeated assays that were averaged, history that was pooled:
each is the person's statement, so each is repeated beside every answer that rests on it.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy.special import stdtrit

from wideberth.fit.columns import model_matrix
from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import Between, LeftOutRun, Model, Pooled, Term
from wideberth.fit.wording import with_unit
from wideberth.study.records import Assays, Finding, IntArray, Response, Study

_SIGNIFICANT = 0.05
_NEAR_ONE = 0.05
_FEW_BLOCKS = 5


def left_out_runs(
    study: Study,
    response: Response,
    terms: tuple[Term, ...],
    fit: LeastSquares,
    s: float | None,
    df: int,
) -> tuple[LeftOutRun, ...]:
    """Hold every run that is left out of a response's model against that model."""
    if study.every_run is None:
        return ()
    column = study.measured.index(response)
    every, used = study.every_run.measured[:, column], study.runs.measured[:, column]
    gone = np.isfinite(every) & ~np.isfinite(used) & study.every_run.fitted
    places: IntArray = np.flatnonzero(gone).astype(np.int64)
    rows = model_matrix(study, terms, places)
    weight = np.ones(len(every)) if study.runs.weight is None else study.runs.weight
    found = []
    for place, row in zip(places, rows, strict=True):
        expected = float(row @ fit.coefficients)
        interval = None
        if s is not None and df > 0:
            variance = float(row @ fit.covariance @ row) + 1.0 / float(weight[place])
            half = float(stdtrit(df, 0.975)) * s * float(np.sqrt(variance))
            interval = (expected - half, expected + half)
        number = study.runs.rows[place]
        found.append(
            LeftOutRun(
                number, _reason(study, response, number), float(every[place]), expected, interval
            )
        )
    return tuple(found)


def _reason(study: Study, response: Response, row: int) -> str:
    reasons = [
        stated.reason
        for stated in study.left_out
        if row in stated.rows and (not stated.responses or response.name in stated.responses)
    ]
    return "; ".join(dict.fromkeys(reasons))


def circumstances(study: Study, response: Response, model: Model) -> Iterator[Finding]:
    """Say what was done to the data of one model."""
    if response.derived is not None:
        yield Finding("fine", _derived(study, response), model.response)
    for run in model.left_out:
        yield Finding("fine", _left_out_words(run, model), model.response)
    if study.runs.weight is not None and model.runs:
        yield from _weights(model)
    if model.pooled is not None:
        yield _pooled(model, model.pooled)
    if model.between is not None:
        yield _between(model, model.between)
    assays = study.assays.get(response.name)
    if assays is not None and assays.counts[-1] > 1:
        yield _assays(model, assays, limited=response.limit is not None)


def _derived(study: Study, response: Response) -> str:
    named = {
        name for names in (response.derived.terms if response.derived else ()) for name in names
    }
    parts = [r.name for r in study.measured if r.name in named]
    return (
        f"{response.name}: computed from {' and '.join(parts)} run by run, then fitted like a"
        " measured response, so that their doubt carries through."
    )


def _left_out_words(run: LeftOutRun, model: Model) -> str:
    text = (
        f"{model.response}: row {run.row} is left out; it measured {run.observed:.4g}"
        f" {model.unit}".rstrip()
        + f", the other runs expect {run.expected:.4g}"
    )
    if run.interval is None:
        return text + "."
    low, high = run.interval
    text += f" ({low:.4g} to {high:.4g} for one value)"
    if low <= run.observed <= high:
        return text + ": by its value alone it would not stand out."
    return text + ": its value lies outside."


def _weights(model: Model) -> Iterator[Finding]:
    weights = np.array([run.weight for run in model.runs])
    if float(np.abs(np.log(weights)).min()) > _NEAR_ONE:
        text = (
            f"{model.response}: no run has weight 1 ({weights.min():.3g} to {weights.max():.3g}),"
            " yet guards and intervals speak of single batches of weight 1; a weight is the number"
            " of single batches that a row is worth."
        )
        yield Finding("look", text, model.response)


def _pooled(model: Model, pooled: Pooled) -> Finding:
    known = f"{with_unit(pooled.value, model.unit)} on {pooled.df} degrees of freedom"
    name = model.response
    if pooled.s_runs is None or pooled.p is None:
        text = f"{name}: the runs leave nothing to estimate the noise; it is the stated {known}."
        return Finding("look", text, name)
    own = f"{with_unit(pooled.s_runs, model.unit)} on {model.df_residual}"
    if pooled.p < _SIGNIFICANT:
        word = "more" if pooled.s_runs > pooled.value else "less"
        text = (
            f"{name}: the runs scatter {word} ({own}) than the stated {known} (p {pooled.p:.2g});"
            " pooling assumes that both are of one process."
        )
        return Finding("look", text, name)
    reach = [float(stdtrit(df, 0.95)) for df in (model.df_residual, model.df_error)]
    text = (
        f"{name}: {own} from the runs and the stated {known} make s"
        f" {with_unit(model.s or 0.0, model.unit)} on {model.df_error}; a one-sided 95 % bound then"
        f" stands {reach[1]:.2f} instead of {reach[0]:.2f} standard errors off."
    )
    return Finding("fine", text, name)


def _between(model: Model, between: Between) -> Finding:
    within, sd, batch = (
        with_unit(size, model.unit) for size in (between.s_within, between.sd, model.s or 0.0)
    )
    text = (
        f"{model.response}: standard deviation {within} within blocks and {sd} between them;"
        f" a batch in a new block varies by {batch}"
    )
    if between.df is None:
        return Finding("fine", f"{text} (the figure between blocks was stated).", model.response)
    text += f". The {between.n_blocks} blocks give {between.df} {_degrees(between.df)} for it"
    if between.df < _FEW_BLOCKS:
        text += ", so intervals and guards are wide; more blocks or a stated block_sd would help"
    return Finding("look" if between.df < _FEW_BLOCKS else "fine", text + ".", model.response)


def _degrees(df: int) -> str:
    return "degree of freedom" if df == 1 else "degrees of freedom"


def _assays(model: Model, assays: Assays, *, limited: bool) -> Finding:
    numbers = " or ".join(str(count) for count in assays.counts)
    text = f"{model.response}: each value is the mean of {numbers} assays of one batch"
    if assays.sd is not None and model.s:
        text += (
            f" (one assay: standard deviation {with_unit(assays.sd, model.unit)} on {assays.df}"
            " degrees of freedom)"
        )
    if limited:
        text += "; limits and intervals are on such a mean, not on a single assay"
    if len(assays.counts) > 1:
        text += "; values from fewer assays are less sure, which weights could say"
        return Finding("look", text + ".", model.response)
    return Finding("look" if limited else "fine", text + ".", model.response)
