"""The answer of ``uncertainty`` as frozen records; settings and responses in own units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from wideberth.decide.conformance import Conformance
from wideberth.decide.losses import Losses
from wideberth.decide.problem import Mode
from wideberth.decide.records import Prediction
from wideberth.study.records import Finding, FloatArray, Setting
from wideberth.uncertainty.shortfall import Shortfall


@dataclass(frozen=True, slots=True, eq=False)
class Joined:
    """Settings whose studentised shortfall is at most ``critical`` belong to a region as well."""

    shortfall: Shortfall
    critical: float


@dataclass(frozen=True, slots=True, eq=False)
class OptimumRegion:
    """Where the true optimum may lie: an ellipsoid around the draws' optima, cut with the region.

    Where the optima crowd on the edge of what may be searched, settings join whose studentised
    shortfall is small enough.

    Attributes
    ----------
    level : float
    determined : bool
        False when the region fills more than half of what may be searched: the runs do not tell
        where the optimum is.
    share_of_explored : float
        Of the volume that may be searched.
    share_of_edge : float or None
        Of the edge of what may be searched; ``None`` where the optima do not crowd there. It has no
        volume, so that the other share alone would flatter the region.
    ranges : mapping
        Smallest and largest value of each numeric factor anywhere in the region, own units; of
        settings that joined, among some hundreds tried.
    centre : ndarray, shape (k,); shape : ndarray, shape (k, k)
        Coded: ``(x - centre)' shape (x - centre) <= 1``; nil in directions not spanned.
    joined : Joined or None
        What tells which settings join; ``None`` for the ellipsoid alone.
    """

    level: float
    determined: bool
    share_of_explored: float
    share_of_edge: float | None
    ranges: Mapping[str, tuple[float, float]]
    centre: FloatArray
    shape: FloatArray
    joined: Joined | None = None


@dataclass(frozen=True, slots=True)
class PossibleLoss:
    """What the setting loses in overall desirability against each draw's best one."""

    median: float
    bound: float


@dataclass(frozen=True, slots=True)
class Optimism:
    """How much too rosy the optimum of fitted equations looks, and what is left of it.

    ``desirability`` is the average by which draws' optima flatter D; ``corrected`` the setpoint's
    D less that, between 0 and 1. ``responses`` give for each response the same two numbers in its
    unit: what to take off the fitted mean, and the mean without it.
    """

    desirability: float
    corrected: float
    responses: Mapping[str, tuple[float, float]]


@dataclass(frozen=True, slots=True)
class Difference:
    """The setpoint less today's setting, with a 95 % interval where one can be given."""

    mean: float
    interval: tuple[float, float] | None


@dataclass(frozen=True, slots=True)
class Today:
    """The setpoint held against today's setting.

    Attributes
    ----------
    setting : Setting
    predictions : mapping
        Of every response at today's setting.
    differences : mapping
        Of every response's mean, in its unit: exact paired intervals.
    desirability : Difference or None
        Corrected by the optimism of the draws; ``None`` without goals or draws.
    conformance : Difference or None
        Share of batches inside all limits; ``None`` without limits or draws.
    broken : tuple of str
        Limits that today's setting does not hold, as one fixed in advance.
    verdict : str
    """

    setting: Setting
    predictions: Mapping[str, Prediction]
    differences: Mapping[str, Difference]
    desirability: Difference | None
    conformance: Difference | None
    broken: tuple[str, ...]
    verdict: str


@dataclass(frozen=True, slots=True, eq=False)
class Uncertainty:
    """How sure a choice is.

    Attributes
    ----------
    draws : int
        0 when nothing can be drawn; ``reason`` says why.
    setting : Setting or None
        What loss and conformance are of.
    mode : Mode
        How limits were guarded in the draws.
    feasible_share : float or None
        Of the draws, those in which some setting holds every guarded limit.
    edge_share : float or None
        Of the feasible draws, those whose optimum lies on the edge of what may be searched.
    level_shares : mapping
        For each combination of levels of categorical factors, the share of draws that prefer it.
    region, possible_loss, optimism : records or None
        The region at 95 %.
    narrower : tuple of OptimumRegion
        The same at 50 and 90 %.
    today : Today or None
        The setpoint held against ``[today]``, where that is stated for every factor.
    conformance : Conformance or None
        Setting error included where tolerances are stated; ``None`` without limits.
    conformance_exact_setting : Conformance or None
        As if every batch were run at exactly the setting.
    losses : Losses or None
        Where conformance is lost.
    """

    draws: int
    seed: int
    setting: Setting | None
    mode: Mode
    feasible_share: float | None
    edge_share: float | None
    level_shares: Mapping[str, float]
    region: OptimumRegion | None
    narrower: tuple[OptimumRegion, ...]
    possible_loss: PossibleLoss | None
    conformance: Conformance | None
    conformance_exact_setting: Conformance | None
    setting_error_included: bool
    losses: Losses | None
    optimism: Optimism | None
    today: Today | None
    findings: tuple[Finding, ...]
    reason: str
