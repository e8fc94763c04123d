"""Whether factors were set anew for every run, read off the run order.

Runs that follow one another at an untouched setting share that setting's error. Taken for
independent runs they make everything about that factor look surer than it is.
"""

from __future__ import annotations

import numpy as np

from wideberth.seeds import stream
from wideberth.study.records import Finding, FloatArray, Study

_RARE = 0.001
_HALF = 0.5
_N_ORDERS = 1999
_FEWEST_RUNS = 8


def seldom_reset(study: Study) -> tuple[Finding, ...]:
    """Find the factors that changed far less often than in a random order of the same runs.

    Only where the sheet states the run order. Orders are drawn anew within blocks, because what
    differs between blocks is theirs.
    """
    runs = study.runs
    if runs.order is None or len(set(runs.order)) < len(runs.order):
        return ()
    places = np.argsort(runs.order, kind="stable")
    places = places[runs.fitted[places]]
    if len(places) < _FEWEST_RUNS:
        return ()
    columns = np.concatenate([runs.numeric_actual, runs.levels], axis=1)[places]
    names = [f.name for f in study.numeric] + [f.name for f in study.categorical]
    blocks = runs.block[places]
    orders = _orders(blocks.astype(np.float64))
    share = any(r.limit is not None and r.limit.guard == "share" for r in study.responses)
    found = []
    for name, column in zip(names, columns.T, strict=True):
        changes = int((np.diff(column) != 0).sum())
        drawn = (np.diff(column[orders], axis=1) != 0).sum(axis=1)
        p = (1 + (drawn <= changes).sum()) / (1 + len(drawn))
        usual = float(np.median(drawn))
        if changes == 0 or p > _RARE or changes > _HALF * usual:
            continue
        text = (
            f"{name}: set only {changes + 1} times in {len(places)} runs (about"
            f" {usual + 1:.0f} in a random order). Runs that share a setting share its error, so"
            f" intervals and guards are too sure about {name}"
        )
        text += "; a share of batches cannot be promised" if share else ""
        found.append(
            Finding(
                "look", f"{text}. The way out: set it anew for every run, in random order.", name
            )
        )
    return tuple(found)


def _orders(blocks: FloatArray) -> np.ndarray[tuple[int, int], np.dtype[np.int64]]:
    """Draw random orders that keep each run in its block's places: shape (N, n)."""
    random = stream(1, "random run orders", len(blocks))
    keys = random.random((_N_ORDERS, len(blocks)))
    orders = np.tile(np.arange(len(blocks), dtype=np.int64), (_N_ORDERS, 1))
    for block in np.unique(blocks):
        own = np.flatnonzero(blocks == block)
        orders[:, own] = own[np.argsort(keys[:, own], axis=1)]
    return orders
