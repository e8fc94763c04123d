"""Measures the models' promises: coverage of intervals and size of the checks of residuals.

    python studies/method/models.py [--studies N]

Every cell simulates studies with known truth: two factors, a composite design, normal noise of
standard deviation 1, a second-order truth. Counted is how often the 95 % interval of the mean and
that of one future batch hold at a setting fixed beforehand, and how often each check of the
residuals is below 0.05 although nothing is wrong. Results go to models.csv beside this script;
cells that stand there already are not run again.
"""

from __future__ import annotations

import argparse
import csv
import os
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from types import SimpleNamespace
from zlib import crc32

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

import numpy as np

from wideberth.decide.judge import predictions
from wideberth.fit.models import fit
from wideberth.study.records import (
    Context,
    KnownSd,
    NumericFactor,
    RegionChoice,
    Response,
    Runs,
    Study,
)

HERE = Path(__file__).parent
AT = np.array([0.4, -0.6])
CORNERS = np.array([(a, b) for a in (-1.0, 1.0) for b in (-1.0, 1.0)])
CUBE = np.vstack([CORNERS, np.zeros((2, 2))])
STAR = np.vstack([np.sqrt(2) * np.eye(2), -np.sqrt(2) * np.eye(2), np.zeros((2, 2))])
HEADER = ("cell", "what", "studies", "share")


def truth(x: np.ndarray) -> np.ndarray:
    """The true mean at coded settings (..., 2)."""
    return 3 + x @ [1.0, -1.0] + x[..., 0] * x[..., 1] - 0.5 * x[..., 0] ** 2


def study_of(x: np.ndarray, y: np.ndarray, blocks: np.ndarray | None = None) -> Study:
    """One response y, shape (n,), at coded settings x, shape (n, 2), run in a random order."""
    n = len(x)
    names = () if blocks is None else tuple(f"day {i}" for i in range(int(blocks.max()) + 1))
    order = np.random.default_rng(n).permutation(n) + 1
    runs = Runs(
        file="runs.csv",
        rows=tuple(range(2, n + 2)),
        numeric_actual=x,
        levels=np.zeros((n, 0), dtype=np.int64),
        measured=y[:, None],
        blocks=names,
        block=np.zeros(n, dtype=np.int64) if blocks is None else blocks,
        kind=("",) * n,
        order=tuple(int(i) for i in order),
        note=("",) * n,
    )
    return Study(
        directory=Path(),
        title="simulated",
        seed=1,
        context=Context(),
        factors=tuple(NumericFactor(name, "u", -1.0, 1.0) for name in ("a", "b")),
        responses=(Response("y", "v"),),
        constraints=(),
        region=RegionChoice(),
        future_blocks=None if blocks is None else "recur",
        today={},
        runs=runs,
    )


Made = tuple[Study, float, float]
"""A study, the true mean that its interval is of, and one future value of that kind."""


def plain(rng: np.random.Generator) -> Made:
    """Nothing but runs."""
    x = np.vstack([CUBE, STAR])
    study = study_of(x, truth(x) + rng.standard_normal(len(x)))
    return study, float(truth(AT)), float(truth(AT) + rng.standard_normal())


def weighted(rng: np.random.Generator) -> Made:
    """Every third row is the mean of four batches."""
    x = np.vstack([CUBE, STAR])
    weight = np.where(np.arange(len(x)) % 3, 1.0, 4.0)
    study = study_of(x, truth(x) + rng.standard_normal(len(x)) / np.sqrt(weight))
    study = replace(study, runs=replace(study.runs, weight=weight))
    return study, float(truth(AT)), float(truth(AT) + rng.standard_normal())


def pooled(df: int) -> Callable[[np.random.Generator], Made]:
    """A standard deviation known from so many degrees of freedom of history."""

    def make(rng: np.random.Generator) -> Made:
        study, mean, batch = plain(rng)
        known = KnownSd(float(np.sqrt(rng.chisquare(df) / df)), df)
        return replace(study, responses=(replace(study.responses[0], known_sd=known),)), mean, batch

    return make


def assays(counts: tuple[int, ...]) -> Callable[[np.random.Generator], Made]:
    """Means of repeated assays, noise between batches and of one assay equal; two of a new one."""

    def make(rng: np.random.Generator) -> Made:
        x = np.vstack([CUBE, STAR])
        repeats = np.array([counts[i % len(counts)] for i in range(len(x))])
        spread = np.sqrt(0.5 + 0.5 / repeats)
        study = study_of(x, truth(x) + spread * rng.standard_normal(len(x)))
        batch = truth(AT) + np.sqrt(0.75) * rng.standard_normal()
        return study, float(truth(AT)), float(batch)

    return make


def blocks(n_blocks: int, tau: float, kind: str) -> Callable[[np.random.Generator], Made]:
    """Blocks of six runs; ``recur``, ``sample``, or ``stated`` (a sample of known variance)."""

    def make(rng: np.random.Generator) -> Made:
        parts = [(CUBE, STAR)[i % 2] for i in range(n_blocks)]
        x, which = np.vstack(parts), np.repeat(np.arange(n_blocks), 6)
        effects = tau * rng.standard_normal(n_blocks)
        study = study_of(x, truth(x) + effects[which] + rng.standard_normal(len(x)), which)
        if kind == "recur":
            mean = float(truth(AT) + effects.mean())
            return study, mean, float(mean + rng.standard_normal())
        study = replace(study, future_blocks="sample")
        if kind == "stated":
            study = replace(study, responses=(replace(study.responses[0], block_sd=tau),))
        batch = truth(AT) + tau * rng.standard_normal() + rng.standard_normal()
        return study, float(truth(AT)), float(batch)

    return make


CELLS: dict[str, Callable[[np.random.Generator], Made]] = {
    "runs alone": plain,
    "weights": weighted,
    "history on 6 df": pooled(6),
    "history on 30 df": pooled(30),
    "assays, two each": assays((2,)),
    "assays, one to three": assays((1, 2, 3)),
    "4 blocks recur": blocks(4, 1.0, "recur"),
    **{
        f"{n} blocks a sample, ratio {tau:g}": blocks(n, tau, "sample")
        for n in (2, 3, 4, 6)
        for tau in (0.0, 0.5, 1.0, 2.0)
    },
    **{f"{n} blocks, stated sd, ratio 1": blocks(n, 1.0, "stated") for n in (2, 4)},
}


@dataclass
class Count:
    """How often each claim held, over the studies simulated."""

    held: dict[str, int]

    def add(self, what: str, *, held: bool) -> None:
        """Count one claim."""
        self.held[what] = self.held.get(what, 0) + int(held)


def measure(cell: str, n_studies: int) -> list[tuple[str, str, int, float]]:
    """Simulate one cell."""
    rng = np.random.default_rng(crc32(cell.encode()))
    count = Count({})
    for _ in range(n_studies):
        study, mean, batch = CELLS[cell](rng)
        models = fit(study)
        problem = SimpleNamespace(models=models, study=study, goals=())
        one = predictions(problem, (), AT)["y"]  # type: ignore[arg-type]
        for what, ends, value in (
            ("mean interval holds", one.mean_interval, mean),
            ("batch interval holds", one.batch_interval, batch),
        ):
            count.add(what, held=ends is not None and ends[0] <= value <= ends[1])
        lack = models["y"].lack_of_fit
        if lack is not None:
            count.add("lack of fit below 0.05", held=lack.p < 0.05)
        for check in models["y"].checks:
            count.add(f"{check.kind} below 0.05", held=check.p <= 0.05)
    return [(cell, what, n_studies, held / n_studies) for what, held in count.held.items()]


def main() -> None:
    """Run the cells that are not in models.csv yet."""
    options = argparse.ArgumentParser()
    options.add_argument("--studies", type=int, default=4000)
    n_studies = options.parse_args().studies
    target = HERE / "models.csv"
    rows: list[tuple[str, ...]] = []
    if target.exists():
        with target.open(encoding="utf-8", newline="") as file:
            rows = [tuple(row) for row in csv.reader(file)][1:]
    done = {row[0] for row in rows}
    for cell in CELLS:
        if cell in done:
            continue
        rows += [
            (c, what, str(n), f"{share:.4f}") for c, what, n, share in measure(cell, n_studies)
        ]
        with target.open("w", encoding="utf-8", newline="") as file:
            csv.writer(file, lineterminator="\n").writerows([HEADER, *rows])
        print(cell, flush=True)


if __name__ == "__main__":
    main()
