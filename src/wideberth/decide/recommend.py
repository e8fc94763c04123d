"""The step that names the setpoint, or says why none can be named.

Guards are tried from the surest down: as stated (`met`), as for a setting fixed in advance
(`provisional`), on the fitted means (`unproven`, else `conflict`). What is shown under a status
other than `met` is never called a recommendation.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from wideberth.decide.answers import Answer, best_answer, nearest_answer, reaches
from wideberth.decide.confirmation import confirmation_ranges, confirmation_runs
from wideberth.decide.conflicts import can_hold, conflict_of_steps, side_text, smallest_conflicts
from wideberth.decide.edges import edge_sentences
from wideberth.decide.emptiness import none_holds
from wideberth.decide.findings import choice_findings, rests_on_unusable
from wideberth.decide.judge import (
    constraint_verdicts,
    factor_surroundings,
    limit_verdicts,
    overall_desirability,
    own_setting,
    predictions,
    read_setting,
)
from wideberth.decide.overlooked import until_nothing_is_overlooked
from wideberth.decide.pins import with_pins
from wideberth.decide.problem import Mode, Problem, arena, build_problem, mode_of
from wideberth.decide.proving import Gains, possible_gains
from wideberth.decide.records import Bare, Choice, LimitVerdict, Status
from wideberth.decide.region import inside
from wideberth.decide.search import Found
from wideberth.decide.settable import settable_grid
from wideberth.errors import refusal
from wideberth.fit.records import Models
from wideberth.progress import Progress, silent
from wideberth.study.records import Setting


def recommend(
    models: Models,
    *,
    seed: int | None = None,
    at: Setting | None = None,
    fix: Setting | None = None,
    room: bool = True,
    progress: Progress = silent,
) -> Choice:
    """Name the best compromise of the goals inside all guarded limits, or judge a given setting.

    Parameters
    ----------
    models : Models
        What `fit` gave.
    seed : int, optional
        Of the simulated guard; the study's own by default.
    at : Setting, optional
        A setting of the person's own, own units, to be judged instead of searching.
    fix : Setting, optional
        Some factors fixed at these values, own units; the rest is settled around them.
    room : bool
        False asks for the bare optimum, without the room of the tolerances.
    progress : Progress
        Told how far the search is.

    Returns
    -------
    Choice
        Whose ``status`` says whether the setpoint is a recommendation.

    Raises
    ------
    RefusedError
        When the study states neither a goal nor a limit, when nothing is left to search, or when
        the given setting cannot be read.
    """
    return solve(models, seed=seed, at=at, fix=fix, room=room, progress=progress)[1]


def solve(
    models: Models,
    *,
    seed: int | None = None,
    at: Setting | None = None,
    fix: Setting | None = None,
    room: bool = True,
    progress: Progress = silent,
) -> tuple[Problem, Choice]:
    """Do as `recommend`, and give the problem as well, for steps that go on from it."""
    study = models.study
    if not any(response.goal or response.limit for response in study.responses):
        raise refusal(
            "no response has a goal or a limit",
            "study.toml",
            "state what at least one response is wanted to be, or what it must not exceed",
        )
    if at is not None and fix:
        raise refusal(
            "a setting cannot be judged and sought at once", "--at and --fix", "give one of them"
        )
    chosen_seed = study.seed if seed is None else seed
    progress("guards", 0.0)
    problem = build_problem(models, seed=chosen_seed, room=room)
    if fix:
        problem = with_pins(problem, fix)
    progress("search", 0.4)
    if at is not None:
        choice = _judge_given(problem, at)
    else:
        problem, choice = until_nothing_is_overlooked(problem, _choose)
        if choice.unrounded.setpoint is not None:
            place = read_setting(study, choice.unrounded.setpoint)
            problem = replace(problem, known=(*problem.known, place))
    progress("search", 1.0)
    return problem, replace(choice, seed=chosen_seed)


def _choose(problem: Problem) -> Choice:
    answer = best_answer(problem, "simultaneous") if problem.possible else None
    if answer is not None:
        status: Status = "met" if reaches(answer) else "unreached"
        return _describe(problem, answer, status)
    pointwise = best_answer(problem, "pointwise") if problem.possible else None
    if pointwise is not None:
        none = none_holds(problem, "simultaneous", stepped=True)
        return replace(_describe(problem, pointwise, "provisional"), none_holds=none)
    status, mode = _why_not(problem)
    if not problem.possible and status == "unproven":
        shown = best_answer(problem, "means")
        if shown is not None:
            return _describe(problem, shown, status)
    nearest = _describe(problem, nearest_answer(problem, mode), status)
    if status == "unproven":
        return replace(nearest, none_holds=none_holds(problem, mode, stepped=True))
    every = tuple(range(len(problem.sides)))
    between = can_hold(problem, mode, every)
    conflicts = (
        (conflict_of_steps(problem, mode),) if between else smallest_conflicts(problem, mode)
    )
    proven = any(conflict.proven for conflict in conflicts)
    return replace(nearest, conflicts=conflicts, none_holds=proven)


def _why_not(problem: Problem) -> tuple[Status, Mode]:
    """Tell limits that cannot hold together from limits that these runs cannot prove."""
    every = tuple(range(len(problem.sides)))
    if not can_hold(problem, "means", every):
        return "conflict", "means"
    if not problem.possible:
        return "unproven", "means"
    provable = all(can_hold(problem, "pointwise", (limit,)) for limit in every)
    return ("conflict" if provable else "unproven"), "pointwise"


def _judge_given(problem: Problem, at: Setting) -> Choice:
    """Judge a setting of the person's own by the same ladder of guards."""
    levels, x = read_setting(problem.study, at)
    modes: tuple[Mode, ...] = ("simultaneous", "pointwise", "means")
    statuses: tuple[Status, ...] = ("met", "provisional", "unproven")
    status: Status = "conflict"
    constraints = constraint_verdicts(problem, x)
    for mode, reached in zip(modes, statuses, strict=True):
        if mode != "means" and not problem.possible:
            continue
        verdicts = limit_verdicts(problem, arena(problem, levels, mode), x)
        holds = all(v.met or (not problem.possible and mode == "means") for v in verdicts)
        if holds and all(verdict.met for verdict in constraints):
            status = reached
            break
    score = overall_desirability(problem, levels, x)
    if status == "met" and score == 0.0:
        status = "unreached"
    if not inside(problem.region, x):
        status = "unsupported"
    found = Found(x, 0.0, np.zeros(0), (), np.zeros((0, len(x))))
    return _describe(problem, Answer(levels, "simultaneous", found, found), status, asked=True)


def _describe(
    problem: Problem,
    answer: Answer,
    status: Status,
    *,
    asked: bool = False,
) -> Choice:
    study, levels, x = problem.study, answer.levels, answer.settable.x
    stated = mode_of(problem)
    rows = arena(problem, levels, stated)
    verdicts = limit_verdicts(problem, rows, x)
    free = answer.free.x
    if rests_on_unusable(problem):
        status = "unsupported"
    score = overall_desirability(problem, levels, x)
    bare_score = overall_desirability(problem, levels, free)
    gains = Gains(None, None)
    if answer.everywhere and score is not None and bare_score is not None:
        grid = settable_grid(study.numeric, problem.tight)
        gains = possible_gains(problem, answer.mode, answer.everywhere, bare_score, score, grid)
    edge = () if asked else edge_sentences(study, rows, free)
    return Choice(
        status=status,
        asked=asked,
        seed=study.seed,
        setpoint=own_setting(study, levels, x),
        desirability=score,
        proof_gap=gains.settable,
        unrounded=Bare(
            setpoint=own_setting(study, levels, free),
            desirability=bare_score,
            proof_gap=gains.free,
        ),
        goals=problem.goals,
        predictions=predictions(problem, levels, x),
        limits=verdicts,
        constraints=constraint_verdicts(problem, x),
        ruling=_ruling(verdicts),
        factors=factor_surroundings(problem, x),
        edge=edge,
        conflicts=(),
        none_holds=None,
        confirmation=confirmation_runs(problem, levels, x) if status == "provisional" else None,
        confirm=confirmation_ranges(problem, levels, x),
        findings=choice_findings(
            problem,
            levels,
            x,
            asked=asked,
            equals=tuple(own_setting(study, levels, other) for other in answer.free.equals),
            off_steps=answer.off_steps,
        ),
    )


def _ruling(verdicts: tuple[LimitVerdict, ...]) -> str:
    """Word the limit with the smallest margin."""
    judged = [verdict for verdict in verdicts if verdict.margin is not None]
    if not judged:
        return ""
    first = min(judged, key=lambda verdict: verdict.margin or 0.0)
    return side_text(first.response, first.side, first.value, first.unit)
