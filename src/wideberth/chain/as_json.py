"""Records as plain JSON: full precision, never NaN, missing values as null with a reason."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import asdict, fields, is_dataclass
from decimal import Decimal
from typing import Any

import numpy as np

from wideberth import __version__
from wideberth.chain.record import Record
from wideberth.decide.alternatives import Alternative
from wideberth.decide.every_run import EveryRun
from wideberth.decide.frontier import Frontier
from wideberth.decide.give_ups import GiveUp
from wideberth.decide.prospects import Prospects
from wideberth.decide.records import Choice
from wideberth.errors import Fault
from wideberth.fit.equations import own_units
from wideberth.fit.records import Model, Models
from wideberth.operate.records import Robustness, Window
from wideberth.plan.plan import offence_faults
from wideberth.plan.records import Plan, Stage
from wideberth.study.records import Finding, Study
from wideberth.surface.records import Shape
from wideberth.uncertainty.records import Uncertainty

Json = dict[str, Any]
FORMULAS = ("formula", "derived")
NOT_TOLD = (*FORMULAS, "joined")


def dumps(content: Json) -> str:
    """Write JSON text; a number that JSON cannot hold is a fault of ours and raises."""
    return json.dumps(content, ensure_ascii=False, allow_nan=False, indent=1) + "\n"


def dumps_record(content: Json) -> str:
    """Write a record, one line a part, so that its maps do not fill the file with line ends."""
    lines = [
        f"{json.dumps(key)}: {json.dumps(part, ensure_ascii=False, allow_nan=False)}"
        for key, part in content.items()
    ]
    return "{\n" + ",\n".join(lines) + "\n}\n"


def refused_json(faults: Iterable[Fault]) -> Json:
    """Give what is printed when the input is refused."""
    return {"status": "refused", "errors": [asdict(fault) for fault in faults]}


def check_json(study: Study, findings: tuple[Finding, ...]) -> Json:
    """Give the answer of ``check``."""
    return {
        **_head("check", study),
        "status": "doubtful" if findings else "sound",
        "runs": len(study.runs.rows),
        "findings": [asdict(finding) for finding in findings],
    }


def fit_json(models: Models) -> Json:
    """Give the answer of ``fit``."""
    return {
        **_head("fit", models.study),
        "responses": {
            model.response: {**_model(model), **_equations(models.study, model)}
            for model in models.models
        },
    }


def shape_json(shapes: tuple[Shape, ...], study: Study) -> Json:
    """Give the answer of ``shape``; levels of categorical factors make a list a response."""
    responses: Json = {}
    for one in shapes:
        content = _plain(one)
        name = content.pop("response")
        if study.categorical:
            responses.setdefault(name, []).append(content)
        else:
            del content["levels"]
            responses[name] = content
    return {**_head("shape", study), "responses": responses}


def recommend_json(choice: Choice, study: Study, whole: EveryRun | None = None) -> Json:
    """Give the answer of ``recommend``, beside it the answer with nothing left out."""
    content = _plain(choice)
    head = {**_head("recommend", study), "seed": choice.seed}
    answer = {**head, **{key: value for key, value in content.items() if key != "seed"}}
    return {**answer, "with_every_run": _plain(whole)}


def give_ups_json(costs: tuple[GiveUp, ...]) -> list[Any]:
    """Give what each limit and goal bound costs."""
    return [
        {key: value for key, value in _plain(one).items() if key not in ("scales", "units")}
        for one in costs
    ]


def alternatives_json(found: tuple[Alternative, ...]) -> list[Any]:
    """Give what other aims would name."""
    return [_plain(one) for one in found]


def prospects_json(found: Prospects) -> Json:
    """Give what more evidence would buy."""
    content: Json = _plain(found)
    return content


def frontier_json(answer: Frontier, study: Study) -> Json:
    """Give the answer of ``frontier``."""
    return {**_head("frontier", study), **_plain(answer)}


def uncertainty_json(sure: Uncertainty, study: Study) -> Json:
    """Give the answer of ``uncertainty``."""
    return {**_head("uncertainty", study), **_plain(sure)}


def window_json(box: Window, study: Study) -> Json:
    """Give the answer of ``window``."""
    return {**_head("window", study), **_plain(box)}


def robustness_json(answer: Robustness, study: Study) -> Json:
    """Give the answer of ``robustness``."""
    return {**_head("robustness", study), **_plain(answer)}


def record_json(record: Record) -> Json:
    """Give the whole record."""
    study = record.study
    return {
        "command": "memo",
        "version": record.version,
        "packages": dict(record.packages),
        "seed": record.seed,
        "draws": record.n_draws,
        "sha256": dict(study.sha256),
        "study": study_json(study),
        "doubts": [asdict(finding) for finding in record.doubts],
        "fit": {
            model.response: {**_model(model), **_covariance(model)}
            for model in record.models.models
        },
        "shape": shape_json(record.shapes, study)["responses"],
        "recommend": recommend_json(record.choice, study, record.every_run),
        "uncertainty": uncertainty_json(record.uncertainty, study),
        "window": window_json(record.window, study),
        "robustness": robustness_json(record.robustness, study),
        "outward": _plain(record.outward),
        "give_ups": give_ups_json(record.give_ups),
        "priorities": None if record.priorities is None else _plain(record.priorities),
        "frontier": None if record.frontier is None else _plain(record.frontier),
        "alternatives": alternatives_json(record.alternatives),
        "prospects": prospects_json(record.prospects),
        "maps": _plain(record.maps),
    }


def plan_json(plan: Plan) -> Json:
    """Give the answer of ``plan``: a refused one with its errors, one for each offending run."""
    content: Json = {**_head("plan", plan.study), "status": plan.status, "seed": plan.seed}
    if plan.offending:
        content["errors"] = [asdict(fault) for fault in offence_faults(plan)]
    choice = {key: value for key, value in _plain(plan.choice).items() if value is not None}
    design = plan.design
    return {
        **content,
        "plan": choice,
        "axial_distance": design.axial_distance,
        "runs": _plain(plan.runs),
        "quality": _plain(plan.quality),
        "rounding": _plain(plan.rounding),
        "certificate": _plain(plan.certificate),
        "ways_out": _plain(plan.ways_out),
        "findings": [asdict(finding) for finding in plan.findings],
    }


def stage_json(stage: Stage, study: Study) -> Json:
    """Give the answer of ``next`` after a two-level stage."""
    return {**_head("next", study), "status": stage.decision.do, **_plain(stage)}


def _head(command: str, study: Study) -> Json:
    return {
        "command": command,
        "version": __version__,
        "study_sha256": study.sha256.get("study"),
    }


def _model(model: Model) -> Json:
    return {
        "unit": model.unit,
        "exact": model.exact,
        "order": model.order,
        "n": model.n_runs,
        "df_residual": model.df_residual,
        "df_error": model.df_error,
        "coefficients": [_plain(term) for term in model.table],
        "s": model.s,
        "r2": model.r2,
        "r2_adjusted": model.r2_adjusted,
        "press": model.press,
        "r2_press": model.r2_press,
        "lack_of_fit": _plain(model.lack_of_fit),
        "noise_free": model.noise_free,
        "anova": [_plain(part) for part in model.anova],
        "checks": [_plain(check) for check in model.checks],
        "runs": [_plain(run) for run in model.runs],
        "findings": [asdict(finding) for finding in model.findings],
        "grade": model.grade,
        "reasons": dict(model.reasons),
        "left_out": [_plain(run) for run in model.left_out],
        "between_blocks": _plain(model.between),
        "pooled": _plain(model.pooled),
    }


def _equations(study: Study, model: Model) -> Json:
    return {"own_units": [_plain(equation) for equation in own_units(study, model)]}


def _covariance(model: Model) -> Json:
    return {"unscaled_covariance": _plain(model.covariance)}


def study_json(study: Study) -> Json:
    """Give the study as it was read, enough to compute everything again."""
    content = {
        field.name: _plain(getattr(study, field.name))
        for field in fields(study)
        if field.name not in ("directory", "sha256")
    }
    for stated, response in zip(content["responses"], study.responses, strict=True):
        for key in FORMULAS:
            formula = getattr(response, key)
            if formula is not None:
                stated[key] = {
                    "*".join(names) or "constant": number for names, number in formula.terms.items()
                }
    return content


def _plain(value: Any) -> Any:
    """Turn records, arrays and paths into what JSON knows; not-a-number becomes null."""
    if is_dataclass(value) and not isinstance(value, type):
        return {
            field.name: _plain(getattr(value, field.name))
            for field in fields(value)
            if field.name not in NOT_TOLD
        }
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray | list | tuple):
        return [
            _plain(item) for item in (value.tolist() if isinstance(value, np.ndarray) else value)
        ]
    if isinstance(value, float | Decimal):
        return float(value) if np.isfinite(float(value)) else None
    if isinstance(value, bool | int | str) or value is None:
        return value
    message = f"{type(value).__name__} has no place in JSON"
    raise TypeError(message)
