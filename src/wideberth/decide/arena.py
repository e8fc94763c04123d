"""One problem to be searched: goals, guarded limits, region and room at chosen levels.

Everything is coded and scaled here, so that the search sees plain rows: a limit's row is its
margin, in standard deviations of one future batch or, where there is no noise, in hundredths of
the response's range over the region.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.desirability import shares_of_priority, sides
from wideberth.decide.guards import SmoothGuard
from wideberth.decide.records import ResolvedGoal
from wideberth.decide.region import Region, Room
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import feature_gradients, features
from wideberth.study.records import FloatArray, IntArray, Side


@dataclass(frozen=True, slots=True, eq=False)
class HardRow:
    """Something that must not be negative anywhere in the room: ``curve(x) - weight * K(h(x))``.

    It is the margin of one side of one limit at one block, or how far inside the ellipsoid.

    Attributes
    ----------
    limit : int or None
        Index of the limit side among the study's; the blocks of one side share it. ``None`` for
        the ellipsoid, which is never relaxed.
    curve : ndarray, shape (p,) or (N, p)
        For a high limit ``(limit - mean) / scale``, mirrored for a low one; one each where
        every setting has a draw of its own.
    weight : float or ndarray, shape (N,)
        ``c * s / scale``; 0 without a guard.
    guard : SmoothGuard or None
    covariance : ndarray, shape (p, p)
        Unscaled.
    block : str or None
        Where blocks recur, the block that it stands for.
    """

    limit: int | None
    curve: FloatArray
    weight: FloatArray | float
    guard: SmoothGuard | None
    covariance: FloatArray
    block: str | None = None

    def value(self, x: FloatArray) -> FloatArray:
        """Evaluate at coded settings of shape (..., k); shape (...)."""
        terms = features(x)
        value: FloatArray = np.einsum("...p,...p->...", terms, self.curve)
        if self.guard is None:
            return value
        leverage = np.einsum("...p,...p->...", terms @ self.covariance, terms)
        return value - self.weight * self.guard.value(leverage)

    def slope(self, x: FloatArray) -> FloatArray:
        """Differentiate at coded settings of shape (n, k): same shape; one row for all."""
        slope = Stack.from_coefficients(self.curve, x.shape[1]).gradient(x)
        if self.guard is None:
            return slope
        terms = features(x)
        pulled = terms @ self.covariance
        rate = self.guard.derivatives(np.einsum("np,np->n", pulled, terms))[1]
        rising = 2 * np.einsum("npk,np->nk", feature_gradients(x), pulled)
        result: FloatArray = slope - self.weight * rate[:, None] * rising
        return result

    def take(self, draws: IntArray) -> HardRow:
        """Pick draws, one for each setting to come; a row shared by all stays as it is."""
        if self.curve.ndim == 1:
            return self
        weight = np.broadcast_to(np.asarray(self.weight), len(self.curve))[draws]
        return replace(self, curve=self.curve[draws], weight=weight)


@dataclass(frozen=True, slots=True)
class LimitSide:
    """One side of one limit: a response is bounded on this side by this value."""

    response: str
    side: Side
    value: float


@dataclass(frozen=True, slots=True, eq=False)
class Arena:
    """The problem at one combination of levels.

    Where goals and limits carry draws, the settings handed to the functions below are paired with
    them: setting n is judged by draw n.

    Attributes
    ----------
    levels : tuple of int
        Index of the level of each categorical factor.
    region : Region
        Its planes already moved inwards by the room.
    goals : tuple of ResolvedGoal
    goal_means : ndarray, shape (n_goals, p) or (n_goals, N, p)
        Fitted means of the responses with a goal, block average.
    hard : tuple of HardRow
    near : tuple of ndarray, shape (k,) each
        Coded settings from which every search starts as well.
    """

    levels: tuple[int, ...]
    region: Region
    room: Room
    goals: tuple[ResolvedGoal, ...]
    goal_means: FloatArray
    hard: tuple[HardRow, ...]
    near: tuple[FloatArray, ...] = ()

    @property
    def n_factors(self) -> int:
        """Number of numeric factors k."""
        return len(self.region.origin)

    def take(self, draws: IntArray) -> Arena:
        """Pick draws, one for each setting to come."""
        means = self.goal_means
        return replace(
            self,
            goal_means=means if means.ndim == 2 else means[:, draws],
            hard=tuple(row.take(draws) for row in self.hard),
        )

    @property
    def limits(self) -> tuple[int, ...]:
        """The limit sides that apply, in the study's order."""
        return tuple(sorted({row.limit for row in self.hard if row.limit is not None}))


Cuts = tuple[tuple[FloatArray, ...], ...]
"""For each hard row the shifts (k,) within the room at which it must hold as well."""


def no_cuts(arena: Arena) -> Cuts:
    """Start without any shift: every row counts at the setting itself."""
    return tuple(() for _ in arena.hard)


def hard_values(arena: Arena, cuts: Cuts, x: FloatArray) -> FloatArray:
    """Evaluate every hard row at settings (N, k), the smallest over its shifts: (n_hard, N)."""
    values = np.empty((len(arena.hard), len(x)))
    for i, (row, shifts) in enumerate(zip(arena.hard, cuts, strict=True)):
        values[i] = row.value(x)
        for shift in shifts:
            values[i] = np.minimum(values[i], row.value(x + shift))
    return values


def limit_margins(arena: Arena, values: FloatArray) -> FloatArray:
    """Reduce hard values (n_hard, N) to the margin of each limit side (n_sides, N)."""
    rows = [row.limit for row in arena.hard]
    return np.stack(
        [values[[r == limit for r in rows]].min(axis=0) for limit in arena.limits]
        or [np.full(values.shape[1], np.inf)]
    )


def goal_values(arena: Arena, x: FloatArray) -> FloatArray:
    """Evaluate the fitted means of the responses with a goal: (N, k) to (N, n_goals)."""
    result: FloatArray = np.einsum("...p,g...p->...g", features(x), arena.goal_means)
    return result


def goal_targets(arena: Arena, y: FloatArray) -> FloatArray:
    """Give the epigraph target of each goal at response values (N, n_goals): same shape.

    It is the uncapped desirability of exponent 1 on the steepest side, with the other side bent
    to that scale, so that ``target ** steepest exponent`` is the desirability.
    """
    targets = np.empty_like(y)
    for i, goal in enumerate(arena.goals):
        parts = sides(goal)
        steepest = max(side.exponent for side in parts)
        values = []
        for side in parts:
            straight = side.slope * y[:, i] + side.offset
            bent = np.maximum(straight, 0.0) ** (side.exponent / steepest)
            values.append(np.where(straight > 0, bent, straight))
        targets[:, i] = np.min(values, axis=0)
    return targets


def log_desirability(arena: Arena, targets: FloatArray) -> FloatArray:
    """Give log D from uncapped targets (N, n_goals): (N,), minus infinity where D is 0."""
    steepest = np.array([max(side.exponent for side in sides(goal)) for goal in arena.goals])
    weights = shares_of_priority(arena.goals) * steepest
    capped = np.clip(targets, 0.0, 1.0)
    with np.errstate(divide="ignore"):
        result: FloatArray = np.log(capped) @ weights
    return result
