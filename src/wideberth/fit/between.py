"""Blocks that are a sample: the variance between days or lots, added to that of one batch.

The runs are fitted with a contrast a block, so slopes and curvatures are compared within blocks.
The constant is the average of the b blocks that were run; a batch in a block to come differs from
it by the noise within blocks, by its own block, and by the average of the blocks run. With sigma
the standard deviation within blocks and tau that between them, the mean at a setting of leverage
h has variance ``sigma^2 h + tau^2 / b``, a batch ``sigma^2 (1 + h) + tau^2 (1 + 1/b)``.

A model then speaks in units of the variance of such a batch, ``sigma^2 + tau^2``: everything
above reads one s and one unscaled covariance, and asks here for the degrees of freedom.

References
----------
Cochran (1964), Biometrics 20, 191-195, from memory: the quantile for a sum of two estimated
variances is the average of their own t quantiles, weighted with the variances. It is never less
sure than it says; Satterthwaite's degrees of freedom are, where few blocks vary much (tests).
"""

from __future__ import annotations

import numpy as np

from wideberth.errors import Fault
from wideberth.fit.least_squares import LeastSquares
from wideberth.fit.records import Between, Term, sum_to_zero
from wideberth.study.records import FloatArray, Response, Study


def unknown_between(study: Study, response: Response, terms: tuple[Term, ...]) -> Fault | None:
    """Say why the variance between blocks cannot be had, ``None`` when it can."""
    if study.future_blocks != "sample":
        return None
    n_contrasts = sum(term.block is not None for term in terms)
    n_blocks = len(study.runs.blocks)
    if n_contrasts != n_blocks - 1:
        return Fault(
            f"{response.name} cannot be compared between all blocks"
            f" ({', '.join(study.runs.blocks)}), so their variance is not known",
            f"{study.runs.file}, column {response.name}",
            "measure it in every block, with enough runs in each",
        )
    if n_blocks == 1 and response.block_sd is None:
        return Fault(
            f"all runs lie in one block, so the variance of {response.name} between blocks is"
            " not known",
            f"study.toml, responses.{response.name}",
            "state block_sd, the standard deviation between blocks",
        )
    return None


def between_blocks(
    study: Study, response: Response, terms: tuple[Term, ...], fit: LeastSquares, s: float, df: int
) -> Between | None:
    """Estimate the variance between blocks, or take the stated one; ``None`` unless a sample.

    Parameters
    ----------
    s : float
        Standard deviation within blocks, with its degrees of freedom ``df``.
    """
    if study.future_blocks != "sample":
        return None
    n_blocks = len(study.runs.blocks)
    columns = [i for i, term in enumerate(terms) if term.block is not None]
    contrasts = sum_to_zero(n_blocks)
    effects: FloatArray = contrasts @ fit.coefficients[columns] if columns else np.zeros(n_blocks)
    spread = contrasts @ fit.covariance[np.ix_(columns, columns)] @ contrasts.T
    mean_square = float(effects @ effects) / max(n_blocks - 1, 1)
    noise = float(np.trace(spread)) / max(n_blocks - 1, 1)
    if response.block_sd is not None:
        sd, degrees = response.block_sd, None
    else:
        sd, degrees = float(np.sqrt(max(mean_square - s**2 * noise, 0.0))), n_blocks - 1
    return Between(
        sd=sd,
        df=degrees,
        n_blocks=n_blocks,
        effects=effects,
        mean_square=sd**2 if degrees is None else mean_square,
        noise=noise,
        s_within=s,
        df_within=df,
        covariance_within=fit.covariance,
    )


def batch_units(between: Between, terms: tuple[Term, ...]) -> tuple[float, FloatArray]:
    """Give the standard deviation of a batch in a new block, and the covariance in its units."""
    s = float(np.hypot(between.s_within, between.sd))
    if s == 0.0:
        return s, between.covariance_within
    covariance = between.covariance_within * (between.s_within / s) ** 2
    constant = [term.name for term in terms].index("1")
    covariance[constant, constant] += (between.sd / s) ** 2 / between.n_blocks
    return s, covariance
