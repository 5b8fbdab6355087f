"""One master seed, named children: the same name always gives the same generator, whatever ran before or beside it."""

from hashlib import sha256

import numpy as np


def child(master: int, *names: object) -> np.random.Generator:
    """A generator of its own for a named purpose.

    Parameters
    ----------
    master
        The seed a person gave.
    names
        What the generator is for, such as a stream and a fault; compared by their text.

    Examples
    --------
    >>> int(child(1, "sodium@line-2", "onsets").integers(1000)) == int(child(1, "sodium@line-2", "onsets").integers(1000))
    True
    """
    key = sha256("\x1f".join(str(name) for name in names).encode()).digest()
    words = [int.from_bytes(key[i : i + 4], "big") for i in range(0, 16, 4)]
    return np.random.default_rng(np.random.SeedSequence(master, spawn_key=tuple(words)))
