"""Box-Behnken designs: two-level runs in two or three factors at a time, the others at the centre.

References
----------
Box and Behnken (1960), Some new three level designs for the study of quantitative variables,
Technometrics 2, 455-475 (from memory).
"""

from __future__ import annotations

from itertools import product

import numpy as np

from wideberth.study.records import FloatArray, IntArray

# which factors move together, one list a block; with three at a time the blocks come from the sign
_GROUPS: dict[int, tuple[tuple[tuple[int, ...], ...], ...]] = {
    3: (((0, 1), (0, 2), (1, 2)),),
    4: (((0, 1), (2, 3)), ((0, 3), (1, 2)), ((0, 2), (1, 3))),
    5: (
        ((0, 1), (2, 3), (1, 4), (0, 2), (3, 4)),
        ((1, 2), (0, 3), (2, 4), (0, 4), (1, 3)),
    ),
    6: (((0, 1, 3), (1, 2, 4), (2, 3, 5), (0, 3, 4), (1, 4, 5), (0, 2, 5)),),
    7: (
        (
            (3, 4, 5),
            (0, 5, 6),
            (1, 4, 6),
            (0, 1, 3),
            (2, 3, 6),
            (0, 2, 4),
            (1, 2, 5),
        ),
    ),
}
CENTRE_RUNS = {3: 3, 4: 3, 5: 6, 6: 6, 7: 6}
"""Centre runs in the whole, as published."""
BLOCKS = {3: 1, 4: 3, 5: 2, 6: 2, 7: 2}
"""Orthogonal blocks that the design divides into."""


def box_behnken(n_factors: int, n_blocks: int) -> tuple[FloatArray, IntArray]:
    """Lay out a design without its centre runs.

    Parameters
    ----------
    n_factors : int
        3 to 7.
    n_blocks : int
        1, or as ``BLOCKS`` says.

    Returns
    -------
    (ndarray of shape (n, k), ndarray of int of shape (n,))
        Coded settings and the block of each.
    """
    rows, blocks = [], []
    for place, groups in enumerate(_GROUPS[n_factors]):
        for group in groups:
            for signs in product((-1.0, 1.0), repeat=len(group)):
                row = np.zeros(n_factors)
                # first factor fastest
                row[list(group)] = signs[::-1]
                rows.append(row)
                blocks.append(int(np.prod(signs) > 0) if len(group) == 3 else place)
    found = np.array(blocks, dtype=np.int64)
    return np.array(rows), found if n_blocks > 1 else np.zeros_like(found)
