"""The lattice on which a statistic of rounded results lies, and the gaps between its points, where a limit belongs.

Results in whole steps put a moving mean of N on multiples of step / N, a moving median on the steps themselves. A limit on such a point
would be decided by rounding errors, and a tail threshold just below one hides the height of the step. So both go to the middle of a gap.
On no lattice any limit stands as it is: moved half-way between two observed values it would be wider wherever these lie far apart, which
is where limits are.
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats

SAMPLE = 2_000
REPEATED = 10  # on a lattice worth the name each point is met so often in the mean, or more
ONE_POINT = (
    1e-9  # values nearer to each other than this share of the furthest are one point, seen through rounding errors
)


@dataclass(frozen=True, slots=True)
class Lattice:
    """Points on which the values of a path lie.

    Attributes
    ----------
    points : (p,)
        Observed ones, ascending; none where the values lie on no lattice.
    pitch
        The smallest distance between two of them.
    regular
        Whether all distances between them are multiples of the pitch.
    """

    points: Floats
    pitch: float
    regular: bool

    def gap_beyond(self, distance: float) -> float:
        """The first middle of a gap at or beyond a distance; the distance itself on no lattice."""
        if self.pitch == 0:
            return distance
        middles = self._middles_near(distance)
        return float(middles[np.searchsorted(middles, distance)])

    def gap_within(self, distance: float) -> float:
        """The last middle of a gap between 0 and a distance, or the first beyond 0; the distance itself on no lattice."""
        if self.pitch == 0:
            return distance
        middles = self._middles_near(distance)
        inside = middles[(middles > 0) & (middles <= distance)]
        return float(inside[-1]) if len(inside) else self.gap_beyond(self.pitch * ONE_POINT)

    def _middles_near(self, distance: float) -> Floats:
        """Middles of gaps, among them the nearest ones on both sides of the distance."""
        if self.regular:
            below = math.floor((distance - self.points[0]) / self.pitch)
            return np.asarray(self.points[0] + (below + np.arange(-1.5, 2.5)) * self.pitch)
        beyond = max(distance, float(self.points[-1])) + self.pitch * np.arange(1, 3)
        ends = np.concatenate([[self.points[0] - self.pitch], self.points, beyond])
        return np.asarray((ends[1:] + ends[:-1]) / 2)


def lattice_of(values: Floats) -> Lattice:
    """The lattice on which the values of a path lie, shape (n,), all of them numbers."""
    sample = values[:SAMPLE]
    points = _points(sample)
    if not 1 < len(points) < len(sample) / REPEATED:
        return Lattice(np.zeros(0), 0.0, True)
    gaps = np.diff(points)
    pitch = float(gaps.min())
    regular = bool((np.abs(gaps / pitch - np.rint(gaps / pitch)) < 0.01).all())
    return Lattice(points if regular else _points(values), pitch, regular)


def _points(values: Floats) -> Floats:
    ordered = np.unique(values)
    apart = np.diff(ordered, prepend=-np.inf) > ONE_POINT * float(np.abs(ordered).max(initial=0.0))
    return np.asarray(ordered[apart])
