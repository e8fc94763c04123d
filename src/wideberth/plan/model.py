"""The model that planned runs will be fitted with, known before anything was measured."""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import product

import numpy as np

from wideberth.fit.columns import degree, model_matrix, model_terms
from wideberth.fit.lack_of_fit import replicate_groups
from wideberth.fit.least_squares import aliased_with, independent_columns
from wideberth.fit.records import Term, terms_map
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray, IntArray, Runs, Study

PLANNED = "planned"


@dataclass(frozen=True, slots=True, eq=False)
class PlannedModel:
    """The terms that the runs can tell apart, and what follows from the settings alone.

    Attributes
    ----------
    study : Study
        With all runs that will be fitted.
    terms : tuple of Term, length q
    matrix : ndarray, shape (n, q)
    covariance : ndarray, shape (q, q)
        (X'X)^-1.
    leverage : ndarray, shape (n,)
    aliases : tuple of str
        Sets of terms that cannot be told apart; those of the highest degree are left out.
    df_lack, df_pure : int
    """

    study: Study
    terms: tuple[Term, ...]
    matrix: FloatArray
    covariance: FloatArray
    leverage: FloatArray
    aliases: tuple[str, ...]
    df_lack: int
    df_pure: int

    def rows(self, x: FloatArray, levels: tuple[int, ...]) -> FloatArray:
        """Give model rows at coded settings, shape (..., k), block average: shape (..., q)."""
        rows: FloatArray = features(x) @ terms_map(self.terms, self.study, levels=levels)
        return rows

    def variance(self, x: FloatArray, levels: tuple[int, ...]) -> FloatArray:
        """Give the prediction variance in units of the error variance; shape (...)."""
        rows = self.rows(x, levels)
        return np.asarray(np.einsum("...q,qr,...r->...", rows, self.covariance, rows))


def with_runs(
    study: Study,
    actual: FloatArray,
    levels: IntArray,
    block: tuple[str, ...],
    kind: tuple[str, ...],
) -> Study:
    """Add planned runs to those of the study that will be fitted; results stand at nil.

    Parameters
    ----------
    actual : ndarray, shape (n, k)
        Own units.
    block : tuple of str
        Name of each planned run's block, ``""`` without blocks.
    """
    old = study.runs
    kept = np.flatnonzero(old.fitted)
    blocks_before = [old.blocks[b] for b in old.block[kept]] if old.blocks else [""] * len(kept)
    named = [*blocks_before, *block]
    different = tuple(dict.fromkeys(name for name in named if name))
    n = len(named)
    runs = Runs(
        file=old.file or PLANNED,
        rows=tuple(range(2, n + 2)),
        numeric_actual=np.concatenate([old.numeric_actual[kept], actual]),
        levels=np.concatenate([old.levels[kept], levels]),
        measured=np.zeros((n, len(study.measured))),
        blocks=different if len(different) > 1 else (),
        block=np.array([different.index(b) if b else 0 for b in named], dtype=np.int64),
        kind=(*(old.kind[i] for i in kept), *kind),
        order=None,
        note=("",) * n,
    )
    if len(different) < 2:
        runs = replace(runs, block=np.zeros(n, dtype=np.int64))
    return replace(study, runs=runs)


def planned_model(study: Study, order: int) -> PlannedModel:
    """Find what the runs of a study can estimate, up to a model of this order."""
    rows = np.arange(len(study.runs.rows))
    k = len(study.numeric)
    terms = every = model_terms(study, order, study.runs.block)
    aliases: list[set[str]] = []
    while True:
        matrix = model_matrix(study, terms, rows)
        kept = independent_columns(matrix)
        if len(kept) == len(terms):
            break
        dropped: set[int] = set()
        for column in sorted(set(range(len(terms))) - set(kept)):
            group = [column, *aliased_with(matrix, column, [i for i in kept if i < column])]
            degrees = {i: degree(terms[i], k) for i in group}
            aliases = _joined(aliases, {terms[i].name for i in group})
            dropped |= {i for i in group if degrees[i] == max(degrees.values())}
        terms = tuple(term for i, term in enumerate(terms) if i not in dropped)
    q_factor, r_factor = np.linalg.qr(matrix)
    inverse = np.linalg.inv(r_factor)
    n = len(rows)
    df_pure = n - len(set(replicate_groups(study, rows)))
    return PlannedModel(
        study=study,
        terms=terms,
        matrix=matrix,
        covariance=inverse @ inverse.T,
        leverage=np.minimum((q_factor**2).sum(axis=1), 1.0),
        aliases=tuple(
            ", ".join(term.name for term in every if term.name in names) for names in aliases
        ),
        df_lack=n - len(terms) - df_pure,
        df_pure=df_pure,
    )


def _joined(sets: list[set[str]], new: set[str]) -> list[set[str]]:
    """Add a set of terms, joined with those that it shares a term with."""
    apart = [names for names in sets if not names & new]
    touching = [names for names in sets if names & new]
    return [*apart, new.union(*touching)]


def level_combinations(study: Study) -> list[tuple[int, ...]]:
    """List the combinations of levels of the categorical factors; one empty one without any."""
    return list(product(*(range(len(factor.levels)) for factor in study.categorical)))
