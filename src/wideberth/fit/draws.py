"""Draws: sets of coefficients and of batch noise that the runs allow, all responses together.

The noise covariance of the responses is drawn from an inverse Wishart distribution around the
residual cross-products, then noise is drawn for every run and projected onto each response's own
columns. With equal runs and terms this is exact: every single response keeps its t distribution,
and every joint statement about one response is an exact pivot. Missing cells and unequal terms
keep each response's own projection and its own chi-square; the correlation between responses is
then taken pair by pair.

References
----------
The posterior of a multivariate regression under the prior ``|Sigma|^-1`` (Geisser 1965, Annals of
Mathematical Statistics 36, 150-159; from memory), with degrees of freedom df + m - 1 so that each
response alone has df of them; Bartlett's decomposition for the Wishart draws.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import gammainc, gammaincinv

from wideberth.fit.block_draws import add_average_block, block_root, root_of_sum
from wideberth.fit.columns import model_matrix
from wideberth.fit.covariance import inverse_wishart_root, root_of_correlation
from wideberth.fit.models import rows_fitted
from wideberth.fit.records import Model, Models
from wideberth.seeds import stream
from wideberth.study.records import FloatArray, IntArray

BLOCK = 256
"""Draws of one random stream; the first draws are the same however many are asked for."""


@dataclass(frozen=True, slots=True, eq=False)
class Draws:
    """Coefficients and batch noise, one of each a draw.

    Attributes
    ----------
    varying : tuple of str
        The m responses that have noise, in the study's order.
    coefficients : tuple of ndarray, shape (n, q) each
        Of the varying responses, coded units.
    noise : ndarray, shape (n, m, m)
        With z standard normal, ``noise @ z`` is the noise of one future batch.
    """

    varying: tuple[str, ...]
    coefficients: tuple[FloatArray, ...]
    noise: FloatArray

    @property
    def n_draws(self) -> int:
        """Number of draws."""
        return len(self.noise)

    def of(self, model: Model) -> FloatArray:
        """Give the coefficients of one response, shape (n, q) or (1, q) where it does not vary."""
        if model.response in self.varying:
            return self.coefficients[self.varying.index(model.response)]
        return model.coefficients[None, :]

    def part(self, first: int, last: int) -> Draws:
        """Give the draws from ``first`` up to ``last``."""
        kept = slice(first, last)
        return Draws(self.varying, tuple(c[kept] for c in self.coefficients), self.noise[kept])

    def sd(self, model: Model) -> FloatArray:
        """Give the batch standard deviation of one response, shape (n,) or (1,)."""
        if model.response not in self.varying:
            return np.zeros(1)
        root = self.noise[:, self.varying.index(model.response)]
        result: FloatArray = np.sqrt((root * root).sum(axis=1))
        return result


def why_no_draws(models: Models) -> str:
    """Say why nothing can be drawn, ``""`` when draws are possible."""
    asked = {r.name for r in models.study.responses if r.goal or r.limit}
    bare = [m.response for m in models.models if m.response in asked and m.s is None]
    if not bare:
        return ""
    return (
        f"the runs leave no degrees of freedom to estimate the noise of {', '.join(bare)},"
        " so nothing can be said about how sure the answer is"
    )


def draw_coefficients(models: Models, n_draws: int, seed: int) -> Draws:
    """Draw coefficients and noise of all responses that have noise.

    Parameters
    ----------
    models : Models
        See `why_no_draws` first: a response without degrees of freedom does not vary here.
    n_draws : int
    seed : int
    """
    varying = tuple(m for m in models.models if not m.exact and m.s is not None and m.s > 0)
    names = tuple(model.response for model in varying)
    if not varying:
        return Draws(names, (), np.zeros((n_draws, 0, 0)))
    residuals, projections, rows = _residuals_and_projections(models, varying)
    root = root_of_correlation(residuals)
    least = min(model.df_error for model in varying)
    coefficients: list[list[FloatArray]] = [[] for _ in varying]
    noise = []
    for block in range(-(-n_draws // BLOCK)):
        random = stream(seed, "draws of coefficients", block)
        mixed = _scaled(inverse_wishart_root(random, root, least, BLOCK), varying, least)
        errors = random.standard_normal((BLOCK, len(residuals), len(varying)))
        errors = errors @ mixed.transpose(0, 2, 1)
        moved = [errors[:, rows[j], j] @ projections[j].T for j in range(len(varying))]
        if any(model.between is not None for model in varying):
            blocks = block_root(random, mixed, varying)
            shift = (blocks @ random.standard_normal((BLOCK, len(varying), 1)))[..., 0]
            for j, model in enumerate(varying):
                add_average_block(moved[j], shift[:, j], model)
            mixed = root_of_sum(mixed, blocks)
        for j, model in enumerate(varying):
            coefficients[j].append(model.coefficients + moved[j])
        noise.append(mixed)
    return Draws(
        names,
        tuple(np.concatenate(parts)[:n_draws] for parts in coefficients),
        np.concatenate(noise)[:n_draws],
    )


def _residuals_and_projections(
    models: Models, varying: tuple[Model, ...]
) -> tuple[FloatArray, list[FloatArray], list[IntArray]]:
    """Give residuals (n, m), not-a-number where a run is missing, and each (X'WX)^-1 X'W^1/2.

    Residuals carry the root of their weight, so that all have the variance of one batch.
    """
    study = models.study
    responses = {response.name: response for response in study.responses}
    used = [rows_fitted(study, responses[model.response]) for model in varying]
    every = np.unique(np.concatenate(used))
    residuals = np.full((len(every), len(varying)), np.nan)
    projections, places = [], []
    for j, (model, rows) in enumerate(zip(varying, used, strict=True)):
        matrix = model_matrix(study, model.terms, rows)
        places.append(np.searchsorted(every, rows).astype(np.int64))
        root = np.sqrt([run.weight for run in model.runs])
        residuals[places[j], j] = root * [run.residual for run in model.runs]
        projections.append(_within(model)[1] @ (matrix * root[:, None]).T)
    return residuals, projections, places


def _scaled(mixed: FloatArray, varying: tuple[Model, ...], least: int) -> FloatArray:
    """Scale each response's rows to its residual sum of squares and its own chi-square."""
    scaled = mixed.copy()
    for j, model in enumerate(varying):
        size = np.sqrt((mixed[:, j] ** 2).sum(axis=1))
        chi_square = 1.0 / size**2
        if model.df_error != least:
            level = gammainc(least / 2, chi_square / 2)
            chi_square = 2 * gammaincinv(model.df_error / 2, level)
        sd = _within(model)[0] * np.sqrt(model.df_error / chi_square)
        scaled[:, j] *= (sd / size)[:, None]
    return scaled


def _within(model: Model) -> tuple[float, FloatArray]:
    """Give the standard deviation within blocks, and the unscaled covariance in its units."""
    if model.between is None:
        return model.s or 0.0, model.covariance
    return model.between.s_within, model.between.covariance_within
