"""Measures optimal plans: what efficiency is proven, what more starts would gain, and the time.

    python studies/method/plans.py

For 1 to 8 factors on a cube, second-order models and runs hardly more or twice as many as terms,
the plan that `plan` gives is held against the best of five times as many starts. Results go to
plans.csv and plans.md beside this script.
"""

from __future__ import annotations

import csv
import os
import time
from pathlib import Path

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np

from wideberth.plan.certificate import proven_efficiency
from wideberth.plan.exchange import best_rows
from wideberth.plan.optimal import optimal_task
from wideberth.study.records import (
    Context,
    NumericFactor,
    PlanChoice,
    RegionChoice,
    Response,
    Study,
)
from wideberth.study.sheet import no_runs

HERE = Path(__file__).parent
MORE_STARTS = 5
NOTE = (
    "Invented cubes. One start of the exchange is a random plan; `of best known` is the efficiency"
    f" against the best of {MORE_STARTS} times as many other starts. The bound counts runs as"
    " divisible: where there are hardly more runs than terms it is far below what is reached. Three"
    " runs stand at the centre."
)


def study_of(k: int) -> Study:
    """A study of k factors between -1 and 1, nothing run."""
    factors = tuple(NumericFactor(f"f{j}", "u", -1.0, 1.0) for j in range(k))
    responses = (Response("y", "v"),)
    return Study(
        directory=Path(),
        title="cube",
        seed=1,
        context=Context(),
        factors=factors,
        responses=responses,
        constraints=(),
        region=RegionChoice(),
        future_blocks=None,
        today={},
        runs=no_runs("runs.csv", factors, responses),
    )


def measure(k: int, criterion: str, spare: float) -> dict[str, object]:
    """Plan once as `plan` does, bound it, and search on with more starts."""
    study = study_of(k)
    n_terms = (k + 1) * (k + 2) // 2
    runs = round(n_terms * spare) + 5
    choice = PlanChoice(design="optimal", runs=runs, criterion=criterion)
    begun = time.perf_counter()
    task, n_starts = optimal_task(study, choice, None, ("1",))[:2]
    _, score = best_rows(task, criterion, seed=1, n_starts=n_starts)
    searched = time.perf_counter()
    efficiency = proven_efficiency(task, criterion, score)
    bounded = time.perf_counter()
    _, best = best_rows(task, criterion, seed=2, n_starts=MORE_STARTS * n_starts)
    gain = np.exp((score - best) / n_terms) if criterion == "D" else score / best
    return {
        "k": k,
        "criterion": criterion,
        "terms": n_terms,
        "runs": runs,
        "candidates": len(task.rows),
        "starts": n_starts,
        "proven_efficiency": round(efficiency, 4),
        "of_best_known": round(min(1.0, 1 / gain), 4),
        "search_s": round(searched - begun, 3),
        "bound_s": round(bounded - searched, 3),
    }


def main() -> None:
    """Measure all cells and write both files."""
    rows = [
        measure(k, criterion, spare)
        for k in range(1, 9)
        for criterion in ("D", "I")
        for spare in (1.0, 2.0)
    ]
    with (HERE / "plans.csv").open("w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    lines = [
        "# Optimal plans, measured",
        "",
        NOTE,
        "",
        "| " + " | ".join(name.replace("_", " ") for name in rows[0]) + " |",
        "| " + " | ".join("---" for _ in rows[0]) + " |",
        *("| " + " | ".join(str(value) for value in row.values()) + " |" for row in rows),
    ]
    (HERE / "plans.md").write_text("\n".join(lines) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
