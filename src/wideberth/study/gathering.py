"""From rows of the sheet to runs: what is left out, and repeated assays of one batch averaged.

Rows that share a ``sample`` are one batch assayed several times. Their values are averaged to
one run and never taken for replicates: repeating an assay says nothing about the next batch.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from wideberth.errors import Fault
from wideberth.study.records import (
    Assays,
    BoolArray,
    FloatArray,
    IntArray,
    LeftOut,
    Response,
    Runs,
)


@dataclass(frozen=True, slots=True, eq=False)
class Gathered:
    """The runs to be fitted, all runs where some are left out, and what the assays show."""

    runs: Runs
    every_run: Runs | None
    assays: dict[str, Assays]


def gather(
    rows: Runs,
    samples: Sequence[str],
    left_out: tuple[LeftOut, ...],
    measured: tuple[Response, ...],
) -> tuple[Gathered | None, tuple[Fault, ...]]:
    """Leave out what is stated and average repeated assays.

    Parameters
    ----------
    rows : Runs
        One a row of the sheet.
    samples : sequence of str, length n
        Name of the batch that each row is an assay of; ``""`` where a row stands alone.
    """
    batches = _batches(samples)
    faults = (*_leave_out_faults(rows, left_out), *_sample_faults(rows, samples, batches))
    if faults:
        return None, faults
    nothing = np.zeros(rows.measured.shape, dtype=np.bool_)
    dropped = _dropped_cells(rows, left_out, measured)
    runs = _averaged(rows, batches, dropped)
    every = _averaged(rows, batches, nothing) if left_out else None
    found = {} if len(runs.rows) == len(rows.rows) else _assays(rows, batches, dropped, measured)
    return Gathered(runs, every, found), ()


def _batches(samples: Sequence[str]) -> IntArray:
    """Count off the batches, giving each row its own, in order of appearance: shape (n,)."""
    alone = [(name, i if not name else -1) for i, name in enumerate(samples)]
    places = {key: place for place, key in enumerate(dict.fromkeys(alone))}
    return np.array([places[key] for key in alone], dtype=np.int64)


def _leave_out_faults(rows: Runs, left_out: tuple[LeftOut, ...]) -> Iterator[Fault]:
    fitted = rows.fitted
    for stated in left_out:
        for row in stated.rows:
            if row not in rows.rows:
                yield Fault(
                    f"[[leave_out]] names row {row}, which holds no run",
                    f"study.toml, leave_out ({stated.reason})",
                    f"rows are counted as in {rows.file}, the header being row 1",
                )
            elif not fitted[rows.rows.index(row)]:
                yield Fault(
                    f"[[leave_out]] names row {row}, which is never fitted"
                    f" ({rows.kind[rows.rows.index(row)]})",
                    f"study.toml, leave_out ({stated.reason})",
                    "take it out of the list",
                )


def _sample_faults(rows: Runs, samples: Sequence[str], batches: IntArray) -> Iterator[Fault]:
    """Rows of one sample must be one batch: same settings, block, kind and weight."""
    weight = np.ones(len(batches)) if rows.weight is None else rows.weight
    kinds = [list(dict.fromkeys(rows.kind)).index(kind) for kind in rows.kind]
    for what, values in (
        ("settings", np.concatenate([rows.numeric_actual, rows.levels], axis=1)),
        ("blocks", rows.block[:, None]),
        ("kinds", np.array(kinds)[:, None]),
        ("weights", weight[:, None]),
    ):
        for batch in np.unique(batches):
            own = np.flatnonzero(batches == batch)
            if (values[own] != values[own[0]]).any():
                numbers = ", ".join(str(rows.rows[i]) for i in own)
                yield Fault(
                    f"the assays of sample {samples[own[0]]} have different {what}",
                    f"{rows.file} rows {numbers}",
                    "one sample is one batch, assayed again; give each batch its own name",
                )


def _dropped_cells(
    rows: Runs, left_out: tuple[LeftOut, ...], measured: tuple[Response, ...]
) -> BoolArray:
    dropped = np.zeros(rows.measured.shape, dtype=np.bool_)
    names = [response.name for response in measured]
    for stated in left_out:
        columns = [names.index(name) for name in stated.responses] or range(len(names))
        for row in stated.rows:
            dropped[rows.rows.index(row), list(columns)] = True
    return dropped


def _averaged(rows: Runs, batches: IntArray, dropped: BoolArray) -> Runs:
    """Give one run a batch, its values the mean of the cells that are kept."""
    kept = np.where(dropped, np.nan, rows.measured)
    first = np.unique(batches, return_index=True)[1]
    own = [np.flatnonzero(batches == batch) for batch in range(len(first))]
    notes = ["; ".join(dict.fromkeys(filter(None, (rows.note[i] for i in one)))) for one in own]
    gone: BoolArray = np.all(dropped, axis=1)
    return replace(
        rows,
        rows=tuple(rows.rows[i] for i in first),
        numeric_actual=rows.numeric_actual[first],
        levels=rows.levels[first],
        measured=np.array([_means(kept[one]) for one in own]).reshape(len(own), kept.shape[1]),
        block=rows.block[first],
        kind=tuple(rows.kind[i] for i in first),
        order=None if rows.order is None else tuple(rows.order[i] for i in first),
        note=tuple(notes),
        weight=None if rows.weight is None else rows.weight[first],
        others={name: tuple(cells[i] for i in first) for name, cells in rows.others.items()},
        left_out=tuple(
            place for place, one in enumerate(own) if gone[one].all() and kept.shape[1] > 0
        ),
    )


def _means(values: FloatArray) -> FloatArray:
    """Average the finite values of each column, not-a-number where there are none."""
    count = np.isfinite(values).sum(axis=0)
    total = np.where(np.isfinite(values), values, 0.0).sum(axis=0)
    return np.where(count > 0, total / np.maximum(count, 1), np.nan)


def _assays(
    rows: Runs, batches: IntArray, dropped: BoolArray, measured: tuple[Response, ...]
) -> dict[str, Assays]:
    """Pool the spread of repeated assays within batches, response by response."""
    found = {}
    for j, response in enumerate(measured):
        values = np.where(dropped[:, j] | ~rows.fitted, np.nan, rows.measured[:, j])
        present = np.isfinite(values)
        counts = np.bincount(batches[present])
        counts = counts[counts > 0]
        df = int((counts - 1).sum())
        totals = np.bincount(batches, weights=np.where(present, values, 0.0))
        means = (totals / np.maximum(np.bincount(batches, weights=present), 1))[batches]
        squares = float(((values - means)[present] ** 2).sum())
        sd = float(np.sqrt(squares / df)) if df else None
        found[response.name] = Assays(tuple(sorted({int(c) for c in counts})), sd, df)
    return found
