"""Random numbers by key and purpose: no stream is shared, so no noise moves when another is switched on or off."""

from __future__ import annotations

import hashlib

import numpy as np


def generator(key: int, purpose: str) -> np.random.Generator:
    """A counter-based generator that depends on nothing but its arguments.

    Salmon et al., "Parallel random numbers: as easy as 1, 2, 3", SC11, 2011 (Philox).
    """
    digest = hashlib.sha256(f"{key}/{purpose}".encode()).digest()
    return np.random.Generator(np.random.Philox(key=int.from_bytes(digest[:16], "big")))
