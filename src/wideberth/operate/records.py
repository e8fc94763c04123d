"""The answers of ``window`` and ``robustness`` as frozen records, in own units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from wideberth.decide.conformance import Conformance
from wideberth.decide.records import Prediction
from wideberth.study.records import Finding, Setting

Ends = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Stop:
    """What stops the window on one side of a factor, in words; ``""`` where nothing does."""

    low: str
    high: str


@dataclass(frozen=True, slots=True)
class Window:
    """The largest box found around the room of a setting in which everything holds, proven.

    Attributes
    ----------
    status : {"proven", "none"}
    setting : Setting or None
    ranges : mapping
        The proven box in own units; empty without a window.
    settable : mapping
        The same moved inwards to whole settable steps, never inside the room.
    hold : mapping
        What each factor is held within: its room, or the range that was asked for.
    act_at : mapping
        Where to act: the window less the room, so that ordinary scatter stays inside the window.
    relative_volume : float or None
        Product over the factors of the box's width by the width explored.
    stopped_by : mapping
    singly : mapping
        How far each factor alone may go, the others in their room: these do not hold together.
    boxes : int
        Boxes that the proof needed.
    must_give : tuple of str
        Without a window: what stands against it.
    counterexample : Setting or None
        Where a range was asked for: a setting inside it at which something breaks.
    """

    status: Literal["proven", "none"]
    setting: Setting | None
    ranges: Mapping[str, Ends]
    settable: Mapping[str, Ends]
    hold: Mapping[str, Ends]
    act_at: Mapping[str, Ends]
    relative_volume: float | None
    stopped_by: Mapping[str, Stop]
    singly: Mapping[str, Ends]
    boxes: int
    must_give: tuple[str, ...]
    counterexample: Setting | None = None


@dataclass(frozen=True, slots=True)
class Wander:
    """What setting error does to one response, in its unit.

    Attributes
    ----------
    shift : float
        Mean over the setting error less the mean at the setting itself.
    sd_setting, sd_batch, sd_total : float
        ``sd_batch`` is ``None`` where the noise cannot be estimated; 0 for exact responses.
    shares : mapping
        Of the variance that setting error makes, by factor; empty where it makes none.
    worst : (float, float)
        Lowest and highest fitted mean anywhere in the room.
    """

    unit: str
    shift: float
    sd_setting: float
    sd_batch: float | None
    sd_total: float | None
    shares: Mapping[str, float]
    worst: Ends


@dataclass(frozen=True, slots=True)
class DriftStep:
    """One factor a whole number of tolerances off, the others wandering as stated.

    ``broken`` names the limits whose guard does not hold at that setting; ``explored`` tells
    whether it was explored at all; ``conformance`` is ``None`` without limits or draws.
    """

    tolerances: int
    value: float
    explored: bool
    conformance: float | None
    broken: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Drift:
    """One factor drifting by up to three tolerances to either side."""

    factor: str
    unit: str
    steps: tuple[DriftStep, ...]


@dataclass(frozen=True, slots=True)
class Correction:
    """What to do with the other factors when one is off and cannot be brought back.

    Attributes
    ----------
    tolerances : int
        How far off, with its sign; ``value`` is where the factor then stands.
    broken : tuple of str
        Limits whose guard does not hold there if nothing is done.
    before, after : float or None
        D if nothing is done and after the correction; ``after`` is ``None`` where no setting of
        the others holds every limit.
    changes : mapping
        By how much to move each other factor; empty where nothing is worth doing.
    """

    factor: str
    unit: str
    tolerances: int
    value: float
    broken: tuple[str, ...]
    before: float | None
    after: float | None
    changes: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Looser:
    """One tolerance doubled: whether every guarded limit still holds, and the conformance."""

    holds: bool
    conformance: float | None


@dataclass(frozen=True, slots=True)
class Robustness:
    """What happens at a setting when the factors wander within their tolerances.

    Attributes
    ----------
    conformance : Conformance or None
        Setting error included; ``None`` without limits or draws.
    halved : mapping
        Conformance with one factor's tolerance halved.
    doubled : mapping
        One factor's tolerance doubled.
    drifts : tuple of Drift
    corrections : tuple of Correction
    tighten_first : str
        The factor whose tolerance to tighten first, ``""`` when nothing is gained.
    advice : str
        The same in a sentence.
    """

    setting: Setting | None
    seed: int
    responses: Mapping[str, Wander]
    conformance: Conformance | None
    halved: Mapping[str, float]
    doubled: Mapping[str, Looser]
    drifts: tuple[Drift, ...]
    corrections: tuple[Correction, ...]
    tighten_first: str
    advice: str
    findings: tuple[Finding, ...]


@dataclass(frozen=True, slots=True)
class RunToTry:
    """A run beyond the explored region: to be tried under supervision, never to be used as set.

    Attributes
    ----------
    reach : float
        Times as far from the middle as the explored edge.
    setting : Setting
    predictions : mapping
    leverage_ratio : float
        Largest leverage of any response by the largest of its runs: above 1 it extrapolates.
    """

    reach: float
    setting: Setting
    predictions: Mapping[str, Prediction]
    leverage_ratio: float
    desirability: float | None


@dataclass(frozen=True, slots=True)
class PathPoint:
    """One point of the compromise's ridge: the best setting at a reach, in coded steps inside."""

    reach: float
    setting: Setting
    predictions: Mapping[str, Prediction]
    desirability: float | None


@dataclass(frozen=True, slots=True)
class Outward:
    """The ridge of the compromise from well inside to beyond the explored edge.

    ``reason`` says why there is nothing to try where ``runs`` is empty.
    """

    path: tuple[PathPoint, ...]
    runs: tuple[RunToTry, ...]
    reason: str
