"""The settings that optimal runs are chosen from, all of which may be run."""

from __future__ import annotations

from itertools import product

import numpy as np

from wideberth.decide.region import even_points
from wideberth.errors import InputError, refusal
from wideberth.plan.model import level_combinations
from wideberth.plan.safety import Earlier, may_run
from wideberth.plan.settings import settable, settable_bounds
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray, IntArray, NumericFactor, Study

_LEVELS = {1: 21, 2: 11, 3: 7, 4: 5}
_FEW_LEVELS = 3
_MOST_FULL = 6
_N_EVEN = 1500
_N_TRIED = 30_000


def candidate_settings(study: Study, earlier: Earlier | None) -> tuple[FloatArray, IntArray]:
    """List runnable settings: a grid over what is allowed, and its cuts with the constraints.

    Returns
    -------
    (ndarray of shape (M, k), ndarray of int of shape (M, c))
        Own units on the settable steps, and levels of the categorical factors.

    Raises
    ------
    InputError
        When hardly any setting may be run.
    """
    actual = _numeric_candidates(study)
    combinations = np.array(level_combinations(study), dtype=np.int64)
    numbers = np.repeat(actual, len(combinations), axis=0)
    levels = np.tile(combinations, (len(actual), 1))
    keep = np.array(may_run(study, earlier, numbers, levels), dtype=np.bool_)
    if keep.sum() < 2:
        raise nowhere_to_run()
    return numbers[keep], levels[keep]


def nowhere_to_run() -> InputError:
    """Word that the region that may be run is empty or a single setting."""
    return refusal(
        "hardly any setting may be run under the allowed ranges, constraints and held limits",
        "study.toml",
        "widen allowed or the constraints, or take a response out of plan.hold",
    )


def even_runnable(study: Study, earlier: Earlier | None) -> tuple[FloatArray, IntArray]:
    """Spread settings evenly over all that may be run: coded (n, k) and levels (n, c)."""
    k = len(study.numeric)
    combinations = level_combinations(study)
    if k == 0:
        return np.zeros((len(combinations), 0)), np.array(combinations, dtype=np.int64)
    low, high = coded_bounds(study.numeric)
    x = low + even_points(_N_TRIED, k) * (high - low)
    # every combination of levels in turn, so that each gets an even share
    levels = np.array(combinations, dtype=np.int64)[np.arange(len(x)) % len(combinations)]
    kept_x, kept_levels = [], []
    found = 0
    for start in range(0, _N_TRIED, _N_EVEN):
        part, at = x[start : start + _N_EVEN], levels[start : start + _N_EVEN]
        keep = np.array(may_run(study, earlier, to_actual(study.numeric, part), at), dtype=np.bool_)
        kept_x.append(part[keep])
        kept_levels.append(at[keep])
        found += int(keep.sum())
        if found >= _N_EVEN:
            break
    if found == 0:
        raise nowhere_to_run()
    return np.concatenate(kept_x), np.concatenate(kept_levels)


def coded_bounds(factors: tuple[NumericFactor, ...]) -> tuple[FloatArray, FloatArray]:
    """Give the coded ends of what may be run of each factor, (k,) each."""
    ends = np.array([settable_bounds(factor) for factor in factors]).T.reshape(2, len(factors))
    low, high = to_coded(factors, ends)
    return low, high


def _numeric_candidates(study: Study) -> FloatArray:
    k = len(study.numeric)
    if k == 0:
        return np.zeros((1, 0))
    low, high = coded_bounds(study.numeric)
    shares = np.linspace(0.0, 1.0, _LEVELS.get(k, _FEW_LEVELS))
    grid = np.array(list(product(shares, repeat=k))) if k <= _MOST_FULL else _sparse_grid(k)
    coded = low + grid * (high - low)
    cuts = _cuts(study, low, high)
    found = settable(study.numeric, np.concatenate([coded, cuts]))
    return np.unique(found, axis=0)


def _sparse_grid(k: int) -> FloatArray:
    """Corners, middles of edges, middles of faces and the centre: shares of the box."""
    rows = [np.array(signs) for signs in product((0.0, 1.0), repeat=k)]
    edges = [
        np.insert(np.array(signs), j, 0.5)
        for j in range(k)
        for signs in product((0.0, 1.0), repeat=k - 1)
    ]
    faces = [np.where(np.arange(k) == j, end, 0.5) for j in range(k) for end in (0.0, 1.0)]
    return np.array([*rows, *edges, *faces, np.full(k, 0.5)])


def _cuts(study: Study, low: FloatArray, high: FloatArray) -> FloatArray:
    """Find where each constraint cuts the edges of the box, a step inside: coded, shape (m, k).

    Constraints name linear factors only, so a cut is one division.
    """
    k = len(study.numeric)
    corners = np.array(list(product((0.0, 1.0), repeat=k)))
    middle = np.array([(f.low + f.high) / 2 for f in study.numeric])
    half = np.array([(f.high - f.low) / 2 for f in study.numeric])
    step = np.array([2 * float(f.settable_step or 0) / (f.high - f.low) for f in study.numeric])
    found = [np.zeros((0, k))]
    for constraint in study.constraints:
        weights = np.array([constraint.weights.get(f.name, 0.0) for f in study.numeric])
        slopes = weights * half
        for bound in (constraint.at_most, constraint.at_least):
            for j in np.flatnonzero(slopes):
                if bound is None:
                    continue
                x = low + corners[corners[:, j] == 0] * (high - low)
                rest = x @ slopes - x[:, j] * slopes[j]
                x[:, j] = (bound - weights @ middle - rest) / slopes[j]
                on_edge = (x[:, j] > low[j]) & (x[:, j] < high[j])
                for nudge in (0.0, -step[j], step[j]):
                    moved = x[on_edge].copy()
                    moved[:, j] += nudge
                    found.append(moved)
    return np.concatenate(found)
