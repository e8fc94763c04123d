"""What is proven about a choice: how much better any other allowed setting could be at most."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import no_cuts
from wideberth.decide.certificate import Certificate, bound_desirability
from wideberth.decide.overlooked import look_again
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.search import Found, find_best, local_optima
from wideberth.decide.settable import Grid


@dataclass(frozen=True, slots=True)
class Gains:
    """Possible gains in D over every allowed setting, free and on the settable steps.

    ``None`` where nothing was proven.
    """

    free: float | None
    settable: float | None


def possible_gains(
    problem: Problem,
    mode: Mode,
    found: tuple[tuple[tuple[int, ...], Found | None], ...],
    free: float,
    settable: float,
    grid: Grid,
) -> Gains:
    """Bound how much D could still rise.

    Parameters
    ----------
    found : tuple of (levels, Found or None)
        For every combination of levels the free optimum, ``None`` where no setting holds.
    free, settable : float
        D reached by the free optimum and by the setpoint.

    Raises
    ------
    Overlooked
        When a proof meets a better setting than the search did.
    """
    if not problem.goals:
        return Gains(None, None)
    free_bound, settable_bound = 0.0, 0.0
    for levels, best in found:
        rows = arena(problem, levels, mode)
        cuts = no_cuts(rows) if best is None else best.cuts
        reached = best is not None and np.isfinite(best.score)
        optima = np.zeros((0, rows.n_factors))
        if best is not None and reached:
            optima = local_optima(rows, best)
        whole = bound_desirability(rows, cuts, optima, free)
        if whole.better is not None:
            look_again(problem, (levels, whole.better))
        free_bound = max(free_bound, whole.bound)
        on_grid: Certificate = whole
        if grid.axes:
            on_grid = bound_desirability(rows, cuts, optima, settable, axes=grid.axes)
        settable_bound = max(settable_bound, min(on_grid.bound, whole.bound))
    return Gains(max(free_bound - free, 0.0), max(settable_bound - settable, 0.0))


def best_everywhere(problem: Problem, mode: Mode) -> tuple[tuple[int, ...], Found] | None:
    """Find the free optimum over all levels: (levels, found), ``None`` where nothing holds."""
    best: tuple[tuple[int, ...], Found] | None = None
    for levels in problem.combinations:
        found = find_best(arena(problem, levels, mode))
        if found is not None and (best is None or found.score > best[1].score):
            best = (levels, found)
    return best
