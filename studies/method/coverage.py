"""Measures what the uncertainty statements cover, in simulated studies with known truths.

    python studies/method/coverage.py [--studies N] [--only NAME ...] [--minutes M]

Every cell is a truth (three quadratic responses, goals, noise), a central composite design and a
kind of error. Studies are simulated in blocks with stated seeds; finished blocks stay in
coverage-blocks.csv, so that the script can be stopped and goes on where it was. coverage.csv and
coverage.md hold the results. All truths are invented for this purpose.
"""

from __future__ import annotations

import argparse
import csv
import os
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np
from scipy.stats import norm

from wideberth.decide.conformance import conformance
from wideberth.decide.problem import Problem, arena, build_problem
from wideberth.decide.search import find_best
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.fit.records import Models
from wideberth.progress import silent
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
from wideberth.uncertainty.assess import LEVELS, edge_test
from wideberth.uncertainty.cloud import cloud_of, on_edge
from wideberth.uncertainty.location import evenly_spread, in_region, optimum_region
from wideberth.uncertainty.records import Joined

HERE = Path(__file__).parent
NAMES = ("first", "second", "third")
BLOCK = 50
DRAWS = 400
N_INSIDE = 256
SIGMAS_TO_LIMIT = 1.6
FIELDS = ("cell", "block", "studies", *(f"hit_{level:g}" for level in LEVELS), "edge", "share",
          "stated", "true", "kept", "seconds")  # fmt: skip

Truth = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True)
class Cell:
    """One truth with its design and errors; ``errors`` is ``normal`` or ``t5``."""

    name: str
    k: int
    scene: str
    noise: float
    errors: str = "normal"
    n_centre: int = 5


CELLS = tuple(
    Cell(f"{scene} k={k} {'low' if noise < 2 else 'high'}{'' if errors == 'normal' else ' t5'}",
         k, scene, noise, errors)
    for k in (2, 3, 4)
    for scene in ("interior", "off-centre .5", "off-centre .7", "off-centre .85", "edge", "ridge",
                  "kink")
    for noise, errors in ((1.0, "normal"), (5.0, "normal"), (5.0, "t5"))
)  # fmt: skip


def design(k: int, n_centre: int) -> np.ndarray:
    """A rotatable central composite design."""
    corners = np.array(np.meshgrid(*[[-1.0, 1.0]] * k)).reshape(k, -1).T
    reach = len(corners) ** 0.25
    axial = np.concatenate([reach * np.eye(k), -reach * np.eye(k)])
    return np.concatenate([corners, axial, np.zeros((n_centre, k))])


def away(x: np.ndarray, centre: np.ndarray) -> np.ndarray:
    """Squared distance from a centre."""
    return ((x - centre) ** 2).sum(axis=-1)


def more(poor: float, ideal: float) -> Goal:
    """A goal that wants more or, with poor above ideal, less."""
    want = "more" if ideal > poor else "less"
    return Goal(want, (float(poor),), (float(ideal),), (1.0, 1.0), 1.0)


def scene(cell: Cell) -> tuple[float, tuple[Truth, Truth, Truth], tuple[Goal, Goal, Goal]]:
    """Give the radius of the region, three truths and their goals."""
    k, radius = cell.k, (2.0**cell.k) ** 0.25
    one = np.ones(k) / np.sqrt(k)
    other = np.array([(-1.0) ** i for i in range(k)]) / np.sqrt(k)
    if k % 2:
        other = other - one * (other @ one)
        other /= np.linalg.norm(other)

    def third(x: np.ndarray) -> np.ndarray:
        return 40 + 3 * x[..., 0] - 2 * x[..., 1] + 1.5 * x[..., 0] * x[..., 1]

    goals = (more(60, 95), more(60, 20), more(20, 60))
    if cell.scene == "interior":
        a, b = 0.35 * radius * one, -0.35 * radius * other
        return radius, (lambda x: 90 - 6 * away(x, a), lambda x: 30 + 5 * away(x, b), third), goals
    if cell.scene.startswith("off-centre"):
        far = float(cell.scene.split()[1]) * radius * one
        truths = (
            lambda x: 90 - 6 * away(x, far),
            lambda x: 30 + 5 * away(x, far),
            lambda x: 45 - 2 * away(x, far),
        )
        return radius, truths, goals
    if cell.scene == "kink":
        a = 0.3 * radius * one
        truths = (lambda x: 60 + 8 * (x @ one), lambda x: 30 + 5 * away(x, a), third)
        near = Goal("near", (45.0, 79.0), (62.0, 62.0), (1.0, 1.0), 1.0)
        return radius, truths, (near, goals[1], goals[2])
    if cell.scene == "ridge":
        a = 0.2 * radius * other
        truths = (
            lambda x: 90 - 6 * ((x - a) @ one) ** 2 - 0.6 * away(x, a),
            lambda x: 30 + 5 * ((x - a) @ one) ** 2 + 0.4 * away(x, a),
            lambda x: 45 - 0.8 * away(x, a),
        )
        return radius, truths, goals
    first = 1.6 * radius * (one + 0.5 * other) / np.sqrt(1.25)
    second = 0.9 * radius * other
    truths = (lambda x: 90 - 2.5 * away(x, first), lambda x: 30 + 2 * away(x, second), third)
    if k == 2:
        return radius, truths, (more(20, 100), more(90, 15), more(20, 60))
    return radius, truths, (more(0, 100), more(110, 15), more(20, 60))


def models_of(cell: Cell, x: np.ndarray, y: np.ndarray, limits: tuple[Limit | None, ...]) -> Models:
    """Fit one simulated study."""
    radius, _, goals = scene(cell)
    n = len(x)
    runs = Runs(
        file="runs.csv",
        rows=tuple(range(2, n + 2)),
        numeric_actual=x,
        levels=np.zeros((n, 0), dtype=np.int64),
        measured=y,
        blocks=(),
        block=np.zeros(n, dtype=np.int64),
        kind=("",) * n,
        order=None,
        note=("",) * n,
    )
    study = Study(
        directory=Path(),
        title="coverage",
        seed=1,
        context=Context(),
        factors=tuple(NumericFactor(f"f{j}", "u", -1.0, 1.0) for j in range(cell.k)),
        responses=tuple(
            Response(name, "v", goal=goal, limit=limit)
            for name, goal, limit in zip(NAMES, goals, limits, strict=True)
        ),
        constraints=(),
        region=RegionChoice("radius", radius),
        future_blocks=None,
        today={},
        runs=runs,
    )
    return fit(study)


def noise_of(cell: Cell, random: np.random.Generator, n: int) -> np.ndarray:
    """Correlated errors of n runs with the cell's standard deviation."""
    sign = np.array([1.0, -1.0, 1.0])
    mix = np.linalg.cholesky((0.5 + 0.5 * np.eye(3)) * np.outer(sign, sign))
    z = random.standard_normal((n, 3))
    if cell.errors == "t5":
        z *= np.sqrt(3.0 / random.chisquare(5, n))[:, None]
    return cell.noise * z @ mix.T


def simulate(cell: Cell, block: int, studies: int) -> dict[str, object]:
    """Simulate one block of studies and count what held."""
    started = time.perf_counter()
    _, truths, goals = scene(cell)
    x = design(cell.k, cell.n_centre)
    means = np.stack([truth(x) for truth in truths], axis=1)
    random = np.random.default_rng([20, block, sum(map(ord, cell.name))])
    nothing = (None, None, None)
    hair = 1e-5 * random.standard_normal(means.shape)
    best = best_of(build_problem(models_of(cell, x, means + hair, nothing), seed=1, room=False))
    there = [float(truth(best)) for truth in truths]
    limits = tuple(
        Limit(m - SIGMAS_TO_LIMIT * cell.noise, None, "none")
        if goal.want == "more"
        else Limit(None, m + SIGMAS_TO_LIMIT * cell.noise, "none")
        for m, goal in zip(there, goals, strict=True)
    )
    total = dict.fromkeys(FIELDS[3:], 0.0)
    for study in range(studies):
        y = means + noise_of(cell, random, len(x))
        models = models_of(cell, x, y, nothing)
        problem = build_problem(models, seed=1, room=False)
        draws = draw_coefficients(models, DRAWS, 1000 * block + study)
        cloud = cloud_of(problem, draws, "means", problem.region.middle[None, :], silent)
        test = edge_test(problem, draws, (), "means", cloud.x)
        spread, weight = evenly_spread(problem.region)
        spread, weight = spread[:N_INSIDE], weight[:N_INSIDE]
        for level in LEVELS:
            region = optimum_region(problem, cloud.x, level)
            if test is not None:
                region = replace(region, joined=Joined(test, test.critical(level)))
            total[f"hit_{level:g}"] += bool(in_region(problem, region, best))
        total["share"] += float(weight[in_region(problem, region, spread)].sum() / weight.sum())
        total["edge"] += float(on_edge(problem.region, cloud.x).mean())
        setting = best_of(problem)
        stated = models_of(cell, x, y, limits)
        judged = build_problem(stated, seed=1, room=False)
        held = conformance(judged, draws, (), setting, np.zeros(cell.k), study)
        real = truly_inside(cell, truths, limits, setting)
        total["stated"] += held.mean
        total["true"] += real
        total["kept"] += held.lower <= real
    total["seconds"] = time.perf_counter() - started
    return {"cell": cell.name, "block": block, "studies": studies, **total}


def best_of(problem: Problem) -> np.ndarray:
    """The optimum of the fitted equations."""
    return find_best(arena(problem, (), "means")).x


def truly_inside(
    cell: Cell, truths: tuple[Truth, ...], limits: tuple[Limit, ...], setting: np.ndarray
) -> float:
    """The true share of batches inside all limits at a setting, by 20,000 errors."""
    errors = noise_of(cell, np.random.default_rng(7), 20_000)
    y = np.array([float(truth(setting)) for truth in truths]) + errors
    held = np.ones(len(y), dtype=bool)
    for j, limit in enumerate(limits):
        held &= y[:, j] >= limit.low if limit.low is not None else y[:, j] <= limit.high
    return float(held.mean())


def summary(rows: list[dict[str, str]]) -> list[dict[str, object]]:
    """Add up the blocks of every cell."""
    result = []
    for cell in CELLS:
        own = [row for row in rows if row["cell"] == cell.name]
        n = sum(int(row["studies"]) for row in own)
        if n:
            part = {f: sum(float(row[f]) for row in own) / n for f in FIELDS[3:]}
            result.append({"cell": cell.name, "studies": n, **part})
    return result


def written(cells: list[dict[str, object]]) -> str:
    """The results as a table to read."""
    lines = [
        "# What the uncertainty statements cover",
        "",
        "Simulated studies (invented truths); made by `coverage.py` beside this page. Coverage of",
        "the true optimum in % at nominal 50, 90 and 95 %, the standard error of the last, the",
        "share of the draws' optima on the edge, the share of the volume in the 95 % region, the",
        "mean stated and true conformance at the fitted optimum, and how often its lower 95 %",
        "bound was kept. `missed` marks a cell more than two standard errors below 92.5 %",
        "(91 % for t5 errors), or a bound below 92 % (91 %).",
        "",
        "| cell | studies | 50 % | 90 % | 95 % | s.e. | on edge | share | stated | true | kept | |",
        "| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |",
    ]
    for cell in cells:
        n, hit, kept = cell["studies"], cell["hit_0.95"], cell["kept"]
        error = np.sqrt(hit * (1 - hit) / n)
        error_kept = np.sqrt(kept * (1 - kept) / n)
        heavy = cell["cell"].endswith("t5")
        low = hit < (0.91 if heavy else 0.925) - norm.ppf(0.977) * error
        low |= kept < (0.91 if heavy else 0.92) - norm.ppf(0.977) * error_kept
        lines.append(
            f"| {cell['cell']} | {n} | {100 * cell['hit_0.5']:.1f} | {100 * cell['hit_0.9']:.1f} |"
            f" {100 * hit:.1f} | {100 * error:.1f} | {cell['edge']:.2f} | {cell['share']:.3f} |"
            f" {cell['stated']:.3f} | {cell['true']:.3f} | {100 * kept:.1f} |"
            f" {'missed' if low else ''} |"
        )
    return "\n".join(lines) + "\n"


def main() -> None:
    """Go on with the blocks that are missing, then write the results."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--studies", type=int, default=1000)
    parser.add_argument("--only", nargs="*", default=[])
    parser.add_argument("--minutes", type=float, default=9.0)
    asked = parser.parse_args()
    blocks = HERE / "coverage-blocks.csv"
    rows: list[dict[str, str]] = []
    if blocks.exists():
        with blocks.open(newline="") as file:
            rows = list(csv.DictReader(file))
    done = {(row["cell"], int(row["block"])) for row in rows}
    stop = time.perf_counter() + 60 * asked.minutes
    for block in range(-(-asked.studies // BLOCK)):
        for cell in CELLS:
            wanted = not asked.only or any(part in cell.name for part in asked.only)
            if not wanted or (cell.name, block) in done or time.perf_counter() > stop:
                continue
            row = {key: str(value) for key, value in simulate(cell, block, BLOCK).items()}
            rows.append(row)
            with blocks.open("w", newline="") as file:
                writer = csv.DictWriter(file, FIELDS)
                writer.writeheader()
                writer.writerows(rows)
    cells = summary(rows)
    with (HERE / "coverage.csv").open("w", newline="") as file:
        names = [name for name in FIELDS if name not in ("block", "seconds")]
        writer = csv.DictWriter(file, names, extrasaction="ignore")
        writer.writeheader()
        writer.writerows(cells)
    (HERE / "coverage.md").write_text(written(cells))


if __name__ == "__main__":
    main()
