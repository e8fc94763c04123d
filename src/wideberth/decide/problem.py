"""From fitted models to the problem that is searched: goals settled, guards and scales computed.

A problem holds everything that does not depend on the levels of categorical factors; ``arena``
gives the rows at one combination of levels and in one mode of guarding.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import product
from typing import Literal

import numpy as np

from wideberth.decide.arena import Arena, HardRow, LimitSide
from wideberth.decide.goals import settle_goals
from wideberth.decide.guards import Guard, SmoothGuard
from wideberth.decide.records import ResolvedGoal
from wideberth.decide.region import Region, Room, candidates, room_of, search_region, with_room
from wideberth.decide.search import find_peak
from wideberth.decide.simultaneous import simultaneous_factor
from wideberth.fit.draws import Draws
from wideberth.fit.records import Model, Models, design_map, surface
from wideberth.quadratic.terms import features, n_terms
from wideberth.study.records import FloatArray, Response, Study
from wideberth.surface.explored import Explored, explored_region

Mode = Literal["simultaneous", "pointwise", "means"]
"""How limits are guarded: as stated, as for settings fixed in advance, or not at all."""

Place = tuple[tuple[int, ...], FloatArray]
"""Levels of the categorical factors and a coded setting (k,) of the others."""


@dataclass(frozen=True, slots=True, eq=False)
class Guarding:
    """How one response's limit is guarded.

    Attributes
    ----------
    guard : Guard
    smooth : SmoothGuard or None
        ``None`` where there is no noise to guard against, or none that can be estimated.
    factor : float
        c of the simultaneous guard; 1 for a point fixed in advance.
    scale : float
        What a margin of 1 is, in the response's unit.
    in_batch_sd : bool
        Whether that is the batch standard deviation, else a hundredth of the response's range.
    possible : bool
        False when the guard needs degrees of freedom that the runs do not leave.
    """

    guard: Guard
    smooth: SmoothGuard | None
    factor: float
    scale: float
    in_batch_sd: bool
    possible: bool


@dataclass(frozen=True, slots=True, eq=False)
class Problem:
    """All that a search for the setpoint needs.

    ``region`` is everything that may be searched, ``tight`` what is left of it for the middle of
    a room. ``combinations`` are the levels of the categorical factors; ``known`` are places of
    the region worth a start of every search.
    """

    models: Models
    explored: Explored
    region: Region
    tight: Region
    room: Room
    goals: tuple[ResolvedGoal, ...]
    sides: tuple[LimitSide, ...]
    guarding: Mapping[str, Guarding]
    combinations: tuple[tuple[int, ...], ...]
    known: tuple[Place, ...] = ()

    @property
    def study(self) -> Study:
        """The study that the models came from."""
        return self.models.study

    @property
    def possible(self) -> bool:
        """Whether every guard can be computed at all."""
        return all(guarding.possible for guarding in self.guarding.values())


def build_problem(models: Models, *, seed: int, room: bool) -> Problem:
    """Settle goals, guards, scales, region and room of a study with its models."""
    study = models.study
    explored = explored_region(study)
    region = search_region(study, explored)
    stated = room_of(study)
    nil = np.zeros(len(study.numeric))
    kept = stated if room else Room(nil, nil)
    combinations = tuple(product(*(range(len(f.levels)) for f in study.categorical)))
    bare = tuple(bare_arena(region, levels) for levels in combinations)
    return Problem(
        models=models,
        explored=explored,
        region=region,
        tight=with_room(region, kept, study),
        room=kept,
        goals=settle_goals(models, lambda name, sign: _best(models, bare, name, sign)),
        sides=_limit_sides(study),
        guarding={
            response.name: _guarding(models, response, bare, seed)
            for response in study.responses
            if response.limit is not None
        },
        combinations=combinations,
    )


def arena(
    problem: Problem,
    levels: tuple[int, ...],
    mode: Mode,
    limits: tuple[int, ...] | None = None,
) -> Arena:
    """Write the rows at one combination of levels; ``limits`` keeps only those limit sides."""
    study, models = problem.study, problem.models
    kept = range(len(problem.sides)) if limits is None else limits
    rows = [row for limit in kept for row in _limit_rows(problem, limit, levels, mode)]
    goals = problem.goals
    means = [surface(models[goal.response], study, levels=levels).coefficients for goal in goals]
    p = n_terms(len(study.numeric))
    bare = bare_arena(problem.tight, levels)
    return replace(
        bare,
        room=problem.room,
        goals=goals,
        goal_means=np.array(means).reshape(len(goals), p),
        hard=(*rows, *bare.hard),
        near=tuple(x for where, x in problem.known if where == levels),
    )


def drawn_arena(problem: Problem, levels: tuple[int, ...], mode: Mode, draws: Draws) -> Arena:
    """Write the rows of every draw at one combination of levels, without room.

    Each draw has its own coefficients and its own s in the guards; what does not vary is repeated.
    """
    study, models, n = problem.study, problem.models, draws.n_draws
    sides = range(len(problem.sides))
    rows = [row for limit in sides for row in _limit_rows(problem, limit, levels, mode, draws)]
    p = n_terms(len(study.numeric))
    means = np.empty((len(problem.goals), n, p))
    for i, goal in enumerate(problem.goals):
        model = models[goal.response]
        means[i] = draws.of(model) @ design_map(model, study, levels=levels).T
    bare = bare_arena(problem.region, levels)
    return replace(bare, goals=problem.goals, goal_means=means, hard=(*rows, *bare.hard))


def mode_of(problem: Problem) -> Mode:
    """Guard limits as stated where that can be computed, else by the fitted means."""
    return "simultaneous" if problem.possible else "means"


def _limit_sides(study: Study) -> tuple[LimitSide, ...]:
    sides = []
    for response in study.responses:
        if response.limit is not None and response.limit.low is not None:
            sides.append(LimitSide(response.name, "low", response.limit.low))
        if response.limit is not None and response.limit.high is not None:
            sides.append(LimitSide(response.name, "high", response.limit.high))
    return tuple(sides)


def judged_blocks(model: Model, study: Study) -> tuple[int | None, ...]:
    """Give the blocks at which a limit must hold: each one that recurs, or none at all."""
    recur = study.future_blocks != "sample"
    if recur and any(term.block is not None for term in model.terms):
        return tuple(range(len(study.runs.blocks)))
    return (None,)


def _limit_rows(
    problem: Problem,
    limit: int,
    levels: tuple[int, ...],
    mode: Mode,
    draws: Draws | None = None,
) -> list[HardRow]:
    study, side = problem.study, problem.sides[limit]
    model, guarding = problem.models[side.response], problem.guarding[side.response]
    sign = 1.0 if side.side == "high" else -1.0
    rows = []
    for block in judged_blocks(model, study):
        at = surface(model, study, levels=levels, block=block)
        mean, s = at.coefficients, np.array(at.s)
        if draws is not None:
            mapped = design_map(model, study, levels=levels, block=block)
            everyone = (draws.n_draws, len(mean))
            mean = np.broadcast_to(draws.of(model) @ mapped.T, everyone)
            s = np.broadcast_to(draws.sd(model), draws.n_draws)
        curve = -sign * mean / guarding.scale
        curve[..., 0] += sign * side.value / guarding.scale
        factor = guarding.factor if mode == "simultaneous" else 1.0
        rows.append(
            HardRow(
                limit=limit,
                curve=curve,
                weight=factor * s / guarding.scale,
                guard=None if mode == "means" else guarding.smooth,
                covariance=at.covariance,
                block=None if block is None else study.runs.blocks[block],
            )
        )
    return rows


def bare_arena(region: Region, levels: tuple[int, ...]) -> Arena:
    """Region alone: no goals, no limits, no room."""
    k = len(region.origin)
    nil, p = np.zeros(k), n_terms(k)
    ellipsoid = HardRow(None, region.ellipsoid_row(), 0.0, None, np.zeros((p, p)))
    return Arena(
        levels=levels,
        region=region,
        room=Room(nil, nil),
        goals=(),
        goal_means=np.zeros((0, p)),
        hard=(ellipsoid,) if region.has_ellipsoid else (),
    )


def _best(models: Models, bare: tuple[Arena, ...], name: str, sign: float) -> float:
    """Find the largest (sign +1) or smallest (-1) fitted mean over region and levels."""
    return sign * max(
        find_peak(
            where, sign * surface(models[name], models.study, levels=where.levels).coefficients
        ).score
        for where in bare
    )


def _guarding(models: Models, response: Response, bare: tuple[Arena, ...], seed: int) -> Guarding:
    limit, model, study = response.limit, models[response.name], models.study
    if limit is None:
        message = f"{response.name} has no limit"
        raise ValueError(message)
    guard = Guard(
        limit.guard,
        model.df_error,
        split_confidence(study, limit.confidence, limit.guard),
        limit.share,
    )
    s = model.s or 0.0
    if s > 0:
        scale = s
    else:
        best, worst = (_best(models, bare, response.name, sign) for sign in (1.0, -1.0))
        scale = (best - worst) / 100 or max(abs(limit.low or 0.0), abs(limit.high or 0.0)) or 1.0
    needs_df = limit.guard != "none" and not model.exact and not model.noise_free
    if not needs_df or s == 0:
        possible = not (needs_df and model.df_error == 0)
        return Guarding(guard, None, 1.0, scale, s > 0, possible)
    maps = tuple(
        design_map(model, study, levels=where.levels, block=block)
        for where in bare
        for block in judged_blocks(model, study)
    )
    region = bare[0].region
    terms = features(candidates(region, 512))
    leverages = np.stack(
        [np.einsum("np,pq,nq->n", terms @ m, model.covariance, terms @ m) for m in maps]
    )
    # the fewest degrees of freedom anywhere, so that the guard is too wide elsewhere, never narrow
    extra = 0.0 if guard.kind == "mean" else 1.0
    degrees = model.degrees(leverages + extra, extra, guard.confidence)
    guard = replace(guard, df=float(degrees.min()))
    smooth = SmoothGuard.between(guard, float(leverages.min()), float(leverages.max()))
    factor = 1.0
    if limit.point == "chosen":
        factor = simultaneous_factor(guard, smooth, model.covariance, maps, region, seed)
    return Guarding(guard, smooth, factor, scale, True, True)


def split_confidence(study: Study, confidence: float, kind: str) -> float:
    """Share the risk equally among all sides of ``share`` limits."""
    if kind != "share":
        return confidence
    n_sides = sum(
        (response.limit.low is not None) + (response.limit.high is not None)
        for response in study.responses
        if response.limit is not None and response.limit.guard == "share"
    )
    return 1.0 - (1.0 - confidence) / n_sides
