"""The columns of a model: which terms, and their values at the runs.

Order of the terms, from the ones to keep to the ones to give up first: the constant, blocks,
linear terms, categorical effects, products, squares.
"""

from __future__ import annotations

import numpy as np

from wideberth.fit.records import Term, sum_to_zero
from wideberth.quadratic.terms import features, pairs, term_names
from wideberth.study.coding import to_coded
from wideberth.study.records import FloatArray, IntArray, Study


def model_terms(study: Study, order: int, blocks: IntArray) -> tuple[Term, ...]:
    """List the terms of a model of this order.

    Parameters
    ----------
    order : int
        1 or 2.
    blocks : ndarray of int
        The block of each fitted run; a single block needs no contrast.
    """
    names = tuple(factor.name for factor in study.numeric)
    k = len(names)
    written = term_names(names)
    terms = [Term("1", 0)]
    if len(np.unique(blocks)) > 1:
        terms += [
            Term(f"block[{study.runs.blocks[i]}]", 0, block=i)
            for i in range(len(study.runs.blocks) - 1)
        ]
    terms += [Term(written[1 + j], 1 + j) for j in range(k)]
    contrasts = [
        ((f, c), f"{factor.name}[{factor.levels[c]}]")
        for f, factor in enumerate(study.categorical)
        for c in range(len(factor.levels) - 1)
    ]
    terms += [Term(name, 0, contrast=contrast) for contrast, name in contrasts]
    if order == 1:
        return tuple(terms)
    terms += [Term(written[p], p) for p in range(1 + 2 * k, len(written))]
    terms += [
        Term(f"{names[j]}*{name}", 1 + j, contrast=contrast)
        for contrast, name in contrasts
        for j in range(k)
    ]
    terms += [Term(written[1 + k + j], 1 + k + j) for j in range(k)]
    return tuple(terms)


def stated_terms(
    study: Study, stated: tuple[tuple[str, ...], ...], blocks: IntArray
) -> tuple[Term, ...]:
    """Keep of a second-order model the constant, the blocks, and the terms that are stated.

    ``stated`` holds the sorted names that each term multiplies.
    """
    numeric = tuple(factor.name for factor in study.numeric)
    kept = []
    for term in model_terms(study, 2, blocks):
        names = [numeric[j] for j in product_factors(term.monomial, len(numeric))]
        if term.contrast is not None:
            names.append(study.categorical[term.contrast[0]].name)
        if not names or tuple(sorted(names)) in stated:
            kept.append(term)
    return tuple(kept)


def degree(term: Term, n_factors: int) -> int:
    """Give a term's degree, counting a categorical contrast as one."""
    numeric = 0 if term.monomial == 0 else 1 if term.monomial <= n_factors else 2
    return numeric + (term.contrast is not None)


def model_matrix(study: Study, terms: tuple[Term, ...], rows: IntArray) -> FloatArray:
    """Evaluate the terms at runs given by index: shape (n, q)."""
    x = to_coded(study.numeric, study.runs.numeric_actual[rows])
    numeric = features(x)
    columns = []
    for term in terms:
        column = numeric[:, term.monomial].copy()
        if term.contrast is not None:
            factor, contrast = term.contrast
            weights = sum_to_zero(len(study.categorical[factor].levels))
            column *= weights[study.runs.levels[rows, factor], contrast]
        if term.block is not None:
            column *= sum_to_zero(len(study.runs.blocks))[study.runs.block[rows], term.block]
        columns.append(column)
    return np.stack(columns, axis=1)


def in_printed_order(terms: tuple[Term, ...]) -> list[int]:
    """Give the order in which terms are printed: constant, linear, squares, products, the rest."""
    return sorted(
        range(len(terms)),
        key=lambda i: (
            terms[i].block is not None,
            terms[i].contrast is not None,
            terms[i].monomial if terms[i].contrast is None else 0,
            i,
        ),
    )


def product_factors(monomial: int, n_factors: int) -> tuple[int, ...]:
    """Give the factors in a second-order term by its place: () for the constant, (j, j), (a, b)."""
    if monomial == 0:
        return ()
    if monomial <= n_factors:
        return (monomial - 1,)
    if monomial <= 2 * n_factors:
        return (monomial - 1 - n_factors, monomial - 1 - n_factors)
    first, second = pairs(n_factors)
    place = monomial - 1 - 2 * n_factors
    return (first[place], second[place])
