"""The step that describes each response's geometry: canonical form and ridge path.

The ridge path follows the best fitted mean outwards, at growing coded distance from the centre,
and marks where it leaves the explored region.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import product
from typing import Literal

import numpy as np

from wideberth.errors import refusal
from wideberth.fit.records import Model, Models, level_names, surface
from wideberth.quadratic.sphere import extreme_on_sphere
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_actual
from wideberth.study.records import FloatArray, Setting, Study
from wideberth.surface.canonical import canonical
from wideberth.surface.explored import Explored, contains, explored_region, fitted_settings
from wideberth.surface.records import Eigenvalue, RidgePoint, Shape, Stationary

Toward = Literal["more", "less"]
_STEP = 0.25


def shape(
    models: Models, *, radii: Sequence[float] | None = None, toward: Toward | None = None
) -> tuple[Shape, ...]:
    """Describe every response, at every combination of categorical levels, block average.

    Parameters
    ----------
    models : Models
    radii : sequence of float, optional
        Coded distances of the ridge path; by default every 0.25 to the farthest run.
    toward : {"more", "less"}, optional
        Which end the ridge follows; by default what the goal wants, else more.

    Raises
    ------
    RefusedError
        When a radius is negative or not finite, or no factor is numeric.
    """
    study = models.study
    if not study.numeric:
        raise refusal("no factor is numeric", "study.toml", "geometry needs a numeric factor")
    if radii is not None and not all(np.isfinite(radius) and radius >= 0 for radius in radii):
        raise refusal("a radius is negative or not finite", "radii", "give coded distances from 0")
    explored = explored_region(study)
    distances = list(radii) if radii is not None else _default_radii(study)
    combinations = list(product(*(range(len(f.levels)) for f in study.categorical)))
    return tuple(
        _shape(study, model, levels, explored, distances, toward or _wanted(study, model))
        for model in models.models
        for levels in combinations
    )


def _default_radii(study: Study) -> list[float]:
    farthest = float(np.sqrt((fitted_settings(study) ** 2).sum(axis=1).max()))
    inner = [_STEP * i for i in range(int(farthest / _STEP + 1e-9) + 1)]
    return inner if farthest - inner[-1] < 1e-6 else [*inner, farthest]


def _wanted(study: Study, model: Model) -> Toward:
    goal = next(r.goal for r in study.responses if r.name == model.response)
    return "less" if goal is not None and goal.want == "less" else "more"


def _shape(
    study: Study,
    model: Model,
    levels: tuple[int, ...],
    explored: Explored,
    radii: list[float],
    toward: Toward,
) -> Shape:
    at = surface(model, study, levels=levels)
    names = [factor.name for factor in study.numeric]
    form = canonical(at, len(names))
    stack = Stack.from_coefficients(at.coefficients, len(names))
    stationary, reason = None, ""
    if form.stationary is None:
        reason = "the fitted curvature vanishes along at least one direction"
    else:
        stationary = Stationary(
            coded=_by_name(names, form.stationary),
            setting=_setting(study, levels, form.stationary),
            mean=float(stack.value(form.stationary)),
            explored=bool(contains(explored, form.stationary)),
        )
    eigenvalues = []
    for i, value in enumerate(form.values):
        half = None if form.half_widths is None else float(form.half_widths[i])
        interval = None if half is None else (float(value) - half, float(value) + half)
        eigenvalues.append(Eigenvalue(float(value), interval, _by_name(names, form.directions[i])))
    ridge = []
    for radius in radii:
        best = extreme_on_sphere(stack, radius, largest=toward == "more")
        terms = features(best.x)
        se = (
            None
            if model.exact or not at.s
            else at.s * float(np.sqrt(terms @ at.covariance @ terms))
        )
        ridge.append(
            RidgePoint(
                radius=radius,
                coded=_by_name(names, best.x),
                setting=_setting(study, levels, best.x),
                mean=best.value,
                se=se,
                explored=bool(contains(explored, best.x)),
            )
        )
    return Shape(
        response=model.response,
        unit=model.unit,
        levels=level_names(study.categorical, levels),
        stationary=stationary,
        reason=reason,
        eigenvalues=tuple(eigenvalues),
        nature=form.nature,
        sentence=form.sentence,
        toward=toward,
        ridge=tuple(ridge),
    )


def _by_name(names: list[str], x: FloatArray) -> dict[str, float]:
    return {name: float(value) for name, value in zip(names, x, strict=True)}


def _setting(study: Study, levels: tuple[int, ...], x: FloatArray) -> Setting:
    actual = to_actual(study.numeric, x)
    numbers = _by_name([factor.name for factor in study.numeric], actual)
    return {**numbers, **level_names(study.categorical, levels)}
