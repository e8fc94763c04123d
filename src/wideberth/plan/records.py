"""What planning gives, as frozen records."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from wideberth.study.records import (
    Finding,
    FloatArray,
    IntArray,
    PlanChoice,
    Setting,
    Study,
)


@dataclass(frozen=True, slots=True)
class Core:
    """The two-level runs of a design.

    Attributes
    ----------
    n_factors : int
    words : tuple of int
        Every product of factors that is constant over the runs, as a bit mask; empty when full.
    resolution : int or None
        Length of the shortest word; ``None`` when full.
    """

    n_factors: int
    words: tuple[int, ...]
    resolution: int | None


@dataclass(frozen=True, slots=True, eq=False)
class Design:
    """A design in coded units, n runs in standard order, before rounding to settable steps.

    Attributes
    ----------
    coded : ndarray, shape (n, k)
    levels : ndarray of int, shape (n, c)
        Level of each categorical factor.
    kind : tuple of str
    block : ndarray of int, shape (n,)
    n_blocks : int
    axial_distance : float or None
        Coded, before shrinking.
    core : Core or None
    said : tuple of str
        What was chosen by default, and why.
    """

    coded: FloatArray
    levels: IntArray
    kind: tuple[str, ...]
    block: IntArray
    n_blocks: int
    axial_distance: float | None = None
    core: Core | None = None
    said: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class PlannedRun:
    """One run as it goes into the sheet.

    Attributes
    ----------
    order : int
        Place in the run order, from 1 (or from the next number of a sheet that has runs).
    block : str
        Empty when there is one block only.
    setting : mapping
        In own units, on the settable steps.
    coded : tuple of float
        The numeric factors of that setting, coded.
    offences : tuple of str
        Why it must not be run; empty for every run of a plan that may be written.
    """

    order: int
    block: str
    kind: str
    setting: Setting
    coded: tuple[float, ...]
    offences: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class WayOut:
    """A plan that keeps inside, instead of the stated one.

    ``mean_variance`` is the average prediction variance over the region that the stated plan was
    to cover, in units of the error variance; ``ratio`` is that over the stated plan's own.
    ``None`` where the model cannot be fitted. ``options`` are those of the command.
    """

    what: str
    options: str
    n_runs: int
    mean_variance: float | None
    ratio: float | None


@dataclass(frozen=True, slots=True)
class Rounding:
    """What the settable steps cost: how many settings moved, and the average variance ratio."""

    moved: int
    largest_coded: float
    ratio: float | None


@dataclass(frozen=True, slots=True)
class Certificate:
    """How good an optimal plan is at least, over all plans of its size from the candidates.

    Attributes
    ----------
    criterion : str
    n_candidates : int
    n_free : int
        Runs that were chosen; fixed and existing runs are counted on both sides.
    efficiency : float
        Proven lower bound, between 0 and 1, from the dual of the convex weights problem.
    starts : int
    """

    criterion: Literal["D", "I"]
    n_candidates: int
    n_free: int
    efficiency: float
    starts: int


@dataclass(frozen=True, slots=True, eq=False)
class Spheres:
    """Scaled prediction variance (times the number of runs) on spheres around the centre, (m,)."""

    radius: FloatArray
    least: FloatArray
    mean: FloatArray
    most: FloatArray


@dataclass(frozen=True, slots=True)
class Detectable:
    """The smallest changes that a 5 % test finds with 80 % power, in error standard deviations.

    ``effect``: of a factor from low to high; ``product``: of two factors together; ``curvature``:
    from the centre to low or high. ``None`` where it cannot be estimated or tested.
    """

    effect: float | None
    product: float | None
    curvature: float | None


@dataclass(frozen=True, slots=True)
class Provable:
    """The smallest distance from a limit that a ``share`` guard could prove, in batch sd."""

    response: str
    unit: str
    distance: float
    error_sd: float | None


@dataclass(frozen=True, slots=True, eq=False)
class Quality:
    """How good a plan is, before anything is run.

    Attributes
    ----------
    n_runs, n_terms : int
        All runs that will be fitted, with those already made; terms of the model.
    df_lack, df_pure : int
        Degrees of freedom for lack of fit and pure error.
    largest_leverage : float or None
    mean_variance, most_variance : float or None
        Prediction variance over the region in units of the error variance.
    variance_levels : ndarray, shape (m,)
        The region's prediction variances in ascending order: the i-th lies above a share
        (i + 1/2) / m of the region.
    spheres : Spheres or None
    uneven : float or None
        Largest ratio, less 1, of two prediction variances on one sphere; 0: rotatable.
    aliases : tuple of str
        Sets of terms that the runs cannot tell apart.
    detectable : Detectable
    provable : tuple of Provable
    block_coupling : float
        Largest correlation of a block contrast with a term's column; 0: orthogonal blocks.
    """

    n_runs: int
    n_terms: int
    df_lack: int
    df_pure: int
    largest_leverage: float | None
    mean_variance: float | None
    most_variance: float | None
    variance_levels: FloatArray
    spheres: Spheres | None
    uneven: float | None
    aliases: tuple[str, ...]
    detectable: Detectable
    provable: tuple[Provable, ...]
    block_coupling: float


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """A plan, checked: ``status`` is ``ready`` or ``refused``.

    Attributes
    ----------
    study : Study
        As stated, with the runs that its sheet holds.
    fitted : Study
        The same with the planned runs added to those already made; results stand at nil.
    runs : tuple of PlannedRun
        In run order.
    """

    status: Literal["ready", "refused"]
    study: Study
    choice: PlanChoice
    seed: int
    design: Design
    runs: tuple[PlannedRun, ...]
    fitted: Study
    quality: Quality
    rounding: Rounding
    ways_out: tuple[WayOut, ...]
    certificate: Certificate | None
    findings: tuple[Finding, ...]

    @property
    def offending(self) -> tuple[PlannedRun, ...]:
        """The runs that must not be made."""
        return tuple(run for run in self.runs if run.offences)


@dataclass(frozen=True, slots=True)
class Effect:
    """What a term changes from low to high, with its 95 % interval and two-sided p."""

    term: str
    change: float
    interval: tuple[float, float] | None
    p: float | None


@dataclass(frozen=True, slots=True)
class Curvature:
    """Two-level runs less centre runs, tested against pure error.

    ``f`` has 1 and ``df`` degrees of freedom. ``detectable``: the smallest curvature that the test
    finds in 80 of 100, in the response's unit. ``None`` without pure error.
    """

    difference: float
    interval: tuple[float, float] | None
    f: float | None
    p: float | None
    df: int
    detectable: float | None


@dataclass(frozen=True, slots=True)
class StageResponse:
    """One response of a two-level stage.

    ``slopes`` are coded, one for each numeric factor; ``s`` is the residual standard deviation with
    the curvature in the model; ``curvature`` is ``None`` where the runs do not show it.
    """

    response: str
    unit: str
    n_runs: int
    s: float | None
    df: int
    mean: float
    slopes: tuple[float, ...]
    effects: tuple[Effect, ...]
    curvature: Curvature | None
    aliases: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class PathStep:
    """One run along the path: where, and what the first-order model expects."""

    step: int
    setting: Setting
    coded: tuple[float, ...]
    expected: float


@dataclass(frozen=True, slots=True)
class Path:
    """The path of steepest ascent (or descent) of one response.

    ``direction`` is coded, the steepest factor moving by 1 a step; ``stopped`` says why the path
    ends, ``rule`` when to stop running it.
    """

    response: str
    unit: str
    direction: tuple[float, ...]
    steps: tuple[PathStep, ...]
    stopped: str
    rule: str


@dataclass(frozen=True, slots=True)
class Decision:
    """What to do after a stage: follow the ``path``, add ``axial`` runs, or ``repeat``."""

    do: Literal["path", "axial", "repeat"]
    why: str


@dataclass(frozen=True, slots=True)
class Stage:
    """A finished two-level stage, judged."""

    responses: tuple[StageResponse, ...]
    decision: Decision
    path: Path | None
