"""Checks of what a model takes for granted: normal noise of one size, no drift, nothing left out.

Whatever is tested against an added column (run order, a column of the sheet, curvature by level)
has an exact F test. The others compare a statistic of the residuals with its values for normal
noise on the same design, simulated: exact for any design, however few the runs, because under
normal noise the residuals' pattern depends on neither the true coefficients nor sigma, and not on
the fitted values. 4,999 simulated sets keep the true size of a test at 5 % within half a percent.

References
----------
Barnard (1963), J. Royal Statistical Society B 25, 294 (tests by simulation); Shapiro and Francia
(1972), J. American Statistical Association 67, 215-216 (normal scores); Cook and Weisberg (1983),
Biometrika 70, 1-10 (spread against fitted values); von Neumann (1941), Annals of Mathematical
Statistics 12, 367-395 (neighbours). All from memory.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from scipy.special import fdtrc, ndtri

from wideberth.fit.columns import degree, model_matrix
from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import Check, Term, sum_to_zero
from wideberth.seeds import stream
from wideberth.study.records import BoolArray, FloatArray, Grade, IntArray, Study

N_SIMULATED = 4999
SURE = 0.01
"""A check is worth a look below this p: with five checks a response, chance rarely reaches it."""
_FEWEST_DF = 3
_NOT_HELD = 1e-9
_MOST_GROUPS = 0.5


def checks_of(
    study: Study, rows: IntArray, terms: tuple[Term, ...], fit: LeastSquares, name: str
) -> tuple[Check, ...]:
    """Check one fitted response; nothing is checked with fewer than 3 residual df.

    Parameters
    ----------
    rows : ndarray of int, shape (n,)
        The runs that were fitted.
    """
    if fit.df < _FEWEST_DF:
        return ()
    order = None if study.runs.order is None else np.array(study.runs.order)[rows]
    return (
        *_pattern_checks(fit, order, name),
        *_order_check(fit, order, name),
        *_curvature_by_level(study, rows, terms, fit, name),
        *_other_columns(study, rows, fit, name),
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Simulated:
    """Residuals of normal noise on one design, each of equal variance.

    Attributes
    ----------
    used : ndarray of bool, shape (n,)
        Runs that the model does not hold exactly.
    scaled : ndarray, shape (n_used, N)
    straight : ndarray, shape (N,)
        Correlation of the ordered residuals with the normal scores.
    squares : ndarray, shape (n_used, N)
        Squared residuals, centred and of unit length.
    """

    used: BoolArray
    scaled: FloatArray
    straight: FloatArray
    squares: FloatArray


@lru_cache(maxsize=16)
def _simulated(basis_bytes: bytes, n_runs: int) -> _Simulated:
    """Simulate once a design; ``basis_bytes`` are those of its orthonormal basis."""
    basis = np.frombuffer(basis_bytes).reshape(n_runs, -1)
    noise = stream(1, "checks of residuals", n_runs).standard_normal((n_runs, N_SIMULATED))
    free = 1.0 - np.square(basis).sum(axis=1)
    used = free > _NOT_HELD
    residuals = (noise - basis @ (basis.T @ noise))[used]
    scaled = residuals / np.sqrt(free[used])[:, None]
    return _Simulated(used, scaled, _straightness(scaled), _unit(scaled**2))


def _unit(columns: FloatArray) -> FloatArray:
    """Centre columns, shape (n, N), and give them unit length."""
    away = columns - columns.mean(axis=0)
    result: FloatArray = away / np.maximum(np.sqrt(np.square(away).sum(axis=0)), 1e-300)
    return result


def _straightness(residuals: FloatArray) -> FloatArray:
    """Correlate each column of residuals (n, N), ordered, with the normal scores: shape (N,)."""
    n = len(residuals)
    scores = _unit(ndtri((np.arange(1, n + 1) - 0.375) / (n + 0.25))[:, None])[:, 0]
    result: FloatArray = scores @ _unit(np.sort(residuals, axis=0))
    return result


def _pattern_checks(fit: LeastSquares, order: IntArray | None, name: str) -> Iterator[Check]:
    """Compare patterns of the residuals with simulated ones on the same design."""
    reference = _simulated(np.ascontiguousarray(fit.basis).tobytes(), len(fit.residuals))
    used = reference.used
    own = (fit.weighted_residuals / np.sqrt(np.maximum(1.0 - fit.leverage, _NOT_HELD)))[used]
    straight = float(_straightness(own[:, None])[0])
    p = _share_beyond(-straight, -reference.straight)
    shown = "do not look normal: a few are too large or too small" if p < SURE else "look normal"
    yield _check("normal scores", straight, p, f"{name}: the residuals {shown}")
    level = fit.fitted[used]
    if np.ptp(level) > 0:
        along = _unit(level[:, None])[:, 0]
        spread = float(along @ _unit(own[:, None] ** 2)[:, 0])
        p = _share_beyond(abs(spread), np.abs(along @ reference.squares))
        way = "grows" if spread > 0 else "shrinks"
        shown = f"{way} with the response" if p < SURE else "is not shown to depend on the response"
        yield _check("spread against fitted", spread, p, f"{name}: the scatter {shown}")
    if order is not None and len(np.unique(order)) == len(order):
        places = np.argsort(order[used], kind="stable")
        ratio = float(_roughness(own[places, None])[0])
        p = _share_beyond(-ratio, -_roughness(reference.scaled[places]))
        shown = "resemble each other" if p < SURE else "are not shown to resemble each other"
        text = f"{name}: runs made one after the other {shown} beyond what the model explains"
        yield _check("neighbouring runs", ratio, p, text)


def _roughness(residuals: FloatArray) -> FloatArray:
    """Give von Neumann's ratio of each column (n, N): about 2 without likeness, less with it."""
    steps = np.square(np.diff(residuals, axis=0)).sum(axis=0)
    result: FloatArray = steps / np.square(residuals).sum(axis=0)
    return result


def _check(
    kind: str, statistic: float, p: float, text: str, df: tuple[int, int] | None = None
) -> Check:
    grade: Grade = "look" if p < SURE else "fine"
    shown = "p < 0.001" if p < 0.001 else f"p {p:.2g}"
    return Check(kind, float(statistic), df, p, grade, f"{text} ({shown}).")


def _share_beyond(value: float, simulated: FloatArray) -> float:
    """Give the share of values at least as large as the first, itself counted."""
    return float((1 + (simulated >= value - 1e-12 * abs(value)).sum()) / (1 + len(simulated)))


def added_columns(fit: LeastSquares, columns: FloatArray) -> tuple[float, int, int, float] | None:
    """Test whether added columns (n, c) explain residuals: F, its degrees of freedom, p.

    ``None`` where they add nothing that the model does not hold already, or leave no noise.
    """
    weighted = columns * np.sqrt(fit.weight)[:, None]
    size = np.sqrt(np.square(weighted).sum(axis=0))
    rest = weighted - fit.basis @ (fit.basis.T @ weighted)
    rest -= fit.basis @ (fit.basis.T @ rest)
    vectors, sizes, _ = np.linalg.svd(rest / np.where(size > 0, size, 1.0), full_matrices=False)
    kept = vectors[:, sizes > 1e-7]
    rank, left = kept.shape[1], fit.df - kept.shape[1]
    if rank == 0 or left < 1:
        return None
    explained = float(np.square(kept.T @ fit.weighted_residuals).sum())
    noise = (fit.rss - explained) / left
    if noise <= 1e-12 * fit.rss:
        return None
    f = explained / rank / noise
    return f, rank, left, float(fdtrc(rank, left, f))


def _order_check(fit: LeastSquares, order: IntArray | None, name: str) -> Iterator[Check]:
    if order is None:
        return
    centred = (order - order.mean())[:, None].astype(np.float64)
    found = added_columns(fit, centred)
    if found is not None:
        f, first, second, p = found
        shown = "drift" if p < SURE else "are not shown to drift"
        text = f"{name}: the results {shown} over the run order"
        yield _check("drift over run order", f, p, text, (first, second))


def _curvature_by_level(
    study: Study, rows: IntArray, terms: tuple[Term, ...], fit: LeastSquares, name: str
) -> Iterator[Check]:
    """Test whether squares and products differ between the levels of each categorical factor."""
    k = len(study.numeric)
    held = [t for t in terms if t.contrast is None and degree(t, k) == 2 and t.block is None]
    for f, factor in enumerate(study.categorical):
        if not held or not any(t.contrast and t.contrast[0] == f for t in terms):
            continue
        added = tuple(
            Term(t.name, t.monomial, contrast=(f, c))
            for t in held
            for c in range(len(factor.levels) - 1)
        )
        found = added_columns(fit, model_matrix(study, added, rows))
        if found is not None:
            value, first, second, p = found
            shown = "differs" if p < SURE else "is not shown to differ"
            text = f"{name}: curvature {shown} between the levels of {factor.name}"
            text += ", though the model takes it as the same" if p < SURE else ""
            yield _check(f"curvature by {factor.name}", value, p, text, (first, second))


def _other_columns(study: Study, rows: IntArray, fit: LeastSquares, name: str) -> Iterator[Check]:
    """Test the sheet's other columns: numbers as a slope, texts as groups of two runs or more."""
    tested = []
    for column, cells in study.runs.others.items():
        found = _other_column([cells[row] for row in rows], fit)
        if found is not None:
            tested.append((column, found))
    for column, (f, first, second, p) in tested:
        # many columns are many chances to be fooled
        joint = min(1.0, p * len(tested))
        shown = "go with" if joint < SURE else "are not shown to go with"
        text = f"{name}: the residuals {shown} the column {column}"
        yield _check(f"column {column}", f, joint, text, (first, second))


def _other_column(cells: list[str], fit: LeastSquares) -> tuple[float, int, int, float] | None:
    different = list(dict.fromkeys(cells))
    if len(different) < 2 or not all(cells):
        return None
    numbers = _numbers(cells)
    if numbers is not None and len(different) > 2:
        return added_columns(fit, (numbers - numbers.mean())[:, None])
    if len(different) > _MOST_GROUPS * len(cells):
        return None
    places = np.array([different.index(cell) for cell in cells])
    return added_columns(fit, sum_to_zero(len(different))[places])


def _numbers(cells: list[str]) -> FloatArray | None:
    try:
        numbers = np.array([float(cell) for cell in cells])
    except ValueError:
        return None
    return numbers if np.isfinite(numbers).all() else None
