"""One independent random stream for each purpose of each replicate of each point.

A stream depends on the root seed, the point, the purpose and the replicate, and on nothing else in the
sweep: adding a size, an ensemble, a replicate or an operator changes no existing draw.
"""

import hashlib
from enum import IntEnum

import numpy as np


class Purpose(IntEnum):
    """What a stream is for; the numbers are part of the contract."""

    ELEMENT_COUNT = 0
    SPRINKLING = 1
    INJECTION = 2


def generator_for(root_seed: int, point: str, purpose: Purpose, replicate: int) -> np.random.Generator:
    """The generator of one stream: Philox, keyed through SeedSequence.

    `point` is the canonical JSON of a point, or for injections of a series and a truth; `replicate` is then
    their number. Its SHA-256, as eight 32-bit words, is the first part of the spawn key (NumPy's SeedSequence
    guarantees independent streams for different spawn keys).
    """
    digest = hashlib.sha256(point.encode()).digest()
    words = tuple(int.from_bytes(digest[i : i + 4], "little") for i in range(0, 32, 4))
    sequence = np.random.SeedSequence(root_seed, spawn_key=(*words, int(purpose), replicate))
    return np.random.Generator(np.random.Philox(sequence))
