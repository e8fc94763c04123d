"""What the reader of a recommendation should know beside it, worst first."""

from __future__ import annotations

import numpy as np

from wideberth.decide.problem import Problem
from wideberth.decide.region import inside
from wideberth.fit.records import Model, level_names, surface
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_coded
from wideberth.study.records import Finding, FloatArray, Setting
from wideberth.study.resets import seldom_reset
from wideberth.surface.explored import contains

_NEAR = 0.5
"""How near a failed run must lie in every factor, coded, beyond the room, to be named."""
_ORDER = {"do not use": 0, "look": 1, "fine": 2}


def rests_on_unusable(problem: Problem) -> bool:
    """Tell whether a goal or limit rests on a model that must not be used."""
    return any(
        model.grade == "do not use" and model.response in _used(problem)
        for model in problem.models.models
    )


def choice_findings(
    problem: Problem,
    levels: tuple[int, ...],
    x: FloatArray,
    *,
    asked: bool,
    equals: tuple[Setting, ...],
    off_steps: bool,
) -> tuple[Finding, ...]:
    """Collect the findings on a setting x (k,): the models' own, then those of the setting.

    ``equals`` are other settings that score the same; ``off_steps`` says that no settable setting
    was found and x is not on the steps.
    """
    found = [
        finding
        for model in problem.models.models
        if model.response in _used(problem)
        for finding in model.findings
        if finding.grade != "fine"
    ]
    found += [Finding("look", one.words()) for one in problem.study.left_out]
    found += seldom_reset(problem.study)
    found += _failed_near(problem, levels, x)
    found += _where(problem, x, asked=asked)
    found += _how_far_known(problem, levels, x)
    found += _ties(equals)
    if off_steps:
        found.append(
            Finding("look", "No setting on the settable steps serves; the one shown is between.")
        )
    found += [
        Finding("fine", f"Goal of {goal.response}: {goal.defaulted}.", goal.response)
        for goal in problem.goals
        if goal.defaulted
    ]
    return tuple(sorted(found, key=lambda finding: _ORDER[finding.grade]))


def _used(problem: Problem) -> set[str]:
    return {goal.response for goal in problem.goals} | {side.response for side in problem.sides}


def _failed_near(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> list[Finding]:
    """Warn of runs that failed at the setting's levels and near it in every numeric factor."""
    study = problem.study
    runs = study.runs
    away = np.abs(to_coded(study.numeric, runs.numeric_actual) - x)
    near = (away <= _NEAR + np.maximum(problem.room.below, problem.room.above)).all(axis=1)
    near &= (runs.levels == np.array(levels, dtype=np.int64)).all(axis=1)
    found = []
    for i in np.flatnonzero(near):
        if runs.kind[i] == "failed":
            why = f": {runs.note[i]}" if runs.note[i] else ""
            text = f"The run in row {runs.rows[i]} failed near this setting{why}."
            found.append(Finding("look", text))
    return found


def _where(problem: Problem, x: FloatArray, *, asked: bool) -> list[Finding]:
    study = problem.study
    if asked and not inside(problem.region, x):
        return [
            Finding(
                "do not use",
                "The setting lies outside the region that may be searched: what is predicted"
                " there is extrapolation, not evidence.",
            )
        ]
    found = []
    if not bool(contains(problem.explored, x)):
        found.append(
            Finding(
                "look",
                "The setting lies outside the region that the runs explored, as [region] keep"
                " asks for: its predictions are extrapolation.",
            )
        )
    if asked and not inside(problem.tight, x):
        held = ", ".join(factor.name for factor in study.numeric if factor.tolerance)
        found.append(
            Finding("look", f"The room of the tolerances ({held}) reaches beyond the region.")
        )
    return found


def _how_far_known(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> list[Finding]:
    """Say where the setting has more leverage than any run, or a combination was never run."""
    study, found = problem.study, []
    for model in problem.models.models:
        if model.response not in _used(problem) or not model.runs:
            continue
        here = _leverage(problem, model, levels, x)
        largest = max(run.leverage for run in model.runs)
        if here > 1.0 and here > largest:
            found.append(
                Finding(
                    "look",
                    f"The setting has leverage {here:.2f} on {model.response}, more than any run:"
                    " its prediction rests on the shape of the model, not on runs near by.",
                    model.response,
                )
            )
    if study.categorical:
        fitted = study.runs.levels[study.runs.fitted]
        if not (fitted == np.array(levels)).all(axis=1).any():
            chosen = ", ".join(
                f"{name} {level}" for name, level in level_names(study.categorical, levels).items()
            )
            found.append(
                Finding(
                    "look", f"The combination {chosen} was never run; its effects are added up."
                )
            )
    return found


def _leverage(problem: Problem, model: Model, levels: tuple[int, ...], x: FloatArray) -> float:
    terms = features(x)
    return float(terms @ surface(model, problem.study, levels=levels).covariance @ terms)


def _ties(equals: tuple[Setting, ...]) -> list[Finding]:
    if not equals:
        return []
    shown = "; ".join(
        ", ".join(
            f"{name} {value:.4g}" if isinstance(value, float) else f"{name} {value}"
            for name, value in setting.items()
        )
        for setting in equals[:3]
    )
    return [
        Finding(
            "look",
            f"The goals do not tell the setting from others that score the same ({shown}); the"
            " one that stands farthest from its limits was taken.",
        )
    ]
