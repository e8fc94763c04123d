"""Draws of the variance between blocks that are a sample, all responses together.

Each response's mean square of block effects is drawn as its degrees of freedom over a chi-square,
and what the drawn noise within blocks adds to it is taken off again, never below zero; a stated
standard deviation stays as stated. Responses are correlated as their block effects are.
"""

from __future__ import annotations

import numpy as np

from wideberth.fit.covariance import inverse_wishart_root, root_of_correlation
from wideberth.fit.records import Model
from wideberth.study.records import FloatArray


def block_root(
    random: np.random.Generator, noise: FloatArray, varying: tuple[Model, ...]
) -> FloatArray:
    """Draw roots of the covariance between blocks, shape (n, m, m).

    Parameters
    ----------
    noise : ndarray, shape (n, m, m)
        Roots of the covariance within blocks, one a draw.
    varying : tuple of Model, length m
    """
    n_draws = len(noise)
    effects = [np.zeros(1) if model.between is None else model.between.effects for model in varying]
    n_blocks = max(len(own) for own in effects)
    table = np.stack([np.resize(own, n_blocks) for own in effects], axis=1)
    df = max(n_blocks - 1, 1)
    root = inverse_wishart_root(random, root_of_correlation(table), df, n_draws)
    size = np.square(root).sum(axis=2)
    within = np.square(noise).sum(axis=2)
    drawn = np.zeros((n_draws, len(varying)))
    for j, model in enumerate(varying):
        between = model.between
        if between is not None and between.df is None:
            drawn[:, j] = between.sd**2
        elif between is not None:
            square = between.mean_square * df * size[:, j]
            drawn[:, j] = np.maximum(square - between.noise * within[:, j], 0.0)
    result: FloatArray = root * np.sqrt(drawn / size)[..., None]
    return result


def add_average_block(moved: FloatArray, shift: FloatArray, model: Model) -> None:
    """Move the constant of drawn coefficients (n, q) by the average of the blocks that were run.

    ``shift`` (n,) is the effect of one block, drawn.
    """
    if model.between is not None:
        constant = [term.name for term in model.terms].index("1")
        moved[:, constant] += shift / np.sqrt(model.between.n_blocks)


def root_of_sum(first: FloatArray, second: FloatArray) -> FloatArray:
    """Give roots of ``first first' + second second'``, shapes (n, m, m)."""
    total = first @ first.transpose(0, 2, 1) + second @ second.transpose(0, 2, 1)
    values, vectors = np.linalg.eigh(total)
    result: FloatArray = vectors * np.sqrt(np.maximum(values, 0.0))[:, None, :]
    return result
