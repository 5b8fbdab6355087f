"""Judging control measurements one event at a time: the law that both the exact chain and the simulation run.

Each count rule keeps, for the sequence of all measurements and for each level's own sequence, two windows of bits: which of the last m
measurements were beyond +L, and which beyond -L, the newest in the lowest bit. A rule is met when a window holds k bits.

State: [up, down of (rule 1, all), (rule 1, level 1), ... (rule 2, all), ...].
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.control_rules import Rules
from pbm.methods.jit import Floats, Integers


def accepts(
    state: Integers,
    z: Floats,
    level: Integers,
    limit: Floats,
    needed: Integers,
    window: Integers,
    sequences: int,
    outer: float,
    spread: float,
    opposite: float,
) -> bool:
    """Judge one event; False if it is rejected (the state is then of no further use).

    Parameters
    ----------
    state : (2 rules sequences,)
        Changed in place.
    z : (w,)
        Measurements of the event in order, in SD from their level's mean.
    level : (w,)
        Level of each, from 0.
    limit, needed, window : (rules,)
        Of the count rules.
    sequences
        1, or 1 + the number of levels.
    outer, spread, opposite
        As in `Rules`; infinite where there is no such rule.
    """
    high = -np.inf
    low = np.inf
    for i in range(len(z)):
        x = z[i]
        if x > outer or x < -outer:
            return False
        high = max(high, x)
        low = min(low, x)
        for r in range(len(limit)):
            up = 1 if x > limit[r] else 0
            down = 1 if x < -limit[r] else 0
            keep = (1 << window[r]) - 1
            place = 2 * r * sequences
            for which in range(2 if sequences > 1 else 1):
                at = place + 2 * which * (1 + level[i])
                state[at] = ((state[at] << 1) | up) & keep
                state[at + 1] = ((state[at + 1] << 1) | down) & keep
                bits = state[at] * up + state[at + 1] * down
                found = 0
                while bits:
                    bits &= bits - 1
                    found += 1
                if found >= needed[r]:
                    return False
    return not (high - low > spread or (high > opposite and low < -opposite))


@dataclass(frozen=True, slots=True)
class Judge:
    """Rules laid out for levels and repeats, as the arguments of `accepts`.

    Attributes
    ----------
    level : (w,)
        Level of each measurement of an event.
    limit, needed, window : (rules,)
        Of the count rules.
    sequences
        1, or 1 + the number of levels.
    outer, spread, opposite
        As in `Rules`.
    """

    level: Integers
    limit: Floats
    needed: Integers
    window: Integers
    sequences: int
    outer: float
    spread: float
    opposite: float

    @classmethod
    def of(cls, rules: Rules, repeats: Integers) -> "Judge":
        """For levels with the given repeats, shape (levels,)."""
        counts = rules.counts
        return cls(
            np.repeat(np.arange(len(repeats)), repeats),
            np.array([rule.limit for rule in counts], dtype=np.float64),
            np.array([rule.needed for rule in counts], dtype=np.int64),
            np.array([rule.window for rule in counts], dtype=np.int64),
            1 + len(repeats) if len(repeats) > 1 else 1,
            rules.outer,
            rules.spread,
            rules.opposite,
        )

    @property
    def width(self) -> int:
        """Measurements in an event."""
        return len(self.level)

    @property
    def state_size(self) -> int:
        """Integers in a state."""
        return 2 * len(self.limit) * self.sequences

    @property
    def law(self) -> tuple[Integers, Floats, Integers, Integers, int, float, float, float]:
        """The arguments of `accepts` after the state and the measurements."""
        return (
            self.level,
            self.limit,
            self.needed,
            self.window,
            self.sequences,
            self.outer,
            self.spread,
            self.opposite,
        )

    @property
    def events_to_fill(self) -> int:
        """Events until the longest window of every sequence is full."""
        fewest = int(np.bincount(self.level).min())
        return -(-int(self.window.max(initial=1) - 1) // fewest)
