"""Random numbers of one owner: nobody else's draws can shift them.

It owns how a seed and a name become a stream, so that the same seed gives the same bytes whatever else stands
on the bench.
"""

from collections.abc import Iterator

import numpy as np

_BLOCK = 4096


def generator(seed: int, name: str) -> np.random.Generator:
    """Return the private generator of a name."""
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=tuple(name.encode()))))


def normals(seed: int, name: str) -> Iterator[float]:
    """Yield numbers of the standard normal distribution for ever, as plain floats."""
    source = generator(seed, name)
    while True:
        # a block at a time: one call of the generator costs as much as some thirty numbers
        yield from source.standard_normal(_BLOCK).tolist()
