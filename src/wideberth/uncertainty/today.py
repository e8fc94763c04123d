"""The setpoint held against today's setting: paired differences, and whether it is shown better.

Both settings are judged under the same draws, so what they share does not blur the difference.
The setpoint was picked where the noise flattered it and today's setting was not; the difference in
desirability is therefore corrected by the optimism of the draws.
"""

from __future__ import annotations

import numpy as np
from scipy.special import stdtrit

from wideberth.decide.conformance import held_shares, setting_sd
from wideberth.decide.judge import limit_verdicts, overall_desirability, predictions, read_setting
from wideberth.decide.problem import Problem, arena
from wideberth.decide.records import Choice
from wideberth.fit.draws import Draws
from wideberth.fit.records import Model, design_map
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray
from wideberth.uncertainty.cloud import desirability_at
from wideberth.uncertainty.records import Difference, Optimism, Today

_TWO_SIDED = 0.975
_LEAST_GAIN = 1e-6


def against_today(
    problem: Problem, choice: Choice, draws: Draws | None, optimism: Optimism | None
) -> Today | None:
    """Compare a choice with the study's ``[today]``; ``None`` where none is stated in full."""
    study = problem.study
    if choice.setpoint is None or not study.today:
        return None
    if any(factor.name not in study.today for factor in study.factors):
        return None
    today = {factor.name: study.today[factor.name] for factor in study.factors}
    there, here = read_setting(study, today), read_setting(study, choice.setpoint)
    differences = {
        model.response: _difference(problem, model, here, there) for model in problem.models.models
    }
    desirability, conformance = None, None
    if draws is not None and problem.goals:
        gained = desirability_at(problem, draws, *here) - desirability_at(problem, draws, *there)
        bias = 0.0 if optimism is None else max(optimism.desirability, 0.0)
        now = choice.desirability or 0.0
        before = overall_desirability(problem, *there) or 0.0
        desirability = Difference(
            now - before - bias,
            (
                float(np.quantile(gained, 1 - _TWO_SIDED)) - bias,
                float(np.quantile(gained, _TWO_SIDED)) - bias,
            ),
        )
    if draws is not None and problem.sides:
        sd = setting_sd(study)
        pair = [held_shares(problem, draws, *one, sd, choice.seed) for one in (here, there)]
        gained = pair[0] - pair[1]
        ends = np.quantile(gained, [1 - _TWO_SIDED, _TWO_SIDED])
        conformance = Difference(float(gained.mean()), (float(ends[0]), float(ends[1])))
    rows = arena(problem, there[0], "pointwise" if problem.possible else "means")
    broken = tuple(
        f"{v.response} {v.side}" for v in limit_verdicts(problem, rows, there[1]) if not v.met
    )
    return Today(
        setting=today,
        predictions=predictions(problem, *there),
        differences=differences,
        desirability=desirability,
        conformance=conformance,
        broken=broken,
        verdict=_verdict(desirability, conformance),
    )


def _difference(
    problem: Problem,
    model: Model,
    here: tuple[tuple[int, ...], FloatArray],
    there: tuple[tuple[int, ...], FloatArray],
) -> Difference:
    """Give the paired difference of one response, exact by the t distribution."""
    rows = [
        features(x) @ design_map(model, problem.study, levels=levels) for levels, x in (here, there)
    ]
    moved = rows[0] - rows[1]
    mean = float(moved @ model.coefficients)
    if model.exact or model.noise_free:
        return Difference(mean, (mean, mean))
    if model.s is None or not model.df_error:
        return Difference(mean, None)
    half = float(stdtrit(model.df_error, _TWO_SIDED)) * model.s
    half *= float(np.sqrt(moved @ model.covariance @ moved))
    return Difference(mean, (mean - half, mean + half))


def _verdict(desirability: Difference | None, conformance: Difference | None) -> str:
    """Say whether the setpoint is shown to be better than today."""
    judged = desirability or conformance
    if judged is None or judged.interval is None:
        return "Whether it is better than today cannot be said: there is nothing to judge it by."
    of = "overall desirability" if desirability is not None else "batches inside all limits"
    low, high = judged.interval
    if low > _LEAST_GAIN:
        return f"Shown to be better than today in {of}."
    if high < -_LEAST_GAIN:
        return f"Shown to be worse than today in {of}."
    return f"Not shown to be better than today in {of}."
