"""Fitted models as frozen records, and how one model becomes a quadratic in the numeric factors.

A model's columns are products of one second-order term of the numeric coded factors with
contrasts of categorical factors or of blocks. With the levels and the block chosen, every model
is therefore a plain quadratic with a covariance: that is all that the floors above need.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri, stdtridf, stdtrit

from wideberth.quadratic.terms import n_terms
from wideberth.study.records import CategoricalFactor, Finding, FloatArray, Grade, Study


@dataclass(frozen=True, slots=True)
class Term:
    """One column of a model matrix.

    Attributes
    ----------
    name : str
        As printed: ``1``, ``a``, ``a^2``, ``a*b``, ``colour[red]``, ``a*colour[red]``,
        ``block[north]``.
    monomial : int
        Place of its numeric part among the second-order terms of the numeric factors.
    contrast : tuple of (int, int), optional
        Categorical factor and the contrast of it that multiplies the numeric part.
    block : int, optional
        The contrast of the blocks that multiplies the numeric part.
    """

    name: str
    monomial: int
    contrast: tuple[int, int] | None = None
    block: int | None = None


@dataclass(frozen=True, slots=True)
class FittedTerm:
    """One coefficient in coded units with its standard error and two-sided t test.

    ``se``, ``t`` and ``p`` are ``None`` where no residual degrees of freedom are left, the model
    is exact, or the fit is exact.
    """

    term: str
    coded: float
    se: float | None
    t: float | None
    p: float | None


@dataclass(frozen=True, slots=True)
class LackOfFit:
    """Lack of fit against true replicates: same settings, same block.

    ``ss_*`` are sums of squares; ``rms_size`` is sqrt of the mean square of what the replicates
    cannot explain, in the response's unit (0 when the lack-of-fit mean square is smaller than the
    pure-error one).
    """

    f: float
    df: tuple[int, int]
    p: float
    ss_lack: float
    ss_pure: float
    rms_size: float
    found_size: float
    """The size, counted like ``rms_size``, that this test finds in 4 of 5 studies."""


@dataclass(frozen=True, slots=True)
class Check:
    """One check of what a model takes for granted, in one sentence with its grade.

    ``df`` is ``None`` where p comes from simulated residuals.
    """

    kind: str
    statistic: float
    df: tuple[int, int] | None
    p: float
    grade: Grade
    text: str


@dataclass(frozen=True, slots=True)
class Part:
    """One line of the analysis of variance; ``f`` and ``p`` are ``None`` if it is not tested."""

    source: str
    df: int
    squares: float
    f: float | None
    p: float | None


@dataclass(frozen=True, slots=True)
class RunDiagnosis:
    """How one run stands to the model. Studentized is external; ``None`` where undefined."""

    row: int
    observed: float
    fitted: float
    residual: float
    leverage: float
    studentized: float | None
    cook: float | None
    weight: float = 1.0


@dataclass(frozen=True, slots=True)
class LeftOutRun:
    """A run that is not fitted, held against what the model without it expects of it.

    ``interval`` is the two-sided 95 % prediction interval of that one value; ``None`` where no
    degrees of freedom support one.
    """

    row: int
    reason: str
    observed: float
    expected: float
    interval: tuple[float, float] | None


@dataclass(frozen=True, slots=True)
class Pooled:
    """What pooling a standard deviation known from history did.

    ``value`` on ``df`` is what was known, ``s_runs`` on the residual degrees of freedom what the
    runs alone show (``None`` without any), ``p`` the two-sided F test between the two.
    """

    value: float
    df: int
    s_runs: float | None
    p: float | None


@dataclass(frozen=True, slots=True, eq=False)
class Between:
    """The variance between blocks that are a sample of those to come.

    Attributes
    ----------
    sd : float
        Standard deviation between blocks; 0 where their effects are no larger than noise.
    df : int or None
        Degrees of freedom behind it; ``None`` where it was stated.
    n_blocks : int
        b, the blocks that were run.
    effects : ndarray, shape (b,)
        Fitted effects of the blocks, which sum to 0.
    mean_square : float
        Of the effects, on ``df``: estimates ``sd**2 + noise * s_within**2``.
    noise : float
        What the noise within blocks adds to it, in units of its variance.
    s_within, df_within : float, int
        Standard deviation within blocks and its degrees of freedom.
    covariance_within : ndarray, shape (q, q)
        Unscaled covariance of the coefficients within blocks: (X'WX)^-1.
    """

    sd: float
    df: int | None
    n_blocks: int
    effects: FloatArray
    mean_square: float
    noise: float
    s_within: float
    df_within: int
    covariance_within: FloatArray

    def degrees(self, variance: FloatArray, extra: float, confidence: float) -> FloatArray:
        """Give the degrees of freedom whose t quantile serves an estimated variance, any shape.

        ``variance`` is in the response's unit squared; ``extra`` is 0 for a mean, 1 for one batch
        in a new block, 1/n for the average of n batches in new blocks; ``confidence`` one-sided.
        The quantile is Cochran's average of those of the two parts (`fit.between`).
        """
        between = (1.0 / self.n_blocks + extra) * self.mean_square
        within = np.maximum(variance - between, 0.0)
        inner = float(stdtrit(self.df_within, confidence))
        outer = float(stdtrit(self.df, confidence) if self.df else ndtri(confidence))
        t: FloatArray = (within * inner + between * outer) / (within + between)
        # from the one quantile to the degrees of freedom that have it
        result: FloatArray = np.asarray(stdtridf(confidence, t), dtype=np.float64)
        return result


@dataclass(frozen=True, slots=True, eq=False)
class Model:
    """One response's model.

    Attributes
    ----------
    exact : bool
        Known by its formula: no noise, no covariance, no degrees of freedom.
    order : int
        Order actually used.
    terms : tuple of Term, length q
    coefficients : ndarray, shape (q,)
        Coded units.
    covariance : ndarray, shape (q, q)
        Unscaled: (X'WX)^-1; the coefficients' covariance is ``s**2`` times this. Zero if exact.
        Where blocks are a sample, the constant's part carries their variance.
    n_runs : int
        Runs that were fitted (0 if exact).
    df_residual : int
        Of the runs alone; 0 if exact or saturated.
    df_error : int
        Degrees of freedom of the standard deviation within blocks: those of the runs, and of the
        history that is pooled.
    s : float or None
        Standard deviation of one batch of weight 1, in a new block where blocks are a sample; 0.0
        for an exact model and an exact fit, ``None`` when no degrees of freedom are left.
    noise_free : bool
        Measured, with residuals at rounding level.
    reasons : mapping
        Why a field is ``None``, by the field's name.
    grade : Grade
        The worst grade among the findings; ``do not use`` makes every answer ``unsupported``.
    """

    response: str
    unit: str
    exact: bool
    order: int
    terms: tuple[Term, ...]
    coefficients: FloatArray
    covariance: FloatArray
    table: tuple[FittedTerm, ...]
    n_runs: int
    df_residual: int
    df_error: int
    s: float | None
    r2: float | None
    r2_adjusted: float | None
    press: float | None
    r2_press: float | None
    lack_of_fit: LackOfFit | None
    runs: tuple[RunDiagnosis, ...]
    noise_free: bool
    findings: tuple[Finding, ...]
    grade: Grade
    reasons: Mapping[str, str] = field(default_factory=dict)
    left_out: tuple[LeftOutRun, ...] = ()
    pooled: Pooled | None = None
    between: Between | None = None
    checks: tuple[Check, ...] = ()
    anova: tuple[Part, ...] = ()

    def degrees(self, variance: npt.ArrayLike, extra: float, confidence: float) -> FloatArray:
        """Give the degrees of freedom to take a t quantile with, of the variance's shape.

        Parameters
        ----------
        variance : array_like
            In units of ``s**2``: a leverage plus ``extra``.
        extra : float
            0 for a mean, 1 for one batch, 1/n for the average of n batches.
        confidence : float
            Of the quantile, one-sided.
        """
        own = np.asarray(variance, dtype=np.float64)
        if self.between is None or not self.s:
            return np.full_like(own, self.df_error)
        return self.between.degrees(own * self.s**2, extra, confidence)


@dataclass(frozen=True, slots=True, eq=False)
class Models:
    """The models of all responses, in the study's order, with the study they came from."""

    study: Study
    models: tuple[Model, ...]

    def __getitem__(self, response: str) -> Model:
        """Give one response's model by its name."""
        for model in self.models:
            if model.response == response:
                return model
        raise KeyError(response)


@dataclass(frozen=True, slots=True, eq=False)
class Surface:
    """A model with its levels and block chosen: a quadratic in the k numeric coded factors.

    Attributes
    ----------
    coefficients : ndarray, shape (p,)
        In the order of ``quadratic.terms``.
    covariance : ndarray, shape (p, p)
        Unscaled; ``f(x)' covariance f(x)`` is the leverage h(x).
    s : float
        Standard deviation of one batch (0.0 where there is no noise).
    df : int
        Degrees of freedom of comparisons within blocks (0 where there are none).
    """

    coefficients: FloatArray
    covariance: FloatArray
    s: float
    df: int


def sum_to_zero(n_levels: int) -> FloatArray:
    """Give the contrasts of each level: shape (n_levels, n_levels - 1), columns summing to 0."""
    return np.vstack([np.eye(n_levels - 1), -np.ones((1, n_levels - 1))])


def design_map(
    model: Model, study: Study, *, levels: tuple[int, ...] = (), block: int | None = None
) -> FloatArray:
    """Map a model's q coefficients to the p second-order coefficients at chosen levels and block.

    Parameters
    ----------
    levels : tuple of int
        Index of the level of each categorical factor.
    block : int, optional
        Index of the block; ``None`` means the average of the blocks.

    Returns
    -------
    ndarray, shape (p, q)
        With ``f`` the second-order terms at a setting, the model row there is ``f @ map``.
    """
    return terms_map(model.terms, study, levels=levels, block=block)


def terms_map(
    terms: tuple[Term, ...],
    study: Study,
    *,
    levels: tuple[int, ...] = (),
    block: int | None = None,
) -> FloatArray:
    """Give the map of `design_map` for terms that no model was fitted with yet."""
    mapped = np.zeros((n_terms(len(study.numeric)), len(terms)))
    for column, term in enumerate(terms):
        weight = 1.0
        if term.contrast is not None:
            factor, contrast = term.contrast
            weight *= sum_to_zero(len(study.categorical[factor].levels))[levels[factor], contrast]
        if term.block is not None:
            n_blocks = len(study.runs.blocks)
            weight *= 0.0 if block is None else sum_to_zero(n_blocks)[block, term.block]
        mapped[term.monomial, column] += weight
    return mapped


def surface(
    model: Model, study: Study, *, levels: tuple[int, ...] = (), block: int | None = None
) -> Surface:
    """Reduce a model to its quadratic at chosen levels and block (``None``: block average)."""
    mapped = design_map(model, study, levels=levels, block=block)
    return Surface(
        coefficients=mapped @ model.coefficients,
        covariance=mapped @ model.covariance @ mapped.T,
        s=model.s or 0.0,
        df=model.df_error,
    )


def level_names(factors: tuple[CategoricalFactor, ...], levels: tuple[int, ...]) -> dict[str, str]:
    """Name the chosen level of each categorical factor."""
    return {f.name: f.levels[i] for f, i in zip(factors, levels, strict=True)}
