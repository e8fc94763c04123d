"""The step that says how sure a choice is: location, possible loss, conformance, optimism.

Each draw solves the same guarded problem with its own coefficients and s, without room and steps;
what is estimated is that problem's solution at the true values. See docs/methods for what each
number covers.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from wideberth.decide.arena import goal_values
from wideberth.decide.conformance import conformance, setting_sd
from wideberth.decide.desirability import overall
from wideberth.decide.judge import predictions, read_setting
from wideberth.decide.losses import losses
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice
from wideberth.decide.region import Room
from wideberth.decide.search import find_best
from wideberth.fit.draws import Draws, draw_coefficients, why_no_draws
from wideberth.fit.records import Models, design_map, level_names
from wideberth.progress import Progress, silent
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_actual
from wideberth.study.records import Finding, FloatArray, Setting
from wideberth.surface.explored import factor_ranges
from wideberth.uncertainty.cloud import Cloud, cloud_of, desirability_at, on_edge
from wideberth.uncertainty.location import FEWEST, optimum_region, try_settings
from wideberth.uncertainty.records import Optimism, OptimumRegion, PossibleLoss, Uncertainty
from wideberth.uncertainty.shortfall import Shortfall, shortfall
from wideberth.uncertainty.today import against_today

N_DRAWS = 2000
LEVELS = (0.5, 0.9, 0.95)
_CROWDED = 0.2
_FEW_DF = 4
_FLAT = 1.0 - 1e-8
_NEARLY_ALL = 0.8


def uncertainty(
    models: Models,
    *,
    seed: int | None = None,
    at: Setting | None = None,
    n_draws: int = N_DRAWS,
    progress: Progress = silent,
) -> Uncertainty:
    """Say how sure the recommended setting is, or one of the person's own.

    Parameters
    ----------
    models : Models
        What `fit` gave.
    seed : int, optional
        Of draws and batches; the study's own by default.
    at : Setting, optional
        A setting of the person's own, own units, to be judged instead of the recommended one.
    n_draws : int
        2,000 serve a report; shares are then good to about one in a hundred.
    progress : Progress

    Raises
    ------
    RefusedError
        As `recommend`.
    """
    problem, choice = solve(models, seed=seed, at=at, progress=progress)
    return assess(problem, choice, draws_for(problem, choice, n_draws), progress=progress)


def draws_for(problem: Problem, choice: Choice, n_draws: int = N_DRAWS) -> Draws | None:
    """Draw what all later steps share; ``None`` when nothing can be drawn."""
    if why_no_draws(problem.models):
        return None
    return draw_coefficients(problem.models, n_draws, choice.seed)


def assess(
    problem: Problem, choice: Choice, draws: Draws | None, *, progress: Progress = silent
) -> Uncertainty:
    """Say how sure a choice is that `solve` gave with its problem."""
    mode = _mode(problem, choice)
    nothing = Uncertainty(
        draws=0,
        seed=choice.seed,
        setting=choice.setpoint,
        mode=mode,
        feasible_share=None,
        edge_share=None,
        level_shares={},
        region=None,
        narrower=(),
        possible_loss=None,
        conformance=None,
        conformance_exact_setting=None,
        losses=None,
        setting_error_included=bool(setting_sd(problem.study).any()),
        optimism=None,
        today=against_today(problem, choice, None, None),
        findings=(),
        reason=why_no_draws(problem.models),
    )
    if draws is None or choice.setpoint is None:
        return nothing
    levels, x = read_setting(problem.study, choice.setpoint)
    bare = choice.unrounded.setpoint or choice.setpoint
    warm = np.stack([read_setting(problem.study, bare)[1], x])
    cloud = cloud_of(problem, draws, mode, warm, progress)
    held = conformance(problem, draws, levels, x, setting_sd(problem.study), choice.seed)
    exact = conformance(problem, draws, levels, x, np.zeros(len(x)), choice.seed)
    some = cloud.feasible
    optimism = _optimism(problem, choice, draws, cloud)
    regions = optimum_regions(problem, draws, cloud, mode)
    # a setting that breaks its limits is not compared with settings that hold them
    stands = choice.asked or choice.status in ("met", "provisional", "unreached", "unsupported")
    result = replace(
        nothing,
        draws=draws.n_draws,
        feasible_share=float(some.mean()),
        edge_share=float(on_edge(problem.region, cloud.x[some]).mean()) if some.any() else None,
        level_shares=_level_shares(problem, cloud),
        region=regions[-1] if regions else None,
        narrower=regions[:-1],
        possible_loss=_possible_loss(problem, choice, draws, cloud) if stands else None,
        conformance=held,
        conformance_exact_setting=exact,
        losses=losses(problem, draws, levels, x, setting_sd(problem.study), choice.seed),
        optimism=optimism if stands else None,
        today=against_today(problem, choice, draws, optimism),
    )
    return replace(result, findings=_findings(problem, result))


def _mode(problem: Problem, choice: Choice) -> Mode:
    """Guard limits in the draws as they were guarded where the setting was found."""
    if not problem.possible:
        return "means"
    if choice.status in ("met", "unreached") and not choice.asked:
        return "simultaneous"
    if choice.status == "provisional" and not choice.asked:
        return "pointwise"
    modes: tuple[Mode, ...] = ("simultaneous", "pointwise", "means")
    for mode in modes:
        if any(find_best(arena(problem, levels, mode)) for levels in problem.combinations):
            return mode
    return "means"


def _level_shares(problem: Problem, cloud: Cloud) -> dict[str, float]:
    if len(problem.combinations) == 1 or not cloud.feasible.any():
        return {}
    chosen = cloud.combination[cloud.feasible]
    return {
        ", ".join(level_names(problem.study.categorical, levels).values()): float(
            (chosen == place).mean()
        )
        for place, levels in enumerate(problem.combinations)
    }


def optimum_regions(
    problem: Problem, draws: Draws, cloud: Cloud, mode: Mode
) -> tuple[OptimumRegion, ...]:
    """Locate the optimum at 50, 90 and 95 %, at the levels that most draws prefer."""
    if not cloud.feasible.any():
        return ()
    chosen = cloud.combination[cloud.feasible]
    most = int(np.bincount(chosen).argmax())
    optima = cloud.x[cloud.feasible & (cloud.combination == most)]
    if len(optima) < FEWEST:
        return ()
    test = edge_test(problem, draws, problem.combinations[most], mode, optima)
    trial = None if test is None else try_settings(problem.region, test, LEVELS[-1])
    regions = [optimum_region(problem, optima, level, trial) for level in LEVELS]
    return tuple(region for region in regions if region is not None)


def edge_test(
    problem: Problem, draws: Draws, levels: tuple[int, ...], mode: Mode, optima: FloatArray
) -> Shortfall | None:
    """Prepare the shortfall where optima (n, k) crowd on the edge; ``None`` where they do not."""
    if not problem.goals or on_edge(problem.region, optima).mean() <= _CROWDED:
        return None
    nil = np.zeros(len(problem.study.numeric))
    bare = replace(problem, room=Room(nil, nil), tight=problem.region)
    best = find_best(arena(bare, levels, mode))
    return None if best is None else shortfall(problem, draws, levels, mode, best.x)


def _possible_loss(
    problem: Problem, choice: Choice, draws: Draws, cloud: Cloud
) -> PossibleLoss | None:
    if not problem.goals or choice.setpoint is None or not cloud.feasible.any():
        return None
    levels, x = read_setting(problem.study, choice.setpoint)
    loss = cloud.desirability - desirability_at(problem, draws, levels, x)
    loss = np.maximum(loss[cloud.feasible], 0.0)
    return PossibleLoss(float(np.median(loss)), float(np.quantile(loss, 0.95)))


def _optimism(problem: Problem, choice: Choice, draws: Draws, cloud: Cloud) -> Optimism | None:
    """Average how much each draw's optimum promises under the draw above what the fit says there.

    A fitted optimum looks too good for the same reason: it was picked where the noise flattered.
    """
    best = choice.desirability
    if (
        choice.asked
        or not problem.goals
        or best is None
        or choice.setpoint is None
        or best >= _FLAT
    ):
        return None
    if not cloud.feasible.any():
        return None
    levels, x = read_setting(problem.study, choice.setpoint)
    some = np.flatnonzero(cloud.feasible)
    terms = features(cloud.x)
    flattery = np.zeros(draws.n_draws)
    per_response = {model.response: np.zeros(draws.n_draws) for model in problem.models.models}
    for place, combination in enumerate(problem.combinations):
        own = cloud.combination == place
        if not own.any():
            continue
        rows = arena(problem, combination, "means")
        fitted = overall(rows.goals, goal_values(rows, cloud.x))
        flattery[own] = (cloud.desirability - fitted)[own]
        for model in problem.models.models:
            mapped = design_map(model, problem.study, levels=combination)
            moved = (draws.of(model) - model.coefficients) @ mapped.T
            per_response[model.response][own] = (terms * moved).sum(axis=1)[own]
    bias = float(flattery[some].mean())
    means = {name: one.mean for name, one in predictions(problem, levels, x).items()}
    biases = {name: float(values[some].mean()) for name, values in per_response.items()}
    return Optimism(
        desirability=bias,
        corrected=float(np.clip(best - bias, 0.0, 1.0)),
        responses={name: (bias, means[name] - bias) for name, bias in biases.items()},
    )


def _hardly_located(problem: Problem, region: OptimumRegion | None) -> list[str]:
    if region is None:
        return []
    low, high = factor_ranges(problem.explored)
    whole = [to_actual(problem.study.numeric, end) for end in (low, high)]
    loose = []
    for j, (name, (first, last)) in enumerate(region.ranges.items()):
        if last - first > _NEARLY_ALL * (whole[1][j] - whole[0][j]) > 0:
            loose.append(name)
    return loose


def _findings(problem: Problem, result: Uncertainty) -> tuple[Finding, ...]:
    found = []
    if result.region is None and result.feasible_share is not None:
        found.append(
            Finding(
                "look",
                "Too few draws have a setting that holds every guarded limit; where"
                " the optimum lies cannot be said.",
            )
        )
    elif result.region is not None and not result.region.determined:
        found.append(
            Finding(
                "look",
                "The runs do not determine where the optimum lies: it may be almost"
                " anywhere in what may be searched.",
            )
        )
    loose = _hardly_located(problem, result.region)
    if loose and result.region is not None and result.region.determined:
        found.append(
            Finding(
                "look",
                f"The runs hardly locate the optimum in {', '.join(loose)}: the region"
                " spans nearly all that was explored there.",
            )
        )
    if result.feasible_share is not None and result.feasible_share < 0.9:
        found.append(
            Finding(
                "look",
                f"In {100 * (1 - result.feasible_share):.0f} of 100 draws no setting holds every"
                " guarded limit.",
            )
        )
    asked = {r.name for r in problem.study.responses if r.goal or r.limit}
    few = [
        m.response
        for m in problem.models.models
        if m.response in asked and not m.exact and 0 < m.df_error < _FEW_DF
    ]
    if few:
        found.append(
            Finding(
                "look",
                f"{', '.join(few)}: fewer than {_FEW_DF} residual degrees of freedom; the region"
                " of the optimum may cover less than it says.",
            )
        )
    if len(problem.study.numeric) >= 5 and result.conformance is not None:
        found.append(
            Finding(
                "look",
                "With five or more factors the lower bound of the conformance is"
                " optimistic after a search; confirm it by new runs.",
            )
        )
    return tuple(found)
