"""General drift detectors of river, run as a monitor is run: which alarms a general tool would give within the same budget.

Each detector has one sensitivity. It is set by bisection so that on in-control values there are no more detections than the alarm budget
allows; everything else is left as river has it. Values are given to it in SDs from the in-control mean. A detector begins afresh by
itself after a detection, so that each detection is one alarm. Detectors are Python objects: the state at an onset is a deep copy.

Sources: ADWIN, "Learning from time-changing data with adaptive windowing", SIAM International Conference on Data Mining 2007, 443-448;
Page-Hinkley, "Continuous inspection schemes", Biometrika 1954;41:100-115; KSWIN, "Reactive soft prototype computing for concept drift
streams", Neurocomputing 2020;416:340-351.
"""

import copy
import math
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from pbm.methods.jit import Floats, Integers


class Detector(Protocol):
    """A detector with river's interface."""

    @property
    def drift_detected(self) -> bool:
        """Whether the last value was a detection."""

    def update(self, x: float) -> None:
        """Take a value."""


def _adwin(sensitivity: float, seed: int) -> Detector:
    from river.drift import ADWIN

    return ADWIN(delta=sensitivity)  # type: ignore[no-untyped-call]


def _page_hinkley(sensitivity: float, seed: int) -> Detector:
    from river.drift import PageHinkley

    return PageHinkley(threshold=sensitivity)


def _kswin(sensitivity: float, seed: int) -> Detector:
    from river.drift import KSWIN

    return KSWIN(alpha=sensitivity, seed=seed)


@dataclass(frozen=True, slots=True)
class Peer:
    """A detector and its sensitivity.

    Attributes
    ----------
    name, title
        In the table, and as people read it.
    sensitivity
        What river calls it.
    gentle, keen
        The sensitivity with the fewest and with the most detections.
    make
        A fresh detector from a sensitivity and a seed.
    """

    name: str
    title: str
    sensitivity: str
    gentle: float
    keen: float
    make: Callable[[float, int], Detector]


PEERS = {
    p.name: p
    for p in (
        Peer("adwin", "ADWIN", "delta", 1e-300, 1.0, _adwin),
        Peer("page-hinkley", "Page-Hinkley", "threshold", 1e6, 1.0, _page_hinkley),
        Peer("kswin", "KSWIN", "alpha", 1e-16, 0.5, _kswin),
    )
}


@dataclass(frozen=True, slots=True)
class PeerMonitor:
    """A detector with its sensitivity, on values in SDs from their in-control mean.

    Attributes
    ----------
    peer
        A name in the table.
    sensitivity
        Its own parameter.
    level, spread
        In-control mean and SD of the values.
    seed
        Of a detector that draws at random.
    """

    peer: str
    sensitivity: float
    level: float
    spread: float
    seed: int = 0

    def start(self) -> Detector:
        """A fresh detector."""
        return PEERS[self.peer].make(self.sensitivity, self.seed)

    def alarms(self, z: Floats) -> Integers:
        """Places of the detections among values z (n,), from a fresh start; not a number where dropped."""
        detector = self.start()
        return np.array([i for i, u in self._standard(z) if _detects(detector, u)], dtype=np.int64)

    def alarms_within(self, z: Floats, most: float) -> bool:
        """Whether there are no more than so many detections among values z (n,), from a fresh start; it looks no further than needed."""
        detector, found = self.start(), 0
        for _, u in self._standard(z):
            found += _detects(detector, u)
            if found > most:
                return False
        return True

    def states_at(self, z: Floats, at: Integers) -> list[Detector]:
        """The detector before each index of `at` (not decreasing), from a fresh start."""
        detector, first = self.start(), 0
        states = []
        for last in at.tolist():
            for _, u in self._standard(z[first:last]):
                detector.update(u)
            first = last
            states.append(copy.deepcopy(detector))
        return states

    def first_alarms(self, z: Floats, states: Sequence[Detector], starts: Integers, ends: Integers) -> Integers:
        """Index into z of the first detection of many runs, -1 where there is none.

        Parameters
        ----------
        z : (n,)
            Prepared values; not a number where dropped.
        states
            The detector before each run, r of them; not changed.
        starts, ends : (r,)
            Each run reads z[start:end].

        Returns
        -------
        (r,)
        """
        found = [
            self._first_alarm(z[start:end], copy.deepcopy(state))
            for state, start, end in zip(states, starts.tolist(), ends.tolist(), strict=True)
        ]
        return np.where(np.array(found) >= 0, starts + found, -1)

    def _first_alarm(self, z: Floats, detector: Detector) -> int:
        return next((i for i, u in self._standard(z) if _detects(detector, u)), -1)

    def _standard(self, z: Floats) -> Iterator[tuple[int, float]]:
        """Place and standardised value of what was not dropped."""
        return ((i, (x - self.level) / self.spread) for i, x in enumerate(z.tolist()) if not math.isnan(x))


def _detects(detector: Detector, u: float) -> bool:
    detector.update(u)
    return detector.drift_detected


def calibrated(peer: str, z: Floats, expected: float, seed: int = 0, steps: int = 14) -> PeerMonitor:
    """The keenest detector found that alarms no more often than expected.

    Parameters
    ----------
    peer
        A name in the table.
    z : (n,)
        Prepared in-control values; not a number where dropped.
    expected
        Alarms that the budget allows in them.
    seed
        Of a detector that draws at random.
    steps
        Halvings of the range of the sensitivity, on its logarithm; each is a pass over z.

    Raises
    ------
    ValueError
        If the detector alarms more often even at its gentlest.
    """
    table = PEERS[peer]
    begun = PeerMonitor(peer, table.gentle, float(np.nanmean(z)), float(np.nanstd(z)), seed)
    if not begun.alarms_within(z, expected):
        raise ValueError(f"{table.title} alarms more often than {expected:g} times at any {table.sensitivity}")
    kept, too_keen = math.log(table.gentle), math.log(table.keen)
    for _ in range(steps):
        middle = (kept + too_keen) / 2
        within = replace(begun, sensitivity=math.exp(middle)).alarms_within(z, expected)
        kept, too_keen = (middle, too_keen) if within else (kept, middle)
    return replace(begun, sensitivity=math.exp(kept))
