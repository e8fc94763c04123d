"""The whole job in one call, and the one frozen record that memo and JSON read."""

from __future__ import annotations

import platform
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.metadata import version as package_version

from wideberth import __version__
from wideberth.decide.alternatives import Alternative, alternatives
from wideberth.decide.every_run import EveryRun, with_every_run
from wideberth.decide.frontier import Frontier, trade_off
from wideberth.decide.give_ups import GiveUp, give_ups
from wideberth.decide.maps import factor_maps
from wideberth.decide.priorities import Priorities, priorities
from wideberth.decide.prospects import Prospects, prospects
from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice, FactorMap
from wideberth.fit.models import fit
from wideberth.fit.records import Models
from wideberth.operate.outward import outward
from wideberth.operate.records import Outward, Robustness, Window
from wideberth.operate.robustness import wander
from wideberth.operate.window import window_around
from wideberth.progress import Progress, silent
from wideberth.study.checking import check_study
from wideberth.study.records import Finding, Study
from wideberth.surface.records import Shape
from wideberth.surface.ridge import shape
from wideberth.uncertainty.assess import N_DRAWS, assess, draws_for
from wideberth.uncertainty.records import Uncertainty

_PACKAGES = ("numpy", "scipy", "statsmodels", "cvxpy", "clarabel")


@dataclass(frozen=True, slots=True, eq=False)
class Record:
    """Everything that was computed for one study, with what is needed to compute it again.

    Attributes
    ----------
    version : str
        Of wideberth.
    packages : mapping
        Versions of the packages that the numbers rest on, of Python, and the processor's kind.
    seed : int
    n_draws : int
    doubts : tuple of Finding
        What `check_study` found.
    maps : tuple of FactorMap
        Two factors at a time through the setpoint.
    give_ups : tuple of GiveUp
        What each limit and goal bound costs.
    frontier : Frontier or None
        The trade-off between several goals, where the answer is ``met``.
    priorities : Priorities or None
        How far each priority may move before the setpoint leaves its tolerance.
    every_run : EveryRun or None
        The answer with nothing left out, where runs are left out.
    alternatives : tuple of Alternative
        What other aims would name.
    prospects : Prospects
        What more evidence would buy.
    outward : Outward
        The ridge of the compromise, and runs to try beyond the explored edge.
    """

    version: str
    packages: Mapping[str, str]
    seed: int
    n_draws: int
    study: Study
    doubts: tuple[Finding, ...]
    models: Models
    shapes: tuple[Shape, ...]
    choice: Choice
    maps: tuple[FactorMap, ...]
    uncertainty: Uncertainty
    window: Window
    robustness: Robustness
    outward: Outward
    give_ups: tuple[GiveUp, ...]
    frontier: Frontier | None
    priorities: Priorities | None
    alternatives: tuple[Alternative, ...]
    prospects: Prospects
    every_run: EveryRun | None = None


def build_record(
    study: Study,
    *,
    seed: int | None = None,
    n_draws: int = N_DRAWS,
    progress: Progress = silent,
) -> Record:
    """Run every step of the job on a study.

    Raises
    ------
    RefusedError
        When the study states neither a goal nor a limit, or a step cannot serve it.
    """
    progress("check", 0.0)
    doubts = check_study(study)
    progress("fit", 0.05)
    models = fit(study)
    progress("shape", 0.15)
    shapes = shape(models) if study.numeric else ()
    progress("recommend", 0.2)
    problem, choice = solve(models, seed=seed)
    whole = with_every_run(models, choice)
    draws = draws_for(problem, choice, n_draws)
    progress("give-ups", 0.25)
    costs = give_ups(problem, choice)
    progress("priorities", 0.27)
    swayed = priorities(problem, choice)
    progress("alternatives", 0.29)
    others = alternatives(problem, choice, draws)
    hopes = prospects(problem, choice, draws)
    progress("frontier", 0.3)
    several = len(problem.goals) > 1 and choice.status == "met"
    traded = trade_off(problem, choice) if several else None
    progress("uncertainty", 0.4)
    sure = assess(problem, choice, draws)
    progress("window", 0.6)
    box = window_around(problem, choice)
    progress("robustness", 0.8)
    wandering = wander(problem, choice, draws)
    progress("ridge", 0.85)
    ridge = outward(problem, choice)
    progress("maps", 0.9)
    maps = factor_maps(problem, choice, draws)
    return Record(
        version=__version__,
        packages={
            **{name: package_version(name) for name in _PACKAGES},
            "python": platform.python_version(),
            "processor": platform.machine(),
        },
        seed=choice.seed,
        n_draws=n_draws,
        study=study,
        doubts=doubts,
        models=models,
        shapes=shapes,
        choice=choice,
        maps=maps,
        uncertainty=sure,
        window=box,
        robustness=wandering,
        outward=ridge,
        give_ups=costs,
        frontier=traded,
        priorities=swayed,
        every_run=whole,
        alternatives=others,
        prospects=hopes,
    )
