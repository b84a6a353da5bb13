"""Random streams: each block of years of each line has its own, derived from (seed, line, block).

The line enters by a hash of its name, so the order of lines, and what other lines exist, changes
nothing; the block by its number, so workers and their order change nothing. Seeding is numpy's
(SeedSequence, O'Neill's hash), the generator SFC64, 32 lanes of it for the sake of speed.
"""

from __future__ import annotations

import hashlib

import numpy as np

from lossagg.kernels.simulation import LANES, seed_lanes

BLOCK_YEARS = 2**15


def line_key(name: str) -> tuple[int, int]:
    """Two 32-bit words that stand for a line's name, the same on every machine."""
    digest = hashlib.sha256(name.encode("utf-8")).digest()
    return int.from_bytes(digest[:4], "little"), int.from_bytes(digest[4:8], "little")


def block_state(seed: int, key: tuple[int, int], block: int) -> np.ndarray:
    """The generator's state at the start of a block: 32 lanes of SFC64, shape (4, LANES), uint64.

    Lane 0 is numpy's `SFC64(SeedSequence(seed, spawn_key=(*key, block)))`; the others are seeded by
    the words that the same sequence generates next.

    Args:
        seed: the user's seed, 0 to 2**64 - 1.
        key: the line's key, see `line_key`.
        block: number of the block, below 2**32.
    """
    lanes = np.empty((4, LANES), dtype=np.uint64)
    seed_lanes(block_entropy(seed, key, block), lanes)
    return lanes


def block_entropy(seed: int, key: tuple[int, int], block: int) -> np.ndarray:
    """What the state of a block is seeded by, shape (7,), uint64: the words numpy's SeedSequence hashes."""
    return np.array((seed & 0xFFFFFFFF, seed >> 32, 0, 0, *key, block), dtype=np.uint64)
