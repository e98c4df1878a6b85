"""Random streams: one per (seed, input name, block), so that no draw depends on any other input, block or worker."""

from hashlib import sha256

import numpy as np


def generator(seed: int, name: str, block: int) -> np.random.Generator:
    """Generator of one named input in one block.

    seed : any integer >= 0; 0 is a seed like any other
    name : the input's name; its SHA-256 picks the stream
    block : block number, >= 0
    Source: numpy's SeedSequence with the SFC64 bit generator (C. Doty-Humphrey), the fastest for normals on one core.
    """
    key = int.from_bytes(sha256(name.encode()).digest()[:8], "big")
    return np.random.Generator(np.random.SFC64(np.random.SeedSequence(seed, spawn_key=(key, block))))


class Streams:
    """The named streams of one block, read slice by slice.

    seed, block : as in `generator`
    names : input names
    """

    def __init__(self, seed: int, block: int, names):
        self._generators = {name: generator(seed, name, block) for name in names}

    def take(self, count: int) -> dict[str, np.ndarray]:
        """The next `count` standard normals of every stream, each of shape (count,)."""
        return {name: stream.standard_normal(count) for name, stream in self._generators.items()}
