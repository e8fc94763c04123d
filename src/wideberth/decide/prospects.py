"""What more evidence would buy, and what these runs can still say where they prove no setpoint.

Where guarded limits are proven, a setting that meets them only as if it had been fixed in advance
may score higher: it is provisional, and confirmation runs decide. Where they are not, a batch
standard deviation pooled from production history may prove them, or a smaller share or
confidence. Where no setting reaches every goal, each goal is asked for its best value alone.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.aims import LEAST_POOR
from wideberth.decide.answers import Answer, best_answer
from wideberth.decide.confirmation import Chance, chances_of_proof, confirmation_runs
from wideberth.decide.conflicts import can_hold
from wideberth.decide.judge import overall_desirability, own_setting, read_setting
from wideberth.decide.problem import Problem, arena, build_problem
from wideberth.decide.records import Choice, Confirmation
from wideberth.decide.search import seek
from wideberth.fit.draws import Draws
from wideberth.fit.records import Model, Models, surface
from wideberth.progress import Progress, silent
from wideberth.quadratic.terms import features
from wideberth.study.records import Setting

HISTORY_DF = 60
"""Degrees of freedom of the production history that is asked about."""
_WORTH = 1e-3
_ROUNDS = 7
_LEAST = 0.5


@dataclass(frozen=True, slots=True)
class Provisional:
    """A setting that meets every guard as if it had been fixed in advance, and what would prove it.

    ``gain`` is its D less the proven setpoint's, ``None`` where there is none or without goals.
    ``chances`` of proving it by so many runs are ``None`` where nothing can be drawn.
    """

    setpoint: Setting
    desirability: float | None
    gain: float | None
    confirmation: Confirmation | None
    chances: tuple[Chance, ...] | None


@dataclass(frozen=True, slots=True)
class History:
    """What a pooled batch sd with ``df`` degrees of freedom would buy, were it the one found here.

    ``desirability`` is that of the setpoint it would prove, ``None`` without goals or setpoint.
    """

    df: int
    proves: bool
    setpoint: Setting | None
    desirability: float | None


@dataclass(frozen=True, slots=True)
class Reach:
    """The best fitted mean of one response with a goal inside all limits, and whether it counts."""

    response: str
    unit: str
    best: float
    poor: float
    reached: bool


@dataclass(frozen=True, slots=True)
class Prospects:
    """What more evidence would buy.

    Attributes
    ----------
    provisional : Provisional or None
    history : History or None
        Where guarded limits are not proven.
    confidence, share : float or None
        The largest for all guarded limits together (``share``: of the share guards, at their
        stated confidence) that these runs can prove somewhere, rounded down to two digits;
        ``None`` where not asked for, or where not even a half can be proven.
    asked : tuple of str
        Which of ``confidence`` and ``share`` were asked for.
    reach : tuple of Reach
        Where no setting reaches every goal.
    """

    provisional: Provisional | None = None
    history: History | None = None
    confidence: float | None = None
    share: float | None = None
    asked: tuple[str, ...] = ()
    reach: tuple[Reach, ...] = ()


def prospects(
    problem: Problem, choice: Choice, draws: Draws | None, *, progress: Progress = silent
) -> Prospects:
    """Say what more evidence would buy; empty where the person gave the setting.

    Parameters
    ----------
    problem, choice : Problem, Choice
        From `solve`.
    draws : Draws or None
        For the chances of confirmation runs.
    """
    if choice.asked or choice.setpoint is None or not problem.possible:
        return Prospects()
    if choice.status == "met":
        return Prospects(provisional=_beyond_proof(problem, choice, draws))
    if choice.status == "unreached":
        return Prospects(reach=_reaches(problem))
    if choice.status not in ("provisional", "unproven"):
        return Prospects()
    levels, x = read_setting(problem.study, choice.setpoint)
    shown = Provisional(
        choice.setpoint,
        choice.desirability,
        None,
        confirmation_runs(problem, levels, x),
        None if draws is None else chances_of_proof(problem, draws, levels, x, choice.seed),
    )
    progress("prospects", 0.1)
    history = _history(problem, choice.seed)
    kinds = {problem.guarding[side.response].guard.kind for side in problem.sides} - {"none"}
    asked = (*(("confidence",) if kinds else ()), *(("share",) if "share" in kinds else ()))
    found: dict[str, float | None] = {}
    for done, what in enumerate(asked):
        progress("prospects", 0.3 + 0.3 * done)
        found[what] = _most_provable(problem, what, choice.seed)
    return Prospects(
        provisional=shown,
        history=history,
        confidence=found.get("confidence"),
        share=found.get("share"),
        asked=asked,
    )


def _beyond_proof(problem: Problem, choice: Choice, draws: Draws | None) -> Provisional | None:
    """Find the setting that pointwise guards would allow, if it scores worth a confirmation."""
    chosen = [g for g in problem.guarding.values() if g.smooth is not None and g.factor > 1.0]
    if not chosen or not problem.goals:
        return None
    answer = best_answer(problem, "pointwise")
    if answer is None or choice.desirability is None:
        return None
    score = _score(problem, answer)
    if score is None or score - choice.desirability < _WORTH:
        return None
    levels, x = answer.levels, answer.settable.x
    return Provisional(
        own_setting(problem.study, levels, x),
        score,
        score - choice.desirability,
        confirmation_runs(problem, levels, x),
        None if draws is None else chances_of_proof(problem, draws, levels, x, choice.seed),
    )


def _score(problem: Problem, answer: Answer) -> float | None:
    return overall_desirability(problem, answer.levels, answer.settable.x)


def _history(problem: Problem, seed: int) -> History | None:
    """Solve again with as many degrees of freedom as a production history would give."""
    guards = [g for g in problem.guarding.values() if g.smooth is not None]
    if all(g.guard.df >= HISTORY_DF for g in guards):
        return None
    models = tuple(_with_history(model) if model.s else model for model in problem.models.models)
    anew = _guarded_anew(problem, replace(problem.models, models=models), seed)
    answer = best_answer(anew, "simultaneous")
    if answer is None:
        return History(HISTORY_DF, proves=False, setpoint=None, desirability=None)
    return History(
        HISTORY_DF,
        proves=True,
        setpoint=own_setting(problem.study, answer.levels, answer.settable.x),
        desirability=_score(problem, answer),
    )


def _with_history(model: Model) -> Model:
    df, between = max(model.df_error, HISTORY_DF), model.between
    within = None if between is None else replace(between, df_within=df)
    return replace(model, df_error=df, between=within)


def _guarded_anew(problem: Problem, models: Models, seed: int) -> Problem:
    """Compute the guards again for changed models or limits; region, room and goals are kept."""
    anew = build_problem(models, seed=seed, room=False)
    return replace(problem, models=models, guarding=anew.guarding)


def _most_provable(problem: Problem, what: str, seed: int) -> float | None:
    """Find the largest confidence or share, for all guards together, that holds somewhere."""
    limits = [response.limit for response in problem.study.responses if response.limit]
    stated = max(getattr(limit, what) for limit in limits)
    low, high = _LEAST + 0.01, stated
    if not _provable(problem, what, low, seed):
        return None
    for _ in range(_ROUNDS):
        # halfway on the scale of the risk, where shares near 1 lie apart
        middle = 1.0 - float(np.sqrt((1.0 - low) * (1.0 - high)))
        low, high = (middle, high) if _provable(problem, what, middle, seed) else (low, middle)
    return _rounded_down(low)


def _provable(problem: Problem, what: str, value: float, seed: int) -> bool:
    """Tell whether some setting holds all limits when no guard asks for more than this."""
    study = problem.study
    responses = tuple(
        replace(
            response,
            limit=replace(response.limit, **{what: min(value, getattr(response.limit, what))}),
        )
        if response.limit is not None
        else response
        for response in study.responses
    )
    models = replace(problem.models, study=replace(study, responses=responses))
    every = tuple(range(len(problem.sides)))
    return can_hold(_guarded_anew(problem, models, seed), "simultaneous", every)


def _rounded_down(value: float) -> float:
    """Round a share down so that two digits of what it lacks remain."""
    digits = 1 - int(np.floor(np.log10(1.0 - value)))
    return float(np.floor(value * 10**digits) / 10**digits)


def _reaches(problem: Problem) -> tuple[Reach, ...]:
    """Ask every goal alone for its best value inside all limits."""
    found = []
    for i, goal in enumerate(problem.goals):
        best = None
        for levels in problem.combinations:
            rows = arena(problem, levels, "simultaneous")
            alone = replace(rows, goals=(goal,), goal_means=rows.goal_means[i : i + 1])
            tried = seek(alone, LEAST_POOR)
            if tried is not None and (best is None or tried.score > best[0]):
                model = problem.models[goal.response]
                at = surface(model, problem.study, levels=levels)
                best = (tried.score, float(features(tried.x) @ at.coefficients))
        if best is not None:
            poor = goal.poor[0] if best[1] <= goal.ideal[0] else goal.poor[-1]
            found.append(Reach(goal.response, goal.unit, best[1], poor, best[0] > 0.0))
    return tuple(found)
