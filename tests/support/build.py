"""Studies built directly from arrays, for tests of everything above reading."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import Decimal
from itertools import product
from pathlib import Path

import numpy as np

from wideberth.study.records import (
    CategoricalFactor,
    Constraint,
    Context,
    Formula,
    Goal,
    Limit,
    NumericFactor,
    RegionChoice,
    Response,
    Runs,
    Study,
)


def central_composite(k: int, *, n_centre: int = 4, alpha: float | None = None) -> np.ndarray:
    """A full two-level core, axial runs (rotatable by default) and centre runs, coded."""
    corners = np.array(list(product((-1.0, 1.0), repeat=k)))
    reach = (2**k) ** 0.25 if alpha is None else alpha
    axial = np.concatenate([reach * np.eye(k), -reach * np.eye(k)])
    return np.concatenate([corners, axial, np.zeros((n_centre, k))])


def small_composite(k: int, *, n_centre: int = 4) -> np.ndarray:
    """For many factors: a quarter of the corners by two generators, axial and centre runs."""
    base = np.array(list(product((-1.0, 1.0), repeat=k - 2)))
    core = np.column_stack([base, base[:, :4].prod(axis=1), base[:, -4:].prod(axis=1)])
    reach = len(core) ** 0.25
    return np.concatenate([core, reach * np.eye(k), -reach * np.eye(k), np.zeros((n_centre, k))])


def make_study(
    x: np.ndarray,
    values: Mapping[str, np.ndarray],
    *,
    names: Sequence[str] | None = None,
    goals: Mapping[str, Goal] | None = None,
    limits: Mapping[str, Limit] | None = None,
    formulas: Mapping[str, Mapping[tuple[str, ...], float]] | None = None,
    orders: Mapping[str, int] | None = None,
    units: Mapping[str, str] | None = None,
    low: Sequence[float] | None = None,
    high: Sequence[float] | None = None,
    allowed: Mapping[str, tuple[float, float]] | None = None,
    tolerance: Mapping[str, float] | float | None = None,
    step: Mapping[str, str] | str | None = None,
    categorical: Mapping[str, tuple[Sequence[str], Sequence[int]]] | None = None,
    blocks: Sequence[str] | None = None,
    kinds: Sequence[str] | None = None,
    constraints: Sequence[Constraint] = (),
    region: RegionChoice | None = None,
    seed: int = 1,
) -> Study:
    """Build a study whose settings ``x`` (n, k) are in own units (coded, by default)."""
    n, k = x.shape
    names = tuple(names or (f"f{j}" for j in range(k)))
    low, high = tuple(low or (-1.0,) * k), tuple(high or (1.0,) * k)
    factors: list = []
    for j, name in enumerate(names):
        room = tolerance.get(name) if isinstance(tolerance, Mapping) else tolerance
        stride = step.get(name) if isinstance(step, Mapping) else step
        factors.append(
            NumericFactor(
                name,
                "u",
                low[j],
                high[j],
                allowed=(allowed or {}).get(name),
                tolerance=room,
                settable_step=None if stride is None else Decimal(stride),
            )
        )
    levels = np.zeros((n, 0), dtype=np.int64)
    for name, (texts, places) in (categorical or {}).items():
        factors.append(CategoricalFactor(name, "", tuple(texts)))
        levels = np.column_stack([levels, np.array(places, dtype=np.int64)])
    responses = [
        Response(
            name,
            (units or {}).get(name, "v"),
            (goals or {}).get(name),
            (limits or {}).get(name),
            (orders or {}).get(name),
        )
        for name in values
    ]
    responses += [
        Response(
            name,
            (units or {}).get(name, "v"),
            (goals or {}).get(name),
            (limits or {}).get(name),
            formula=Formula(dict(terms)),
        )
        for name, terms in (formulas or {}).items()
    ]
    different = tuple(dict.fromkeys(blocks or ()))
    runs = Runs(
        file="runs.csv",
        rows=tuple(range(2, n + 2)),
        numeric_actual=np.asarray(x, dtype=float),
        levels=levels,
        measured=np.array(list(values.values()), dtype=float).reshape(len(values), n).T,
        blocks=different,
        block=np.array([different.index(b) for b in blocks or ()] or [0] * n, dtype=np.int64),
        kind=tuple(kinds or ("",) * n),
        order=None,
        note=("",) * n,
    )
    return Study(
        directory=Path(),
        title="test",
        seed=seed,
        context=Context(),
        factors=tuple(factors),
        responses=tuple(responses),
        constraints=tuple(constraints),
        region=region or RegionChoice(),
        future_blocks="recur" if different else None,
        today={},
        runs=runs,
    )


def more(poor: float | None, ideal: float | None, **kwargs) -> Goal:
    """A goal of more."""
    return Goal("more", _one(poor), _one(ideal), **kwargs)


def less(poor: float | None, ideal: float | None, **kwargs) -> Goal:
    """A goal of less."""
    return Goal("less", _one(poor), _one(ideal), **kwargs)


def _one(value: float | None) -> tuple[float, ...] | None:
    return None if value is None else (value,)
