"""Two-level runs: full or fractional, and their division into blocks.

A product of factors is a bit mask. Fractions are those of the highest resolution with the fewest
shortest words; blocks are split by products that are as long as possible, so that neither factors
nor products of two are mixed up with blocks.

References
----------
Box and Hunter (1961), The 2^(k-p) fractional factorial designs, Technometrics 3, 311-351 and
449-458 (resolution, defining words); Fries and Hunter (1980), Technometrics 22, 601-608 (fewest
shortest words). Both from memory.
"""

from __future__ import annotations

from functools import cache
from itertools import combinations

import numpy as np

from wideberth.plan.records import Core
from wideberth.study.records import FloatArray, IntArray

FRACTIONS = {"full": 0, "half": 1, "quarter": 2, "eighth": 3, "sixteenth": 4}
ENOUGH = 5
"""Resolution from which no factor or product of two is mixed up with another."""


@cache
def two_level_core(n_factors: int, halvings: int) -> Core | None:
    """Find the fraction 1/2^halvings of all two-level runs; ``None`` when there is none."""
    if halvings == 0:
        return Core(n_factors, (), None)
    base = n_factors - halvings
    if base < 2:
        return None
    parents = [mask for mask in range(1, 1 << base) if mask.bit_count() >= 2]
    best: tuple[tuple[int, ...], tuple[int, ...]] | None = None
    for chosen in combinations(parents, halvings):
        words = _products([mask | 1 << (base + i) for i, mask in enumerate(chosen)])
        lengths = [word.bit_count() for word in words]
        # few short words first: the resolution is where the first count is not zero
        pattern = tuple(lengths.count(length) for length in range(1, n_factors + 1))
        if best is None or pattern < best[0]:
            best = (pattern, tuple(sorted(words)))
    if best is None:
        return None
    resolution = 1 + next(i for i, count in enumerate(best[0]) if count)
    return Core(n_factors, best[1], resolution)


def smallest_core(n_factors: int) -> Core:
    """Give the smallest fraction of resolution V or better."""
    cores = [two_level_core(n_factors, halvings) for halvings in range(5)]
    fit = [c for c in cores if c is not None and (c.resolution is None or c.resolution >= ENOUGH)]
    return fit[-1]


def core_runs(core: Core) -> FloatArray:
    """Lay out the runs of a core, coded -1 and +1: shape (F, k), first factor fastest.

    Every word's product is +1, so that the run with all factors high is among them.
    """
    numbers = np.arange(1 << core.n_factors)
    signs = np.where(numbers[:, None] >> np.arange(core.n_factors) & 1, 1.0, -1.0)
    keep = np.ones(len(signs), dtype=np.bool_)
    for word in core.words:
        keep &= _product(signs, word) > 0
    return signs[keep]


def block_of_runs(core: Core, halvings: int, *, least: int) -> IntArray | None:
    """Divide a core's runs into 2^halvings blocks.

    Parameters
    ----------
    least : int
        Shortest product that may be mixed up with the blocks: 3 leaves factors and products of
        two alone, 2 the factors.

    Returns
    -------
    ndarray of int, shape (F,), or None
        The block of each run; ``None`` when there is no such division.
    """
    runs = core_runs(core)
    if halvings == 0:
        return np.zeros(len(runs), dtype=np.int64)
    words = _block_words(core, halvings, least)
    if words is None:
        return None
    bits = np.stack([_product(runs, word) > 0 for word in words], axis=1)
    return np.asarray(bits @ (1 << np.arange(halvings)), dtype=np.int64)


@cache
def _block_words(core: Core, halvings: int, least: int) -> tuple[int, ...] | None:
    shortest = {}
    for mask in range(1, 1 << core.n_factors):
        same = [mask, *(mask ^ word for word in core.words)]
        if min(same) == mask and 0 not in same:
            shortest[mask] = min(other.bit_count() for other in same)
    for wanted in range(core.n_factors, least - 1, -1):
        pool = [mask for mask, length in shortest.items() if length >= wanted]
        found = _independent(core, pool, shortest, wanted, halvings)
        if found is not None:
            return found
    return None


def _independent(
    core: Core, pool: list[int], shortest: dict[int, int], wanted: int, n: int
) -> tuple[int, ...] | None:
    """Choose n masks all of whose products are long enough, by depth-first search."""

    def length(mask: int) -> int:
        same = min([mask, *(mask ^ word for word in core.words)])
        return shortest.get(same, 0)

    def extend(chosen: list[int], products: list[int], start: int) -> tuple[int, ...] | None:
        if len(chosen) == n:
            return tuple(chosen)
        for place in range(start, len(pool)):
            new = [pool[place] ^ product for product in [0, *products]]
            if all(length(product) >= wanted for product in new):
                found = extend([*chosen, pool[place]], products + new, place + 1)
                if found is not None:
                    return found
        return None

    return extend([], [], 0)


def _products(generators: list[int]) -> list[int]:
    products: list[int] = []
    for generator in generators:
        products += [generator, *(generator ^ product for product in products)]
    return products


def _product(signs: FloatArray, word: int) -> FloatArray:
    columns = [j for j in range(signs.shape[1]) if word >> j & 1]
    product: FloatArray = signs[:, columns].prod(axis=1)
    return product
