"""Results of canonical and ridge analysis, per response; directions and settings by factor name."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from wideberth.study.records import Setting


@dataclass(frozen=True, slots=True)
class Stationary:
    """The stationary point: coded, in own units, the mean there, and whether it was explored."""

    coded: Mapping[str, float]
    setting: Setting
    mean: float
    explored: bool


@dataclass(frozen=True, slots=True)
class Eigenvalue:
    """A curvature along a principal direction (unit length, coded), with its 95 % interval.

    ``interval`` is ``None`` where no degrees of freedom support one.
    """

    value: float
    interval: tuple[float, float] | None
    direction: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class RidgePoint:
    """The best mean at one coded distance from the centre; ``se`` of that mean, if any."""

    radius: float
    coded: Mapping[str, float]
    setting: Setting
    mean: float
    se: float | None
    explored: bool


@dataclass(frozen=True, slots=True)
class Shape:
    """The geometry of one response at chosen levels, block average.

    ``stationary`` is ``None`` when the surface has none (``reason`` says why); ``nature`` is one
    of the words in ``surface.canonical``. ``toward`` says which end the ridge follows.
    """

    response: str
    unit: str
    levels: Mapping[str, str]
    stationary: Stationary | None
    reason: str
    eigenvalues: tuple[Eigenvalue, ...]
    nature: str
    sentence: str
    toward: str
    ridge: tuple[RidgePoint, ...]
