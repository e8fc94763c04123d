"""The answer of ``recommend`` as frozen records: what doors print and the memo reads.

Settings and responses are in own units; margins in standard deviations of one future batch.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from wideberth.study.records import (
    Finding,
    FloatArray,
    GuardKind,
    Setting,
    Side,
    Want,
)

Status = Literal["met", "conflict", "provisional", "unproven", "unreached", "unsupported"]


@dataclass(frozen=True, slots=True)
class ResolvedGoal:
    """A goal with every bound settled.

    ``defaulted`` says in words where a bound that was not stated came from, empty if all were.
    """

    response: str
    unit: str
    want: Want
    poor: tuple[float, ...]
    ideal: tuple[float, ...]
    exponent: tuple[float, float]
    priority: float
    defaulted: str


@dataclass(frozen=True, slots=True)
class Prediction:
    """One response at a setting: block average, two-sided 95 % intervals, in the response's unit.

    Intervals are ``None`` where no degrees of freedom support them; exact responses have the mean
    at both ends. ``desirability`` is ``None`` for a response without a goal.
    """

    unit: str
    mean: float
    mean_interval: tuple[float, float] | None
    batch_interval: tuple[float, float] | None
    desirability: float | None


@dataclass(frozen=True, slots=True)
class LimitVerdict:
    """One limit at the setting, judged at its worst place in the room and its worst block.

    ``guarded`` is the guarded value there, ``at_setting`` the guarded value at the setting itself
    (worst block), both ``None`` where no guard can be computed. ``margin`` is as design words
    have it; ``factor`` is the constant that makes the guard simultaneous (1 for ``fixed``).
    ``margin_in`` says what the margin is counted in.
    """

    response: str
    unit: str
    side: Side
    value: float
    guard: GuardKind
    confidence: float
    share: float
    point: Literal["chosen", "fixed"]
    guarded: float | None
    at_setting: float | None
    met: bool
    margin: float | None
    margin_in: Literal["batch sd", "hundredths of the range"]
    factor: float
    block: str | None
    reason: str = ""


@dataclass(frozen=True, slots=True)
class ConstraintVerdict:
    """One several-factor constraint at its worst place in the room, in its own units."""

    name: str
    side: Literal["at_most", "at_least"]
    bound: float
    value: float
    met: bool


@dataclass(frozen=True, slots=True)
class Conflict:
    """A smallest set of limits that cannot hold together, each as (response, side, value).

    ``relaxed`` gives for each member the value to which it alone would have to be relaxed;
    ``proven`` tells whether a proof says so, or only the search.
    """

    limits: tuple[tuple[str, Side, float], ...]
    text: str
    relaxed: tuple[float, ...]
    proven: bool


@dataclass(frozen=True, slots=True)
class Bare:
    """The optimum before rounding to settable steps."""

    setpoint: Setting | None
    desirability: float | None
    proof_gap: float | None


@dataclass(frozen=True, slots=True)
class FactorRange:
    """What surrounds the setpoint in one numeric factor, own units.

    ``room`` is what the plant's tolerance spans (``None`` without one); ``explored`` the smallest
    and largest value anywhere in the explored region, not a box that may be used whole.
    """

    unit: str
    allowed: tuple[float, float]
    explored: tuple[float, float]
    room: tuple[float, float] | None


@dataclass(frozen=True, slots=True)
class Confirmation:
    """Runs at the setting whose own bound would be expected to meet every guarded limit.

    ``runs`` is ``None`` when even 10 runs would not be expected to.
    """

    runs: int | None
    text: str


@dataclass(frozen=True, slots=True)
class ConfirmationRange:
    """Where confirmation runs of one response should fall, in its unit.

    ``one`` is for a single run, ``three`` for the mean of three; all responses together with 95 %
    (the risk is split equally), the widest of the blocks where blocks recur.
    """

    unit: str
    one: tuple[float, float]
    three: tuple[float, float]


@dataclass(frozen=True, slots=True)
class Choice:
    """The answer of ``recommend``, or the judgement of a setting of the person's own.

    Attributes
    ----------
    status : Status
        ``met`` only when every limit holds with its guard over the whole room.
    asked : bool
        True when the person gave the setting (``--at``).
    setpoint : Setting or None
        On the settable steps; also given for the statuses that cannot recommend it.
    desirability : float or None
        ``None`` without goals.
    ruling : str
        The limit with the smallest margin in words, ``""`` without limits.
    edge : tuple of str
        Sentences about bounds that the setpoint leans on and where it wants to go.
    none_holds : bool or None
        Where no setting was found that holds what the status says none holds: whether that is
        proven. ``None`` where one was found, or a setting was given.
    """

    status: Status
    asked: bool
    seed: int
    setpoint: Setting | None
    desirability: float | None
    proof_gap: float | None
    unrounded: Bare
    goals: tuple[ResolvedGoal, ...]
    predictions: Mapping[str, Prediction]
    limits: tuple[LimitVerdict, ...]
    constraints: tuple[ConstraintVerdict, ...]
    ruling: str
    factors: Mapping[str, FactorRange]
    edge: tuple[str, ...]
    conflicts: tuple[Conflict, ...]
    none_holds: bool | None
    confirmation: Confirmation | None
    confirm: Mapping[str, ConfirmationRange]
    findings: tuple[Finding, ...]


@dataclass(frozen=True, slots=True, eq=False)
class LimitMap:
    """The margin of one limit over a map: 0 where it is just met, shape (n_up, n_across)."""

    response: str
    side: Side
    value: float
    margin: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class FactorMap:
    """Two factors across and up through the setpoint, the others held there.

    With one factor ``up`` is ``""`` and the arrays have one row. Margins are those of the setting
    itself, without room; blocks at the worst one.

    Attributes
    ----------
    across_actual, up_actual : ndarray, shapes (n_across,) and (n_up,)
        Own units.
    desirability : ndarray or None, shape (n_up, n_across)
        Overall desirability of the fitted means; ``None`` without goals.
    depth : ndarray, shape (n_up, n_across)
        How far inside the explored region, below 0 outside.
    conformance : ndarray or None, shape (n_up, n_across)
        Probability that a batch meets every limit, setting error included; ``None`` without
        limits or draws.
    """

    across: str
    up: str
    across_actual: FloatArray
    up_actual: FloatArray
    desirability: FloatArray | None
    margins: tuple[LimitMap, ...]
    depth: FloatArray
    conformance: FloatArray | None
