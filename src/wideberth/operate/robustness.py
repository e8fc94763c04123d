"""The step that says what happens at a setting when the factors wander within their tolerances."""

from __future__ import annotations

import numpy as np

from wideberth.decide.conformance import Conformance, conformance, setting_sd
from wideberth.decide.judge import read_setting
from wideberth.decide.problem import Problem
from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice
from wideberth.decide.region import room_of
from wideberth.fit.draws import Draws
from wideberth.fit.records import Model, Models, surface
from wideberth.operate.drift import corrections, drifts, loosened
from wideberth.operate.records import Robustness, Wander
from wideberth.progress import Progress, silent
from wideberth.quadratic.box import extreme_over_box
from wideberth.quadratic.moments import setting_error_moments
from wideberth.quadratic.stack import Stack
from wideberth.study.records import Finding, FloatArray, Setting
from wideberth.uncertainty.assess import N_DRAWS, draws_for

_WORTH_TIGHTENING = 0.005


def robustness(
    models: Models,
    *,
    seed: int | None = None,
    at: Setting | None = None,
    n_draws: int = N_DRAWS,
    progress: Progress = silent,
) -> Robustness:
    """Say what setting error does at the recommended setting, or at one of the person's own.

    Raises
    ------
    RefusedError
        As `recommend`.
    """
    problem, choice = solve(models, seed=seed, at=at, progress=progress)
    return wander(problem, choice, draws_for(problem, choice, n_draws), progress=progress)


def wander(
    problem: Problem, choice: Choice, draws: Draws | None, *, progress: Progress = silent
) -> Robustness:
    """Say what setting error does at a choice that `solve` gave with its problem."""
    if choice.setpoint is None:
        reason = "There is no setting to judge."
        return Robustness(None, choice.seed, {}, None, {}, {}, (), (), "", reason, ())
    study = problem.study
    levels, x = read_setting(study, choice.setpoint)
    sd = setting_sd(study)
    responses = {
        model.response: _wander(problem, model, levels, x, sd) for model in problem.models.models
    }
    held, halved = None, {}
    if draws is not None:
        held = conformance(problem, draws, levels, x, sd, choice.seed)
        for done, j in enumerate(np.flatnonzero(sd)):
            progress("robustness", done / len(sd))
            tighter = np.where(np.arange(len(sd)) == j, sd / 2, sd)
            one = conformance(problem, draws, levels, x, tighter, choice.seed)
            if one is not None:
                halved[study.numeric[j].name] = one.mean
    first, advice = _advice(problem, responses, held, halved)
    missing = [f.name for f in study.numeric if f.tolerance is None]
    findings: tuple[Finding, ...] = ()
    if missing:
        text = f"{', '.join(missing)}: no tolerance is stated, so taken as held exactly."
        findings = (Finding("look", text),)
    return Robustness(
        setting=choice.setpoint,
        seed=choice.seed,
        responses=responses,
        conformance=held,
        halved=halved,
        doubled=loosened(problem, draws, levels, x, choice.seed),
        drifts=drifts(problem, draws, levels, x, choice.seed),
        corrections=corrections(problem, levels, x),
        tighten_first=first,
        advice=advice,
        findings=findings,
    )


def _wander(
    problem: Problem, model: Model, levels: tuple[int, ...], x: FloatArray, sd: FloatArray
) -> Wander:
    study, room = problem.study, room_of(problem.study)
    at = surface(model, study, levels=levels)
    stack = Stack.from_coefficients(at.coefficients, len(x))
    moments = setting_error_moments(stack, x, sd)
    variance = float(moments.variance)
    ends = [
        extreme_over_box(stack, x - room.below, x + room.above, largest=largest)[0]
        for largest in (False, True)
    ]
    batch = 0.0 if model.exact else model.s
    return Wander(
        unit=model.unit,
        shift=float(moments.shift),
        sd_setting=float(np.sqrt(variance)),
        sd_batch=batch,
        sd_total=None if batch is None else float(np.sqrt(variance + batch**2)),
        shares={
            f.name: float(part) / variance
            for f, part in zip(study.numeric, moments.parts, strict=True)
            if variance > 0
        },
        worst=(ends[0], ends[1]),
    )


def _advice(
    problem: Problem,
    responses: dict[str, Wander],
    held: Conformance | None,
    halved: dict[str, float],
) -> tuple[str, str]:
    """Name the tolerance to tighten first, and what it buys."""
    if not any(one.shares for one in responses.values()):
        return "", "No tolerance is stated, so nothing wanders; state tolerances to see what does."
    if held is None or not halved:
        asked = [responses[goal.response].shares for goal in problem.goals]
        total: dict[str, float] = {}
        for shares in asked:
            for name, share in shares.items():
                total[name] = total.get(name, 0.0) + share
        if not total:
            return "", "No response with a goal varies with the settings."
        most = max(total, key=lambda name: total[name])
        return most, f"{most} makes most of what setting error does to the responses with a goal."
    best = max(halved, key=lambda name: halved[name])
    gain = halved[best] - held.mean
    if gain < _WORTH_TIGHTENING:
        return "", (
            "No tolerance is worth tightening: halving any one of them gains less than"
            " 1 batch in 200."
        )
    return best, (
        f"Tighten {best} first: halving its tolerance takes the batches that meet every limit from"
        f" {100 * held.mean:.0f} to {100 * halved[best]:.0f} in 100."
    )
