"""Judging control measurements one event at a time: the law that both the exact chain and the simulation run.

Each count rule remembers, for the sequence of all measurements and for each level's own sequence, what it needs of the past:

    k in a row     the length of the present run beyond the limit, positive above and negative below; met at k
    k of m         two windows of bits, the newest lowest: which of the last m were beyond +L, which beyond -L; met at k bits in one

State: two integers for each of (rule 1, all), (rule 1, level 1), ... (rule 2, all), ...; the second is not used by k in a row.
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
            side = 1 if x > limit[r] else (-1 if x < -limit[r] else 0)
            for which in range(2 if sequences > 1 else 1):
                at = 2 * (r * sequences + which * (1 + level[i]))
                if needed[r] == window[r]:
                    run = state[at] + side if state[at] * side > 0 else side
                    state[at] = run
                    if run * side >= needed[r]:
                        return False
                else:
                    keep = (1 << window[r]) - 1
                    state[at] = (state[at] << 1) & keep | (side > 0)
                    state[at + 1] = (state[at + 1] << 1) & keep | (side < 0)
                    bits = state[at] if side > 0 else state[at + 1]
                    found = 0
                    while side != 0 and bits:
                        bits &= bits - 1
                        found += 1
                    if found >= needed[r]:
                        return False
    return not (high - low > spread or (high > opposite and low < -opposite))


def still_needed(bits: int, needed: int, window: int) -> int:
    """The bits of a window that can still help to meet its rule when further measurements come.

    A bit of age a (0 the newest) leaves the window after m - 1 - a further measurements; if even those all beyond the limit could not make
    k with it and the newer bits, it is forgotten. So states that share every future are one state.

    Examples
    --------
    >>> [bin(still_needed(bits, 2, 3)) for bits in (0b001, 0b010, 0b100)], bin(still_needed(0b1000, 4, 5))
    (['0b1', '0b10', '0b0'], '0b0')
    """
    found = 0
    kept = 0
    for age in range(window - 1):
        found += (bits >> age) & 1
        if found + window - 1 - age >= needed:
            kept |= bits & (1 << age)
    return kept


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
    def blind(self) -> bool:
        """Whether no event can be rejected."""
        within_event = min(self.spread, self.opposite) if self.width > 1 else np.inf
        return len(self.limit) == 0 and bool(np.isinf(min(self.outer, within_event)))

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
