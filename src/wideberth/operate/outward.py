"""The ridge of the compromise: the best setting at growing reach, and runs to try beyond the edge.

The region that was searched is shrunk and stretched about its middle. Inside, that shows how the
compromise moves outwards; beyond the explored edge it is extrapolation, given only as runs to try
under supervision, inside what is allowed and inside the guards of a setting fixed in advance.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from wideberth.decide.aims import BEST, SAFEST
from wideberth.decide.judge import overall_desirability, own_setting, predictions, read_setting
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.records import Choice
from wideberth.decide.region import Region, Room
from wideberth.decide.search import find_best
from wideberth.decide.settable import on_steps, settable_grid
from wideberth.fit.records import surface
from wideberth.operate.records import Outward, PathPoint, RunToTry
from wideberth.progress import Progress, silent
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_coded
from wideberth.study.records import FloatArray
from wideberth.surface.explored import depth, fitted_settings

_INSIDE = (0.25, 0.5, 0.75, 1.0)
_BEYOND = (1.15, 1.3, 1.5)
_GAIN = 1e-3


def outward(problem: Problem, choice: Choice, *, progress: Progress = silent) -> Outward:
    """Follow the compromise outwards from a choice that `solve` gave with its problem."""
    if choice.setpoint is None or choice.status not in ("met", "provisional", "unreached"):
        return Outward((), (), "There is no setting to go on from.")
    if not problem.goals:
        return Outward((), (), "Without goals there is no compromise to follow.")
    if not choice.edge:
        return Outward((), (), "The setting does not lean on any edge; nothing calls outwards.")
    levels, _ = read_setting(problem.study, choice.setpoint)
    path: list[PathPoint] = []
    runs: list[RunToTry] = []
    mode: Mode = "pointwise" if problem.possible else "means"
    best = -np.inf
    for done, reach in enumerate((*_INSIDE, *_BEYOND)):
        progress("ridge", done / (len(_INSIDE) + len(_BEYOND)))
        wider = _stretched(problem, reach)
        rows = arena(wider, levels, mode)
        found = find_best(rows)
        if found is None:
            continue
        path.append(
            PathPoint(
                reach=reach,
                setting=own_setting(problem.study, levels, found.x),
                predictions=predictions(problem, levels, found.x),
                desirability=overall_desirability(problem, levels, found.x),
            )
        )
        score = path[-1].desirability or 0.0
        if reach > 1.0 and score > best + _GAIN:
            settable = on_steps(
                rows,
                settable_grid(problem.study.numeric, wider.region),
                BEST if np.isfinite(found.score) else SAFEST,
                found,
            )
            x = found.x if settable is None else settable.x
            if depth(problem.explored, x) < 0:
                runs.append(_run(problem, levels, x, reach))
        best = max(best, score)
    if runs:
        return Outward(tuple(path), tuple(runs), "")
    return Outward(
        tuple(path),
        (),
        "Beyond the explored edge nothing better was found inside what is allowed and guarded;"
        " wider allowed ranges would have to be stated first.",
    )


def _stretched(problem: Problem, reach: float) -> Problem:
    """Shrink or stretch the searched region about its middle, never beyond what is allowed."""
    region, study = problem.region, problem.study
    k, middle = len(region.middle), region.middle
    inner = region.planes @ middle
    bounds = inner + min(reach, 1.0) * (region.bounds - inner)
    if reach > 1.0:
        low, high = _stretched_box(problem, reach)
        bounds[: 2 * k] = np.concatenate([-low, high])
    wide: Region = replace(
        region,
        bounds=bounds,
        centre=middle + reach * (region.centre - middle),
        shape=region.shape / reach**2,
    )
    nil = np.zeros(len(study.numeric))
    return replace(problem, region=wide, tight=wide, room=Room(nil, nil))


def _stretched_box(problem: Problem, reach: float) -> tuple[FloatArray, FloatArray]:
    """Stretch the box of the runs about the middle and cut it with what is allowed."""
    study, middle = problem.study, problem.region.middle
    x = fitted_settings(study)
    low, high = x.min(axis=0), x.max(axis=0)
    wide_low, wide_high = middle + reach * (low - middle), middle + reach * (high - middle)
    for j, factor in enumerate(study.numeric):
        ends = (low[j], high[j])
        if factor.allowed is not None:
            pair = np.ones((2, len(study.numeric)))
            pair[:, j] = factor.allowed
            first, last = to_coded(study.numeric, pair)[:, j]
            ends = (float(first), float(last))
        wide_low[j], wide_high[j] = max(wide_low[j], ends[0]), min(wide_high[j], ends[1])
    return wide_low, wide_high


def _run(problem: Problem, levels: tuple[int, ...], x: FloatArray, reach: float) -> RunToTry:
    ratios = [0.0]
    terms = features(x)
    for model in problem.models.models:
        if model.exact or not model.runs:
            continue
        covariance = surface(model, problem.study, levels=levels).covariance
        largest = max(run.leverage for run in model.runs)
        ratios.append(float(terms @ covariance @ terms) / largest)
    return RunToTry(
        reach=reach,
        setting=own_setting(problem.study, levels, x),
        predictions=predictions(problem, levels, x),
        leverage_ratio=max(ratios),
        desirability=overall_desirability(problem, levels, x),
    )
