"""A factor that drifts: what it costs, how the others can make up for it, which may be held looser.

A drift is a whole number of tolerances away from the setting, the other factors wandering as
stated. A correction takes the drifted factor as it is, twice its tolerance off, and settles the
others anew inside all guarded limits.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from wideberth.decide.answers import best_answer
from wideberth.decide.arena import Arena
from wideberth.decide.conflicts import side_text
from wideberth.decide.conformance import conformance, conformance_over, setting_sd
from wideberth.decide.judge import overall_desirability, own_setting
from wideberth.decide.pins import with_pins
from wideberth.decide.problem import Problem, arena, mode_of
from wideberth.decide.region import Room
from wideberth.decide.room import worst_in_room
from wideberth.decide.search import HOLDS
from wideberth.errors import RefusedError
from wideberth.fit.draws import Draws
from wideberth.operate.records import Correction, Drift, DriftStep, Looser
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray, NumericFactor
from wideberth.surface.explored import contains

_STEPS = (-3, -2, -1, 1, 2, 3)
_OFF = 2
_WORTH = 1e-3


def drifts(
    problem: Problem, draws: Draws | None, levels: tuple[int, ...], x: FloatArray, seed: int
) -> tuple[Drift, ...]:
    """Let each factor with a tolerance drift by up to three of them from a coded setting (k,)."""
    rows = _at_setting(problem, levels)
    found = []
    for factor in _held(problem):
        places = np.stack([_drifted(problem, x, factor, step) for step in _STEPS])
        held = None
        if draws is not None:
            sd = setting_sd(problem.study)
            held = conformance_over(problem, draws, levels, places, sd, seed)
        found.append(
            Drift(
                factor.name,
                factor.unit,
                tuple(
                    DriftStep(
                        tolerances=step,
                        value=_value(problem, place, factor),
                        explored=bool(contains(problem.explored, place)),
                        conformance=None if held is None else float(held[i]),
                        broken=_broken(problem, rows, place),
                    )
                    for i, (step, place) in enumerate(zip(_STEPS, places, strict=True))
                ),
            )
        )
    return tuple(found)


def corrections(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> tuple[Correction, ...]:
    """Settle the other factors anew around each drifted one; empty without goals."""
    if not problem.goals:
        return ()
    rows, mode = _at_setting(problem, levels), mode_of(problem)
    here = own_setting(problem.study, levels, x)
    found = []
    for factor in _held(problem):
        for step in (-_OFF, _OFF):
            place = _drifted(problem, x, factor, step)
            value = _value(problem, place, factor)
            before = overall_desirability(problem, levels, place)
            broken = _broken(problem, rows, place)
            blank = Correction(factor.name, factor.unit, step, value, broken, before, None, {})
            try:
                pinned = with_pins(problem, {factor.name: value})
            except RefusedError:
                found.append(blank)
                continue
            answer = best_answer(replace(pinned, combinations=(levels,)), mode)
            if answer is None:
                found.append(blank)
                continue
            after = overall_desirability(problem, levels, answer.settable.x)
            setting = own_setting(problem.study, levels, answer.settable.x)
            gained = (after or 0.0) - (before or 0.0)
            changes = {
                name: float(to) - float(here[name])
                for name, to in setting.items()
                if name != factor.name and not isinstance(to, str) and to != here[name]
            }
            if not broken and gained < _WORTH:
                changes, after = {}, before
            found.append(replace(blank, after=after, changes=changes))
    return tuple(found)


def loosened(
    problem: Problem,
    draws: Draws | None,
    levels: tuple[int, ...],
    x: FloatArray,
    seed: int,
) -> dict[str, Looser]:
    """Double one tolerance at a time: whether every guarded limit still holds, and conformance."""
    study, sd = problem.study, setting_sd(problem.study)
    stated = arena(problem, levels, mode_of(problem))
    found = {}
    for factor in _held(problem):
        j = study.numeric.index(factor)
        twice = np.where(np.arange(len(x)) == j, 2.0, 1.0)
        room = Room(problem.room.below * twice, problem.room.above * twice)
        holds = all(worst_in_room(row, room, x)[0] >= HOLDS for row in stated.hard)
        held = None
        if draws is not None:
            one = conformance(problem, draws, levels, x, sd * twice, seed)
            held = None if one is None else one.mean
        found[factor.name] = Looser(holds, held)
    return found


def _held(problem: Problem) -> list[NumericFactor]:
    return [factor for factor in problem.study.numeric if factor.tolerance is not None]


def _at_setting(problem: Problem, levels: tuple[int, ...]) -> Arena:
    nil = np.zeros(len(problem.study.numeric))
    return arena(replace(problem, room=Room(nil, nil)), levels, mode_of(problem))


def _drifted(problem: Problem, x: FloatArray, factor: NumericFactor, tolerances: int) -> FloatArray:
    """Move one factor by tolerances, relative ones compounding on a log scale: coded (k,)."""
    study = problem.study
    j, size = study.numeric.index(factor), factor.tolerance or 0.0
    actual = to_actual(study.numeric, x)
    log = factor.scale == "log"
    actual[j] = actual[j] * (1 + size) ** tolerances if log else actual[j] + tolerances * size
    return to_coded(study.numeric, actual)


def _value(problem: Problem, x: FloatArray, factor: NumericFactor) -> float:
    place = problem.study.numeric.index(factor)
    return float(to_actual(problem.study.numeric, x)[place])


def _broken(problem: Problem, rows: Arena, x: FloatArray) -> tuple[str, ...]:
    """Name the limits whose guard does not hold at a coded setting (k,)."""
    low = sorted(
        {row.limit for row in rows.hard if row.limit is not None and float(row.value(x)) < HOLDS}
    )
    sides = [problem.sides[limit] for limit in low]
    return tuple(
        side_text(s.response, s.side, s.value, problem.models[s.response].unit) for s in sides
    )
