"""What a finished two-level stage says: curvature, effects, and what to do next.

The model of a stage is first order with the products that the runs can tell apart, blocks and
levels, plus one column for the curvature: the two-level runs against the centre runs.

References
----------
Box and Wilson (1951), J. Royal Statistical Society B 13, 1-45 (steepest ascent; from memory); the
single-degree-of-freedom curvature test as in Montgomery, Design and Analysis of Experiments, on
two-level designs with centre points (from memory). That curvature is looked for with centre runs
before axial runs are added is common practice.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import fdtrc, stdtr, stdtrit

from wideberth.errors import refusal
from wideberth.fit.lack_of_fit import replicate_groups
from wideberth.fit.least_squares import (
    LeastSquares,
    independent_columns,
    is_noise_free,
    least_squares,
)
from wideberth.plan.model import PlannedModel, planned_model
from wideberth.plan.path import steepest_path
from wideberth.plan.quality import centre_and_corners, curvature_column, detectable_change
from wideberth.plan.records import Curvature, Decision, Effect, Path, Stage, StageResponse
from wideberth.plan.safety import earlier_models
from wideberth.study.records import BoolArray, FloatArray, Goal, Response, Study

_LEVEL = 0.05
_TWO_SIDED = 0.975


def finished_stage(study: Study, *, response: str | None = None) -> Stage:
    """Judge a finished two-level stage and say what to do next.

    Parameters
    ----------
    study : Study
        Whose fitted runs are two-level and centre runs only.
    response : str, optional
        The response that a path should follow; default: the goal of the highest priority.

    Raises
    ------
    RefusedError
        When the runs are no two-level stage with centre runs, or nothing was measured.
    """
    runs = _fitted_rows(study)
    centre, corner = centre_and_corners(runs)
    if not study.numeric or not corner.any() or not (centre | corner).all():
        raise refusal(
            "the runs are not a two-level stage, or go beyond one",
            study.runs.file,
            "plan one with design = 'two-level'; with axial runs there, use fit and recommend",
        )
    judged = tuple(_judged(runs, i, r) for i, r in enumerate(study.measured))
    followed = _followed(study, response)
    path = None
    if followed is not None:
        place = study.measured.index(followed)
        goal = followed.goal or Goal("more")
        path = _path(study, judged[place], goal)
    return Stage(judged, _decision(study, judged, path), path)


def _fitted_rows(study: Study) -> Study:
    """Keep the runs that may be fitted."""
    return _some_rows(study, study.runs.fitted & np.isfinite(study.runs.measured).any(axis=1))


def _some_rows(study: Study, keep: BoolArray) -> Study:
    runs, places = study.runs, np.flatnonzero(keep)
    return replace(
        study,
        runs=replace(
            runs,
            rows=tuple(runs.rows[i] for i in places),
            numeric_actual=runs.numeric_actual[places],
            levels=runs.levels[places],
            measured=runs.measured[places],
            block=runs.block[places],
            kind=tuple(runs.kind[i] for i in places),
            order=None,
            note=("",) * len(places),
        ),
    )


def _judged(study: Study, column: int, response: Response) -> StageResponse:
    """Fit one response's stage model."""
    study = _some_rows(study, np.isfinite(study.runs.measured[:, column]))
    y = study.runs.measured[:, column]
    model = planned_model(study, 2)
    bend = curvature_column(study)
    matrix = model.matrix if bend is None else np.column_stack([model.matrix, bend])
    seen = bend is not None and len(independent_columns(matrix)) == matrix.shape[1]
    fit = least_squares(matrix if seen else model.matrix, y)
    s = None if fit.df == 0 else 0.0 if is_noise_free(fit, y) else float(np.sqrt(fit.rss / fit.df))
    return StageResponse(
        response=response.name,
        unit=response.unit,
        n_runs=len(y),
        s=s,
        df=fit.df,
        mean=float(y.mean()),
        slopes=_slopes(study, model, fit),
        effects=_effects(study, model, fit, s),
        curvature=_curvature(study, fit, y) if seen else None,
        aliases=tuple(names for names in model.aliases if "^2" not in names),
    )


def _slopes(study: Study, model: PlannedModel, fit: LeastSquares) -> tuple[float, ...]:
    """Give the coded slope of each numeric factor; 0 where it cannot be told apart."""
    slopes = [0.0] * len(study.numeric)
    for i, term in enumerate(model.terms):
        plain = term.contrast is None and term.block is None
        if plain and 1 <= term.monomial <= len(study.numeric):
            slopes[term.monomial - 1] = float(fit.coefficients[i])
    return tuple(slopes)


def _effects(
    study: Study, model: PlannedModel, fit: LeastSquares, s: float | None
) -> tuple[Effect, ...]:
    """Give the change from low to high of each term with its interval, largest first."""
    found = []
    for i, term in enumerate(model.terms):
        if term.name == "1" or term.block is not None:
            continue
        # from low to high is two coded units; a contrast of levels counts as it is
        stretch = 1.0 if term.contrast is not None and term.monomial == 0 else 2.0
        change = stretch * float(fit.coefficients[i])
        interval, p = None, None
        if s is not None and s > 0:
            se = stretch * s * float(np.sqrt(fit.covariance[i, i]))
            reach = float(stdtrit(fit.df, _TWO_SIDED)) * se
            interval = (change - reach, change + reach)
            p = 2 * float(stdtr(fit.df, -abs(change) / se))
        found.append(Effect(term.name, change, interval, p))
    return tuple(sorted(found, key=lambda effect: -abs(effect.change)))


def _curvature(study: Study, fit: LeastSquares, y: FloatArray) -> Curvature:
    """Test the last column against pure error."""
    difference, variance = float(fit.coefficients[-1]), float(fit.covariance[-1, -1])
    groups = replicate_groups(study, np.arange(len(y)))
    means = np.bincount(groups, weights=y) / np.bincount(groups)
    df = len(y) - len(means)
    ss_pure = float(((y - means[groups]) ** 2).sum())
    if df == 0 or ss_pure <= 1e-20 * float((y**2).sum()):
        return Curvature(difference, None, None, None, df, None)
    s = float(np.sqrt(ss_pure / df))
    f = difference**2 / variance / s**2
    reach = float(stdtrit(df, _TWO_SIDED)) * s * float(np.sqrt(variance))
    smallest = detectable_change(variance, df)
    return Curvature(
        difference=difference,
        interval=(difference - reach, difference + reach),
        f=f,
        p=float(fdtrc(1, df, f)),
        df=df,
        detectable=None if smallest is None else smallest * s,
    )


def _followed(study: Study, response: str | None) -> Response | None:
    if response is not None:
        for one in study.measured:
            if one.name == response:
                return one
        names = ", ".join(one.name for one in study.measured)
        raise refusal(f"no measured response is called {response}", "--response", f"use {names}")
    wanted = [one for one in study.measured if one.goal is not None]
    if not wanted:
        return None
    return max(wanted, key=lambda one: one.goal.priority if one.goal else 0.0)


def _path(study: Study, judged: StageResponse, goal: Goal) -> Path | None:
    toward = {"more": 1.0, "less": -1.0}.get(goal.want)
    if toward is None:
        ideal = goal.ideal or (judged.mean, judged.mean)
        toward = 1.0 if judged.mean < sum(ideal) / 2 else -1.0
    return steepest_path(study, judged, toward, earlier_models(study))


def _decision(study: Study, judged: tuple[StageResponse, ...], path: Path | None) -> Decision:
    """Say in plain words whether to go on with the path, add axial runs, or repeat."""
    matters = {r.name for r in study.responses if r.goal is not None or r.limit is not None}
    counted = [one for one in judged if one.response in matters] or list(judged)
    bent = [one for one in counted if one.curvature and one.curvature.p is not None]
    untested = [one.response for one in counted if one not in bent]
    if untested:
        return Decision(
            "repeat",
            f"Curvature of {', '.join(untested)} cannot be tested: add three to five centre runs,"
            " so that there is pure error to hold it against.",
        )
    shown = [one for one in bent if one.curvature and (one.curvature.p or 0.0) < _LEVEL]
    if shown:
        return Decision(
            "axial",
            f"Curvature is seen in {_names(shown)} (p = {_smallest_p(shown):.2g}): add axial runs,"
            " so that a second-order model can be fitted.",
        )
    active = [e for one in counted for e in one.effects if e.p is not None and e.p < _LEVEL]
    if not active:
        return Decision(
            "repeat",
            "No effect stands out from the noise and no curvature is seen: repeat the runs, or"
            " widen low to high where that is safe.",
        )
    blind = [
        one
        for one in counted
        if one.curvature is not None
        and one.curvature.detectable is not None
        and one.curvature.detectable > max((abs(e.change) for e in one.effects), default=0.0)
    ]
    if blind:
        return Decision(
            "repeat",
            f"No curvature is seen, but one as large as the largest effect on {_names(blind)} would"
            " have been missed too often (found in fewer than 80 of 100): add centre runs.",
        )
    if path is None or not path.steps:
        why = path.stopped if path is not None else "no goal says which way is better."
        return Decision(
            "axial",
            "No curvature is seen and effects stand out, but there is no path to follow:"
            f" {why} Add axial runs to learn the shape inside.",
        )
    return Decision(
        "path",
        f"No curvature is seen and effects stand out: go on along the path of {path.response}, one"
        f" run at a time. {path.rule}",
    )


def _names(some: list[StageResponse]) -> str:
    return ", ".join(one.response for one in some)


def _smallest_p(some: list[StageResponse]) -> float:
    return min(one.curvature.p for one in some if one.curvature and one.curvature.p is not None)
