"""Measures the proof of the optimum: time, boxes and gap, against general-purpose searches.

    python studies/method/proof.py [--cases N] [--seconds S]

For k = 2 to 8 factors, with and without a guarded limit and a room, random problems are answered
by the search with its proof, by differential evolution, and by SLSQP from 10 random starts, one
process, one after the other. Times are given as ratios within one run. Results go to proof.csv and
proof.md beside this script; all problems are drawn from stated seeds.
"""

from __future__ import annotations

import argparse
import csv
import os
import time
from pathlib import Path

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from scipy.optimize import differential_evolution, minimize

from wideberth.decide.arena import (
    Arena,
    goal_targets,
    goal_values,
    hard_values,
    log_desirability,
    no_cuts,
)
from wideberth.decide.certificate import bound_desirability
from wideberth.decide.problem import arena, build_problem
from wideberth.decide.search import find_best, local_optima
from wideberth.fit.models import fit
from wideberth.study.records import (
    Context,
    Goal,
    Limit,
    NumericFactor,
    RegionChoice,
    Response,
    Runs,
    Study,
)

HERE = Path(__file__).parent
MISSED = 1e-4


def design(k: int) -> np.ndarray:
    """A central composite design, from six factors on with a quarter of the corners."""
    corners = np.array(np.meshgrid(*[[-1.0, 1.0]] * min(k, 5))).reshape(min(k, 5), -1).T
    if k > 5:
        base = np.array(np.meshgrid(*[[-1.0, 1.0]] * (k - 1))).reshape(k - 1, -1).T
        corners = np.column_stack([base, base[:, : k - 2].prod(axis=1)])
    reach = len(corners) ** 0.25
    axial = np.concatenate([reach * np.eye(k), -reach * np.eye(k)])
    return np.concatenate([corners, axial, np.zeros((5, k))])


def study_of(seed: int, k: int, *, guarded: bool, room: bool) -> Study:
    """Draw a random study of three responses with mixed goals."""
    rng = np.random.default_rng([seed, k])
    x = design(k)
    responses, measured = [], []
    for i in range(3):
        slope, bend = 3 * rng.standard_normal(k), rng.standard_normal((k, k))
        y = 50 + x @ slope + np.einsum("ni,ij,nj->n", x, bend, x)
        y = y + 0.6 * rng.standard_normal(len(x))
        low, high = np.quantile(y, [0.1, 0.95])
        want = ("more", "less", "near")[int(rng.integers(3))]
        goal = Goal("near", (low, high), ((low + high) / 2,) * 2)
        if want != "near":
            ends = (low, high) if want == "more" else (high, low)
            goal = Goal(want, (ends[0],), (ends[1],), priority=float(rng.integers(1, 4)))
        limit = Limit(None, float(np.quantile(y, 0.8)), "batch") if guarded and i == 2 else None
        responses.append(Response(f"y{i}", "u", goal, limit))
        measured.append(y)
    factors = tuple(
        NumericFactor(f"f{j}", "u", -1.0, 1.0, tolerance=0.05 if room else None) for j in range(k)
    )
    n = len(x)
    runs = Runs(
        file="runs.csv",
        rows=tuple(range(2, n + 2)),
        numeric_actual=x,
        levels=np.zeros((n, 0), dtype=np.int64),
        measured=np.array(measured).T,
        blocks=(),
        block=np.zeros(n, dtype=np.int64),
        kind=("",) * n,
        order=None,
        note=("",) * n,
    )
    return Study(
        directory=Path(),
        title="method",
        seed=1,
        context=Context(),
        factors=factors,
        responses=tuple(responses),
        constraints=(),
        region=RegionChoice(),
        future_blocks=None,
        today={},
        runs=runs,
    )


def penalised(rows: Arena, x: np.ndarray) -> np.ndarray:
    """-log D with a steep penalty, for the general-purpose searches."""
    targets = goal_targets(rows, goal_values(rows, x))
    log_d = log_desirability(rows, np.maximum(targets, 1e-6))
    short = np.minimum(hard_values(rows, no_cuts(rows), x), 0.0).sum(axis=0)
    out = np.minimum(rows.region.bounds - x @ rows.region.planes.T, 0.0).sum(axis=1)
    return -(log_d + 50 * (short + out))


def one(seed: int, k: int, *, guarded: bool, room: bool) -> dict[str, object] | None:
    """Answer one problem in all ways; ``None`` where it has no answer."""
    models = fit(study_of(seed, k, guarded=guarded, room=room))
    problem = build_problem(models, seed=1, room=room)
    rows = arena(problem, (), "simultaneous")
    start = time.perf_counter()
    best = find_best(rows)
    searched = time.perf_counter() - start
    if best is None or not np.isfinite(best.score):
        return None
    reached = float(np.exp(best.score))
    start = time.perf_counter()
    proof = bound_desirability(rows, best.cuts, local_optima(rows, best), reached)
    proven = time.perf_counter() - start
    row: dict[str, object] = {
        "k": k,
        "guarded": guarded,
        "room": room,
        "seed": seed,
        "d": round(reached, 6),
        "gap": f"{proof.bound - reached:.1e}",
        "closed": proof.closed,
        "boxes": proof.boxes,
        "search_s": round(searched, 4),
        "proof_s": round(proven, 4),
    }
    if room:
        # the general-purpose searches know no room
        return row
    box = list(zip(-rows.region.bounds[:k], rows.region.bounds[k : 2 * k], strict=True))
    start = time.perf_counter()
    evolved = differential_evolution(
        lambda x: float(penalised(rows, x[None, :])[0]), box, seed=seed, tol=1e-8, polish=True
    )
    row["de_s"] = round(time.perf_counter() - start, 4)
    row["de_missed"] = bool(-evolved.fun < best.score - MISSED)
    rng = np.random.default_rng(seed)
    start = time.perf_counter()
    values = []
    for _ in range(10):
        x0 = rng.uniform(*np.array(box).T)
        found = minimize(
            lambda x: float(penalised(rows, x[None, :])[0]), x0, method="SLSQP", bounds=box
        )
        values.append(found.fun)
    row["slsqp_s"] = round(time.perf_counter() - start, 4)
    row["slsqp_missed"] = bool(-min(values) < best.score - MISSED)
    return row


def summary(rows: list[dict[str, object]]) -> str:
    """Write the medians a cell as a table."""
    lines = [
        "# Proof of the optimum, measured\n",
        (
            "Medians over random problems; ratios are times of the other search by search and proof"
            " together, in the same run. Invented problems, seeds in proof.csv.\n"
        ),
        (
            "| k | limit | room | cases | closed | boxes | search s | proof s | DE ratio"
            " | DE missed | SLSQP x10 ratio | SLSQP missed |"
        ),
        "| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |",
    ]
    cells = sorted({(r["k"], r["guarded"], r["room"]) for r in rows})
    for k, guarded, room in cells:
        own = [r for r in rows if (r["k"], r["guarded"], r["room"]) == (k, guarded, room)]

        def middle(key: str, own: list[dict[str, object]] = own) -> float:
            return float(np.median([float(r[key]) for r in own]))  # type: ignore[arg-type]

        cost = [float(r["search_s"]) + float(r["proof_s"]) for r in own]  # type: ignore[arg-type]
        others = []
        for name in ("de", "slsqp"):
            if f"{name}_s" not in own[0]:
                others += ["", ""]
                continue
            ratio = np.median(
                [float(r[f"{name}_s"]) / c for r, c in zip(own, cost, strict=True)]  # type: ignore[arg-type]
            )
            others += [f"{ratio:.1f}", f"{sum(bool(r[f'{name}_missed']) for r in own)}"]
        closed = sum(bool(r["closed"]) for r in own)
        lines.append(
            f"| {k} | {'batch' if guarded else ''} | {'yes' if room else ''} | {len(own)} |"
            f" {closed} | {middle('boxes'):.0f} | {middle('search_s'):.3f} |"
            f" {middle('proof_s'):.3f} | {others[0]} | {others[1]} | {others[2]} | {others[3]} |"
        )
    return "\n".join(lines) + "\n"


def main() -> None:
    """Run all cells, or as many as the time allows, and write both files."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--cases", type=int, default=10, help="problems a cell")
    parser.add_argument("--seconds", type=float, default=540.0, help="stop starting new problems")
    given = parser.parse_args()
    rows: list[dict[str, object]] = []
    started = time.monotonic()
    for seed in range(given.cases):
        for k in range(2, 9):
            for guarded, room in ((False, False), (True, False), (True, True)):
                if time.monotonic() - started > given.seconds:
                    break
                row = one(seed, k, guarded=guarded, room=room)
                if row is not None:
                    rows.append(row)
    fields = list(dict.fromkeys(key for row in rows for key in row))
    with (HERE / "proof.csv").open("w", encoding="utf-8", newline="") as target:
        writer = csv.DictWriter(target, fields, lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    (HERE / "proof.md").write_text(summary(rows), encoding="utf-8")


if __name__ == "__main__":
    main()
