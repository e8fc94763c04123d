"""Whether each planned run may be made: allowed ranges, constraints, and guarded safety limits.

Limits are judged by the models of the runs already made, as for settings that were fixed in
advance: a plan does not search for the largest prediction.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.guards import Guard
from wideberth.decide.problem import judged_blocks, split_confidence
from wideberth.fit.models import fit
from wideberth.fit.records import Model, Models, surface
from wideberth.plan.settings import settable_bounds
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_coded
from wideberth.study.records import Finding, FloatArray, IntArray, Limit, NumericFactor, Study
from wideberth.surface.explored import contains, explored_region

_SLACK = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class Earlier:
    """What earlier runs teach: their models, and the responses whose limits every run must hold."""

    models: Models
    held: tuple[tuple[Model, Limit], ...]


def earlier_models(study: Study) -> Earlier | None:
    """Fit the runs already made; ``None`` when there are too few to fit anything."""
    runs = study.runs
    used = runs.fitted & np.isfinite(runs.measured).any(axis=1)
    settings = np.concatenate([runs.numeric_actual, runs.levels], axis=1)[used]
    if len(np.unique(settings, axis=0)) < 2:
        return None
    known = [bool(np.isfinite(runs.measured[used, i]).any()) for i in range(len(study.measured))]
    names = {r.name for r, there in zip(study.measured, known, strict=True) if there}
    kept = tuple(r for r in study.responses if r.formula is not None or r.name in names)
    usable = replace(
        study, responses=kept, runs=replace(runs, measured=runs.measured[:, np.array(known)])
    )
    models = fit(usable)
    held = tuple(
        (models[r.name], r.limit)
        for r in kept
        if r.limit is not None
        and (r.limit.guard == "share" if study.plan.hold is None else r.name in study.plan.hold)
    )
    return Earlier(models, held)


def offences(
    study: Study, earlier: Earlier | None, actual: FloatArray, levels: IntArray
) -> tuple[tuple[str, ...], ...]:
    """Say for each run why it must not be made.

    Parameters
    ----------
    actual : ndarray, shape (n, k)
        Numeric factors in own units, as they would be set.
    levels : ndarray of int, shape (n, c)

    Returns
    -------
    tuple of tuple of str, length n
        Empty for a run that may be made.
    """
    found: list[list[str]] = [[] for _ in actual]
    for j, factor in enumerate(study.numeric):
        for i, value in enumerate(actual[:, j]):
            said = _out_of_range(factor, float(value))
            if said:
                found[i].append(said)
    for i, (name, total, bound, word) in _broken_constraints(study, actual):
        found[i].append(f"{name}: the sum is {total:.6g}, which must be at {word} {bound:g}")
    for model, limit in earlier.held if earlier else ():
        for i, said in enumerate(_broken_limit(study, earlier, model, limit, actual, levels)):
            if said:
                found[i].append(said)
    return tuple(tuple(reasons) for reasons in found)


def may_run(
    study: Study, earlier: Earlier | None, actual: FloatArray, levels: IntArray
) -> list[bool]:
    """Tell which settings may be run, as `offences` judges them."""
    return [not reasons for reasons in offences(study, earlier, actual, levels)]


def _out_of_range(factor: NumericFactor, value: float) -> str:
    low, high = settable_bounds(factor)
    slack = _SLACK * (factor.high - factor.low)
    if low - slack <= value <= high + slack:
        return ""
    side, end = ("below", low) if value < low else ("above", high)
    what = f"{factor.name} at {value:.6g} {factor.unit} lies {side}"
    if factor.allowed is None:
        word = "low" if value < low else "high"
        return f"{what} {word} {end:g}, and no allowed range is stated for it"
    return f"{what} the allowed {end:g}"


def _broken_constraints(
    study: Study, actual: FloatArray
) -> list[tuple[int, tuple[str, float, float, str]]]:
    broken = []
    for constraint in study.constraints:
        weights = np.array([constraint.weights.get(f.name, 0.0) for f in study.numeric])
        totals = actual @ weights
        slack = _SLACK * float(np.abs(actual * weights).sum(axis=1).max(initial=1.0))
        for i, total in enumerate(totals.tolist()):
            if constraint.at_most is not None and total > constraint.at_most + slack:
                broken.append((i, (constraint.name, total, constraint.at_most, "most")))
            if constraint.at_least is not None and total < constraint.at_least - slack:
                broken.append((i, (constraint.name, total, constraint.at_least, "least")))
    return broken


def _broken_limit(
    study: Study,
    earlier: Earlier | None,
    model: Model,
    limit: Limit,
    actual: FloatArray,
    levels: IntArray,
) -> list[str]:
    """Judge one limit at every run by its guard, at the worst block."""
    if earlier is None:
        return [""] * len(actual)
    known = earlier.models.study
    x = to_coded(study.numeric, actual)
    guarded = guard_is_possible(model, limit)
    guard = Guard(
        limit.guard if guarded else "none",
        model.df_error,
        split_confidence(known, limit.confidence, limit.guard),
        limit.share,
    )
    worst = {"low": np.full(len(x), np.inf), "high": np.full(len(x), -np.inf)}
    terms = features(x)
    for at in {tuple(row) for row in levels.tolist()}:
        here = (levels == np.array(at, dtype=np.int64)).all(axis=1)
        for block in judged_blocks(model, known):
            one = surface(model, known, levels=at, block=block)
            mean = terms[here] @ one.coefficients
            leverage = np.einsum("np,pq,nq->n", terms[here], one.covariance, terms[here])
            extra = 0.0 if guard.kind == "mean" else 1.0
            degrees = model.degrees(leverage + extra, extra, guard.confidence)
            own = replace(guard, df=float(degrees.min(initial=np.inf)))
            reach = own.factor(np.maximum(leverage, 1e-12)) * one.s
            worst["low"][here] = np.minimum(worst["low"][here], mean - reach)
            worst["high"][here] = np.maximum(worst["high"][here], mean + reach)
    said = []
    how = f"guarded by {limit.guard}" if guarded else "as fitted; the guard needs spare runs"
    for low, high in zip(worst["low"], worst["high"], strict=True):
        text = ""
        if limit.high is not None and high > limit.high:
            text = f"could reach {high:.3g} {model.unit}, above its limit {limit.high:g}"
        elif limit.low is not None and low < limit.low:
            text = f"could fall to {low:.3g} {model.unit}, below its limit {limit.low:g}"
        said.append(f"{model.response} {text} ({how})" if text else "")
    return said


def guard_is_possible(model: Model, limit: Limit) -> bool:
    """Tell whether a limit's guard can be computed from a model."""
    return limit.guard == "none" or model.exact or model.noise_free or model.df_error > 0


def judging_findings(earlier: Earlier | None, actual: FloatArray) -> list[Finding]:
    """Say how far the judgement of the held limits can be trusted."""
    if earlier is None:
        return [
            Finding(
                "look",
                "No earlier model: the runs were checked against allowed ranges and constraints"
                " only, not against any limit on a response.",
            )
        ]
    study, found = earlier.models.study, []
    for model, limit in earlier.held:
        if model.grade == "do not use":
            text = f"{model.response}: the earlier model must not be used, so its limit is unproven"
            found.append(Finding("do not use", f"{text} at these runs.", model.response))
        if not guard_is_possible(model, limit):
            text = (
                f"{model.response}: the earlier runs leave no degrees of freedom, so its limit was"
                " held against the fitted mean without a guard."
            )
            found.append(Finding("look", text, model.response))
    outside = int((~contains(explored_region(study), to_coded(study.numeric, actual))).sum())
    if earlier.held and outside:
        names = ", ".join(model.response for model, _ in earlier.held)
        text = (
            f"{outside} runs lie outside what the earlier runs explored: there the limits of"
            f" {names} were judged by extrapolation. Make these runs last, watched, one at a time."
        )
        found.append(Finding("look", text))
        straight = [m.response for m, _ in earlier.held if not m.exact and not _has_squares(m)]
        if straight:
            text = (
                f"The earlier model of {', '.join(straight)} has no squares: beyond low and high it"
                " cannot know of curvature, and may be too kind."
            )
            found.append(Finding("look", text))
    return found


def _has_squares(model: Model) -> bool:
    return any(term.name.endswith("^2") for term in model.terms)
