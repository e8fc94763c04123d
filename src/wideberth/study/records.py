"""What a person states and what was measured, as frozen records.

Everything above reads these and nothing changes them. Names are the person's own; a setting in
own units is a mapping from factor name to number (numeric factor) or level (categorical one).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from decimal import Decimal
from pathlib import Path
from typing import Literal

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

Setting = Mapping[str, float | str]
Grade = Literal["fine", "look", "do not use"]
Want = Literal["more", "less", "near"]
GuardKind = Literal["none", "mean", "batch", "share"]
Side = Literal["low", "high"]


def frozen_array(values: npt.ArrayLike) -> FloatArray:
    """Copy to a read-only float array."""
    array = np.array(values, dtype=np.float64)
    array.flags.writeable = False
    return array


@dataclass(frozen=True, slots=True)
class Finding:
    """A sentence that the reader should know, with how much it matters and what it is about."""

    grade: Grade
    text: str
    about: str = ""


@dataclass(frozen=True, slots=True)
class NumericFactor:
    """A factor set on a scale. ``low`` and ``high`` are coded -1 and +1; all in ``unit``."""

    name: str
    unit: str
    low: float
    high: float
    allowed: tuple[float, float] | None = None
    tolerance: float | None = None
    settable_step: Decimal | None = None
    scale: Literal["linear", "log"] = "linear"
    reading_error: float | None = None
    """How far a setting as run may be off the planned one and still count as the planned one."""


@dataclass(frozen=True, slots=True)
class CategoricalFactor:
    """A factor that takes one of a few named levels."""

    name: str
    unit: str
    levels: tuple[str, ...]


Factor = NumericFactor | CategoricalFactor


@dataclass(frozen=True, slots=True)
class Goal:
    """What a response is wanted to be; bounds in the response's unit, ``None`` when not stated.

    For ``more`` and ``less``, ``poor`` and ``ideal`` hold one number. For ``near``, ``poor`` holds
    the two outer numbers and ``ideal`` the lower and upper end of the ideal range (equal for a
    point). ``exponent`` holds the left and the right one (equal for one-sided goals).
    """

    want: Want
    poor: tuple[float, ...] | None = None
    ideal: tuple[float, ...] | None = None
    exponent: tuple[float, float] = (1.0, 1.0)
    priority: float = 1.0


@dataclass(frozen=True, slots=True)
class Limit:
    """A bound on a response that must hold, and how surely."""

    low: float | None
    high: float | None
    guard: GuardKind
    confidence: float = 0.95
    share: float = 0.99
    point: Literal["chosen", "fixed"] = "chosen"


@dataclass(frozen=True, slots=True)
class Formula:
    """A polynomial of degree 2 at most in the factors' own units.

    ``terms`` maps the sorted factor names of each product (``()`` for the constant,
    ``("a", "a")`` for a square) to its number.
    """

    terms: Mapping[tuple[str, ...], float]


@dataclass(frozen=True, slots=True)
class KnownSd:
    """A batch standard deviation known from history: ``value`` in the response's unit on ``df``."""

    value: float
    df: int


@dataclass(frozen=True, slots=True)
class Response:
    """One response: measured, derived from measured ones, or known exactly by its ``formula``."""

    name: str
    unit: str
    goal: Goal | None = None
    limit: Limit | None = None
    order: Literal[1, 2] | None = None
    """Stated order of the model; ``None``: 2, or what the runs support."""
    terms: tuple[tuple[str, ...], ...] | None = None
    """Stated terms, each as the sorted names it multiplies; ``None``: all of the order."""
    formula: Formula | None = None
    derived: Formula | None = None
    """Computed run by run from measured responses (first degree) and factors, then fitted."""
    known_sd: KnownSd | None = None
    block_sd: float | None = None
    """Standard deviation between blocks that are a sample; ``None``: estimated from the runs."""


@dataclass(frozen=True, slots=True)
class LeftOut:
    """Rows of the sheet that are not fitted, and why.

    ``rows`` are counted as in the file; ``responses`` is empty where they are left out for all.
    """

    rows: tuple[int, ...]
    reason: str
    responses: tuple[str, ...] = ()

    def words(self) -> str:
        """Say what is left out of which models, and why: ``Row 7 is left out: reason.``."""
        rows = ", ".join(str(row) for row in self.rows)
        subject = f"Row {rows} is" if len(self.rows) == 1 else f"Rows {rows} are"
        scope = f" of {', '.join(self.responses)}" if self.responses else ""
        return f"{subject} left out{scope}: {self.reason}."


@dataclass(frozen=True, slots=True)
class Assays:
    """Repeated assays of one response, averaged to one value a batch.

    Attributes
    ----------
    counts : tuple of int
        The different numbers of assays behind the values, rising.
    sd : float or None
        Standard deviation of one assay, pooled over the batches; ``None`` without repeats.
    df : int
        Its degrees of freedom.
    """

    counts: tuple[int, ...]
    sd: float | None
    df: int


@dataclass(frozen=True, slots=True)
class Constraint:
    """Several factors together: sum of number x factor, own units, between two bounds."""

    name: str
    weights: Mapping[str, float]
    at_most: float | None = None
    at_least: float | None = None


@dataclass(frozen=True, slots=True)
class RegionChoice:
    """Where to search: ``explored``, ``allowed``, or a coded ``radius``."""

    keep: Literal["explored", "allowed", "radius"] = "explored"
    radius: float | None = None


@dataclass(frozen=True, slots=True)
class PlanChoice:
    """The runs to be planned, as stated in ``[plan]`` or by the options of ``plan``.

    Attributes
    ----------
    core : str or None
        Which fraction of the two-level runs; ``None``: the smallest of resolution V or better.
    axial : str or float
        How far the axial runs reach, by name or as a coded distance.
    shrink : float
        The whole design is drawn in toward its centre by this factor.
    centre_runs : tuple of (int, int) or None
        For each block of two-level runs, and for the block of axial runs; ``None``: by default.
    runs : int or None
        Size of an optimal plan.
    hold : tuple of str or None
        Responses whose limits every run must hold, by the fitted models; ``None``: those that
        are guarded by ``share``.
    error_sd : mapping
        Expected standard deviation of one run, by response.
    """

    design: Literal["central composite", "box-behnken", "two-level", "optimal"] = (
        "central composite"
    )
    core: Literal["full", "half", "quarter", "eighth", "sixteenth"] | None = None
    axial: str | float = "rotatable"
    shrink: float = 1.0
    centre_runs: tuple[int, int] | None = None
    blocks: int = 1
    replicates: int = 1
    runs: int | None = None
    criterion: Literal["D", "I"] = "I"
    order: Literal[1, 2] = 2
    error_sd: Mapping[str, float] = field(default_factory=dict)
    hold: tuple[str, ...] | None = None

    @property
    def fitted_order(self) -> Literal[1, 2]:
        """Order of the model that the plan is judged by; a design brings its own terms."""
        return self.order if self.design == "optimal" else 2


@dataclass(frozen=True, slots=True)
class Context:
    """Texts for the memo; empty when not stated."""

    product: str = ""
    equipment: str = ""
    scale_run: str = ""
    scale_intended: str = ""
    held_constant: str = ""
    document: str = ""
    revision: str = ""
    date: str = ""


@dataclass(frozen=True, slots=True)
class Runs:
    """The run sheet. ``n`` runs in file order; axes follow the study's order.

    Attributes
    ----------
    file : str
        The sheet's file name.
    rows : tuple of int
        Row of the file, header = 1; of several assays of one batch the first.
    numeric_actual : ndarray, shape (n, n_numeric)
        Numeric factors in own units.
    levels : ndarray of int, shape (n, n_categorical)
        Index of the level of each categorical factor.
    measured : ndarray, shape (n, n_measured)
        Measured responses in own units, NaN where the cell is empty or left out.
    blocks : tuple of str
        The different blocks in order of appearance; empty when the sheet has no block column.
    block : ndarray of int, shape (n,)
        Index into ``blocks`` (all 0 without blocks).
    kind : tuple of str
        Kind of each run, ``""`` when not stated.
    order : tuple of int or None
        Run order when the sheet has a ``run`` column of whole numbers.
    note : tuple of str
        The notes, ``""`` where there is none.
    weight : ndarray of shape (n,) or None
        How many ordinary runs each is worth: its variance is that of one batch over its weight.
        ``None`` when the sheet has no weight column: all 1.
    left_out : tuple of int
        Places of the runs that are left out for every response.
    others : mapping of str to tuple of str
        Cells of the sheet's other columns (lot, operator); never fitted, looked at in the
        diagnosis.
    filled : bool
        Something was entered that a plan does not write: a result, a setting as run, a lot, a note.
    """

    file: str
    rows: tuple[int, ...]
    numeric_actual: FloatArray
    levels: IntArray
    measured: FloatArray
    blocks: tuple[str, ...]
    block: IntArray
    kind: tuple[str, ...]
    order: tuple[int, ...] | None
    note: tuple[str, ...]
    filled: bool = False
    weight: FloatArray | None = None
    left_out: tuple[int, ...] = ()
    others: Mapping[str, tuple[str, ...]] = field(default_factory=dict)

    @property
    def fitted(self) -> BoolArray:
        """Runs that may be fitted: not ``confirm``, ``failed`` or left out; shape (n,)."""
        fitted = np.array([kind not in ("confirm", "failed") for kind in self.kind], dtype=np.bool_)
        fitted[list(self.left_out)] = False
        return fitted


@dataclass(frozen=True, slots=True)
class Study:
    """All that a study folder holds, read and checked."""

    directory: Path
    title: str
    seed: int
    context: Context
    factors: tuple[Factor, ...]
    responses: tuple[Response, ...]
    constraints: tuple[Constraint, ...]
    region: RegionChoice
    future_blocks: Literal["recur", "sample"] | None
    today: Setting
    runs: Runs
    sha256: Mapping[str, str] = field(default_factory=dict)
    """Hash of each input file, by name, and of the whole study under ``"study"``."""
    plan: PlanChoice = PlanChoice()
    notes: tuple[Finding, ...] = ()
    """What reading found worth saying (a default taken, an empty cell)."""
    stage: Literal["draft", "final"] = "draft"
    """What the memo is, as its owner says."""
    left_out: tuple[LeftOut, ...] = ()
    every_run: Runs | None = None
    """The runs with nothing left out; ``None`` where ``runs`` is that already."""
    assays: Mapping[str, Assays] = field(default_factory=dict)
    """By response; empty when the sheet has no sample column."""

    @property
    def numeric(self) -> tuple[NumericFactor, ...]:
        """The numeric factors, in the study's order."""
        return tuple(f for f in self.factors if isinstance(f, NumericFactor))

    @property
    def categorical(self) -> tuple[CategoricalFactor, ...]:
        """The categorical factors, in the study's order."""
        return tuple(f for f in self.factors if isinstance(f, CategoricalFactor))

    @property
    def measured(self) -> tuple[Response, ...]:
        """The responses that have a value a run, measured or derived, in the study's order."""
        return tuple(r for r in self.responses if r.formula is None)
