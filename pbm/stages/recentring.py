"""The centre of a monitor while it runs: where the plan has it, or as far from there as results after a laboratory event have moved it.

Values are taken relative to the centre, so that limits and statistic stay those of the plan. What was learned is undone by the event "keep
the old centre": the centre goes back to where it was before the last event. The law is that of methods/recentre.py.
"""

import struct
from dataclasses import replace
from math import isnan

import numpy as np

from pbm.methods.chain import Preparation
from pbm.methods.onset import InControl
from pbm.methods.recentre import recentred
from pbm.methods.unreliable import ErrorModel

# How far the centre lies from the plan's, and lay before; values since the event, their sum, how many are wanted (0: not learning).
_STATE = struct.Struct("<ddQdQ")
SIZE = _STATE.size


class Centre:
    """Where the centre lies.

    Parameters
    ----------
    in_control
        Of the monitor's plan.
    preparation
        The way from results to values and back.
    error
        TEa of the analyte.
    at_most
        Part of TEa by which the centre may move.
    """

    def __init__(self, in_control: InControl, preparation: Preparation, error: ErrorModel, at_most: float) -> None:
        self._plan, self._preparation = in_control, preparation
        self.offset = self._before = self._total = 0.0
        self._count = self._wanted = 0
        level = preparation.back(in_control.centre)
        moved = at_most * float(error.tea(np.array(level)))
        up, down = (preparation.scale(level + sign * moved) - in_control.centre for sign in (1, -1))
        # Below the range of a transform there is no value: then as far down as up.
        self._high = up * in_control.slope
        self._low = (-up if isnan(down) else down) * in_control.slope

    @property
    def learning(self) -> bool:
        """Whether the centre still follows the results."""
        return self._wanted > 0

    @property
    def in_control(self) -> InControl:
        """In-control behaviour of the values before they are taken relative to the centre."""
        return replace(self._plan, centre=self._plan.centre + self.offset) if self.offset else self._plan

    def learn(self, over: int) -> None:
        """Learn it again from the next so many admitted values."""
        self._before, self._total, self._count, self._wanted = self.offset, 0.0, 0, over

    def keep_old(self) -> None:
        """Go back to where it was before it was last learned."""
        self.offset, self._wanted = self._before, 0

    def relative(self, z: float) -> float:
        """An admitted value relative to the centre, which follows it while learning."""
        if self._wanted:
            self._total += z - self._plan.centre
            self._count += 1
            self.offset = recentred(self._total, self._count, self._before, self._plan, self._low, self._high)
            self._wanted = 0 if self._count >= self._wanted else self._wanted
        return z - self.offset

    def learned(self) -> tuple[float, int, bool]:
        """How far the centre lies from the plan's in the result's unit, from how many results, and whether the cap held it."""
        level = self._plan.centre
        moved = self._preparation.back(level + self.offset / self._plan.slope) - self._preparation.back(level)
        return moved, self._count, self.offset in (self._low, self._high)

    def to_bytes(self) -> bytes:
        """The state."""
        return _STATE.pack(self.offset, self._before, self._count, self._total, self._wanted)

    def go_on(self, state: bytes) -> None:
        """Go on from `to_bytes`."""
        self.offset, self._before, self._count, self._total, self._wanted = _STATE.unpack(state)
