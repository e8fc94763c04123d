"""Analysis of variance by degree: what blocks, linear terms, products and squares each explain."""

from __future__ import annotations

import numpy as np
from scipy.special import fdtrc

from wideberth.fit.columns import degree, product_factors
from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import LackOfFit, Part, Term
from wideberth.study.records import FloatArray

_PARTS = ("blocks", "linear", "levels", "products", "squares")


def by_degree(
    terms: tuple[Term, ...],
    matrix: FloatArray,
    y: FloatArray,
    fit: LeastSquares,
    lack: LackOfFit | None,
    n_factors: int,
) -> tuple[Part, ...]:
    """Split the weighted sum of squares about the mean, part after part.

    Each part is what its terms explain beyond all parts before it, tested against the residual
    mean square of the runs alone; lack of fit is tested against pure error.
    """
    groups: dict[str, list[int]] = {part: [] for part in _PARTS}
    for i, term in enumerate(terms):
        if term.name != "1":
            groups[_part(term, n_factors)].append(i)
    root = np.sqrt(fit.weight)
    weighted, target = matrix * root[:, None], y * root
    held = [i for i, term in enumerate(terms) if term.name == "1"]
    total = before = _left(weighted[:, held], target)
    noise = fit.rss / fit.df if fit.df else None
    parts = []
    for name, columns in groups.items():
        if not columns:
            continue
        held += columns
        after = _left(weighted[:, held], target)
        parts.append(_tested(name, len(columns), max(before - after, 0.0), noise, fit.df))
        before = after
    parts.append(Part("residual", fit.df, fit.rss, None, None))
    if lack is not None:
        parts.append(Part("lack of fit", lack.df[0], lack.ss_lack, lack.f, lack.p))
        parts.append(Part("pure error", lack.df[1], lack.ss_pure, None, None))
    parts.append(Part("total", len(y) - 1, total, None, None))
    return tuple(parts)


def _tested(name: str, df: int, squares: float, noise: float | None, df_noise: int) -> Part:
    if not noise:
        return Part(name, df, squares, None, None)
    f = squares / df / noise
    return Part(name, df, squares, f, float(fdtrc(df, df_noise, f)))


def _part(term: Term, n_factors: int) -> str:
    if term.block is not None:
        return "blocks"
    if degree(term, n_factors) == 1:
        return "linear" if term.contrast is None else "levels"
    factors = product_factors(term.monomial, n_factors)
    square = term.contrast is None and len(set(factors)) == 1
    return "squares" if square else "products"


def _left(matrix: FloatArray, y: FloatArray) -> float:
    """Give the sum of squares that columns of full rank leave of y."""
    basis, _ = np.linalg.qr(matrix / np.sqrt(np.square(matrix).sum(axis=0)))
    rest = y - basis @ (basis.T @ y)
    rest -= basis @ (basis.T @ rest)
    return float(rest @ rest)
