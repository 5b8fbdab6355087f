"""One master seed gives named child generators, so that adding a stream or a fault never changes another's numbers."""

import hashlib

import numpy as np


def child(seed: int, *names: str) -> np.random.Generator:
    """Random generator of one named part of the laboratory.

    Parameters
    ----------
    seed
        Master seed, not negative.
    names
        Path of the part, for example ``"stream", "sodium@line-2", "noise"``.
    """
    digest = hashlib.blake2b("/".join(names).encode(), digest_size=16).digest()
    words = np.frombuffer(digest, dtype="<u4").tolist()
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, *words])))
