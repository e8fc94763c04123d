"""Random streams by name, so that no step's numbers depend on another step or on workers."""

from __future__ import annotations

import zlib

import numpy as np


def stream(seed: int, purpose: str, block: int = 0) -> np.random.Generator:
    """Give the generator of one block of draws for one purpose.

    Parameters
    ----------
    seed : int
        The study's seed, 0 or more.
    purpose : str
        What the numbers are for; different purposes never share numbers.
    block : int
        Index of the block of draws.
    """
    key = (zlib.crc32(purpose.encode()), block)
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=key)))
