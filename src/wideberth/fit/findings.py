"""What a model's reader should know, in plain sentences with a grade.

``do not use`` is kept for models that predict worse than their own mean, and for lack of fit that
is both significant and as large as the distance between the mean measured value and a guarded
limit. Exact fits are never in doubt.
"""

from __future__ import annotations

import numpy as np
from scipy.special import stdtrit

from wideberth.fit.records import LackOfFit, Model
from wideberth.fit.wording import with_unit
from wideberth.study.records import Finding, FloatArray, Grade, Limit, Response

_SIGNIFICANT = 0.05
_POOR_PRESS = 0.5
_FEW_DF = 5
_HIGH_LEVERAGE = 0.99
_GRADES: tuple[Grade, ...] = ("fine", "look", "do not use")


def worst_grade(findings: tuple[Finding, ...]) -> Grade:
    """Give the worst grade among findings, ``fine`` when there are none."""
    return max((f.grade for f in findings), key=_GRADES.index, default="fine")


def findings_of(model: Model, response: Response, y: FloatArray) -> tuple[Finding, ...]:
    """Judge a measured response's model from its own numbers; y are the fitted values' data."""
    name = model.response
    if np.ptp(y) == 0.0:
        text = f"{name}: all {len(y)} measured values are the same, so no factor shows an effect."
        return (Finding("look", text, name),)
    if model.noise_free:
        text = f"{name}: the model describes the runs exactly; there is no noise to judge it by."
        return (Finding("look", text, name),)
    found = [*_fit_itself(model), *_lack(model, response.limit, y), *_runs(model)]
    found += [Finding(c.grade, c.text, name) for c in model.checks if c.grade != "fine"]
    if not found and model.df_residual > 0:
        found.append(_summary(model))
    return tuple(found)


def _summary(model: Model) -> Finding:
    s = model.s if model.between is None else model.between.s_within
    text = (
        f"{model.response}: the model describes the runs (adjusted R2 {model.r2_adjusted:.2f},"
        f" PRESS R2 {model.r2_press:.2f}, s {with_unit(s or 0.0, model.unit)})."
    )
    return Finding("fine", text, model.response)


def _fit_itself(model: Model) -> list[Finding]:
    name = model.response
    if model.df_error == 0:
        text = (
            f"{name}: as many terms as runs; the noise cannot be estimated, and no guard but"
            " 'none' can be computed."
        )
        return [Finding("look", text, name)]
    found = []
    if model.r2_press is not None and model.r2_press <= 0:
        text = (
            f"{name}: the model predicts left-out runs worse than their mean does (PRESS R2"
            f" {model.r2_press:.2f}); do not rest a setting on it."
        )
        found.append(Finding("do not use", text, name))
    elif model.r2_press is not None and model.r2_press < _POOR_PRESS:
        text = (
            f"{name}: the model predicts left-out runs poorly (PRESS R2 {model.r2_press:.2f},"
            f" adjusted R2 {model.r2_adjusted:.2f})."
        )
        found.append(Finding("look", text, name))
    if model.df_error < _FEW_DF:
        text = (
            f"{name}: only {model.df_error} residual degrees of freedom; s and every guard are"
            " poorly known."
        )
        found.append(Finding("look", text, name))
    return found


def _lack(model: Model, limit: Limit | None, y: FloatArray) -> list[Finding]:
    lack = model.lack_of_fit
    if lack is None:
        return []
    name = model.response
    if lack.p >= _SIGNIFICANT:
        return _could_be_missed(model, lack, limit, float(y.mean()))
    text = (
        f"{name}: the model misses more than repeated runs explain (lack of fit F {lack.f:.3g} on"
        f" {lack.df[0]} and {lack.df[1]}, p {lack.p:.2g}),"
        f" about {with_unit(lack.rms_size, model.unit)}"
    )
    distance = _distance_to_limit(limit, float(y.mean()))
    if distance is not None and lack.rms_size >= distance:
        text += f", as much as the mean lies from its limit ({with_unit(distance, model.unit)})."
        return [Finding("do not use", text, name)]
    return [Finding("look", text + ".", name)]


def _could_be_missed(
    model: Model, lack: LackOfFit, limit: Limit | None, mean: float
) -> list[Finding]:
    """Say where the repeated runs are too few to show a misfit that would matter."""
    distance = _distance_to_limit(limit, mean)
    if distance is None or lack.found_size < distance:
        return []
    text = (
        f"{model.response}: no lack of fit is shown, but repeated runs with {lack.df[1]} degrees of"
        " freedom find one in 4 of 5 studies only from"
        f" {with_unit(lack.found_size, model.unit)} on, more than the mean lies from its limit"
        f" ({with_unit(distance, model.unit)})."
    )
    return [Finding("look", text, model.response)]


def _distance_to_limit(limit: Limit | None, mean: float) -> float | None:
    if limit is None or limit.guard == "none":
        return None
    return min(abs(mean - bound) for bound in (limit.low, limit.high) if bound is not None)


def _runs(model: Model) -> list[Finding]:
    found = []
    name, unit = model.response, model.unit
    critical = float(stdtrit(max(model.df_residual - 1, 1), 1 - 0.025 / max(model.n_runs, 1)))
    for run in model.runs:
        if run.studentized is not None and abs(run.studentized) > critical:
            text = (
                f"{name}: the run in row {run.row} stands out ({run.observed:.4g} measured,"
                f" {with_unit(run.fitted, unit)} fitted); look for its cause before leaving it out."
            )
            found.append(Finding("look", text, name))
        if run.cook is not None and run.cook > 1 and run.leverage < _HIGH_LEVERAGE:
            text = f"{name}: the run in row {run.row} moves the model a lot (Cook {run.cook:.2f})."
            found.append(Finding("look", text, name))
    alone = [str(run.row) for run in model.runs if run.leverage >= _HIGH_LEVERAGE]
    if alone and model.df_residual > 0:
        text = f"{name}: nothing checks the run in row {', '.join(alone)} (leverage 1)."
        found.append(Finding("look", text, name))
    return found
