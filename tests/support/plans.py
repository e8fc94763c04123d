"""Studies still to be planned, and their plans, for tests."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from support.build import make_study
from wideberth.plan.designs import build_design
from wideberth.plan.plan import plan_runs
from wideberth.study.records import PlanChoice
from wideberth.study.sheet import no_runs


def draft(k, choice=None, *, keep_runs=False, **stated):
    """A study of k factors without runs; ``allowed`` is wide unless it is stated."""
    stated.setdefault("allowed", {f"f{j}": (-9.0, 9.0) for j in range(k)})
    x = stated.pop("x", np.zeros((1, k)))
    values = stated.pop("values", {"y": np.zeros(len(x))})
    study = make_study(x, values, **stated)
    runs = study.runs if keep_runs else no_runs("runs.csv", study.factors, study.responses)
    return replace(study, runs=runs, plan=choice or PlanChoice())


def design_of(k, **choice):
    """The coded design for k factors."""
    return build_design(draft(k), PlanChoice(**choice))


def plan_of(k, *, stated=None, seed=None, append=False, **choice):
    """The plan for k factors."""
    return plan_runs(draft(k, PlanChoice(**choice), **(stated or {})), seed=seed, append=append)


def moments(x):
    """The second-order model matrix of coded settings."""
    first, second = np.triu_indices(x.shape[1], 1)
    return np.column_stack([np.ones(len(x)), x, x**2, x[:, first] * x[:, second]])
