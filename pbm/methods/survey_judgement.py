"""First judgement of a stream: how many results the best statistic would need to see a shift, by closed form and without simulation.

For each candidate of truncation and transform the shift is inflicted on the results themselves (rounded and censored as a laboratory would
have seen them) and the movement d of the admitted mean is measured on the statistic's scale. With the SD s of the admitted values, the
inflation f of the variance of their means, the share a that is admitted, N results a day and a budget of B false alarms a day,

    results needed = ARL(d / (s sqrt(f)), in control a N / B) / a              (methods/run_length.py)

which is what a CUSUM made for that shift would need: a monitor that must serve all sizes needs more. `pbm tune` checks it by simulation.

The later third of the days is held against what came before: with its centre moved and its spread r times as large, the same CUSUM has
another rate of false alarms. That ratio is how many times the budget limits learned before would alarm.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pbm.methods.baseline import fit_baseline
from pbm.methods.chain import Preparation
from pbm.methods.faults import Fault, inflict
from pbm.methods.in_control import inflation
from pbm.methods.jit import Floats
from pbm.methods.run_length import Cusum, results_needed
from pbm.methods.trials import Stretch

FEWEST_ADMITTED = 100
NEAR_BEST = 1.05  # a simpler preparation that needs hardly more is preferred
SIMPLICITY = ("none", "log", "boxcox")
ERRORS_ALLOWED_FOR = 2.0


@dataclass(frozen=True, slots=True)
class Choice:
    """A preparation with what it keeps and what it makes of a shift.

    Attributes
    ----------
    admitted
        Share of the results.
    spread, inflation
        SD of the admitted values on the statistic's scale; variance inflation of their means.
    moved
        Movement of their mean under a shift of 1 TEa, mean of both signs; 0 where a shift leaves no result to admit.
    in_control
        Admitted results between two false alarms of the budget.
    """

    preparation: Preparation
    admitted: float
    spread: float
    inflation: float
    moved: float
    in_control: float

    def needed(self, size: float = 1.0) -> float:
        """Results offered until a shift of `size` TEa is seen; infinite where it moves nothing."""
        if self.moved <= 0:
            return math.inf
        return results_needed(size * self.moved / self.spread, self.in_control, self.inflation) / self.admitted

    @property
    def complexity(self) -> tuple[int, int, int]:
        """Order of simplicity: transform, truncation, winsorizing."""
        p = self.preparation
        return (SIMPLICITY.index(p.transform), int(math.isfinite(p.low) or math.isfinite(p.high)), int(p.winsorize))


def choices(stretch: Stretch, preparations: Sequence[Preparation], in_control: float) -> list[Choice]:
    """Each preparation that admits enough results that vary, weighed.

    Parameters
    ----------
    in_control
        Results between two false alarms of the budget.
    """
    shifted = [
        inflict(stretch.value, stretch.censor, fault, stretch.error, stretch.reporting, stretch.chance)
        for fault in _both()
    ]
    found = (_weighed(stretch, preparation, shifted, in_control) for preparation in preparations)
    return [choice for choice in found if choice is not None]


def _both() -> tuple[Fault, Fault]:
    return Fault("shift", 1.0, "TEa", -1), Fault("shift", 1.0, "TEa", 1)


def _weighed(
    stretch: Stretch, preparation: Preparation, shifted: Sequence[tuple[Floats, Floats]], in_control: float
) -> Choice | None:
    z = stretch.prepared(preparation)
    taken = z[~np.isnan(z)]
    if len(taken) < FEWEST_ADMITTED or (spread := float(taken.std())) == 0:
        return None
    means = [_mean(preparation.all(x, censor, stretch.mix)) for x, censor in shifted]
    share = len(taken) / len(z)
    moved = abs(means[1] - means[0]) / 2
    moved = moved if math.isfinite(moved) else 0.0
    return Choice(preparation, share, spread, inflation(z), moved, share * in_control)


def _mean(z: Floats) -> float:
    taken = z[~np.isnan(z)]
    return float(taken.mean()) if len(taken) else math.nan


def best_choice(of: Sequence[Choice]) -> Choice | None:
    """The simplest of those that need nearly the fewest results for 1 TEa; None if none sees it."""
    least = min((choice.needed() for choice in of), default=math.inf)
    near = [choice for choice in of if choice.needed() <= NEAR_BEST * least and math.isfinite(choice.needed())]
    return min(near, key=lambda choice: (choice.complexity, choice.needed()), default=None)


def with_baseline(stretch: Stretch, choice: Choice) -> Choice:
    """The same preparation with the expected value by ward and hour of the week taken away."""
    plain = choice.preparation
    fitted = replace(plain, baseline=fit_baseline(plain.transformed(stretch.value, stretch.censor), stretch.mix))
    z = stretch.prepared(fitted)
    return replace(choice, preparation=fitted, spread=float(np.nanstd(z)), inflation=inflation(z))


@dataclass(frozen=True, slots=True)
class Later:
    """The later third of the days against what came before.

    Attributes
    ----------
    alarms, alarms_at_least
        Alarms of limits learned before, in multiples of the budget: as estimated, and with allowance for the uncertainty of both parts.
    """

    alarms: float
    alarms_at_least: float


def later_alarms(before: Floats, after: Floats, choice: Choice) -> Later | None:
    """False alarms in the later part of limits learned in the earlier part.

    Parameters
    ----------
    before, after
        Prepared values of the two parts; not a number where dropped.
    choice
        Whose budget and shift make the CUSUM.

    Returns
    -------
    Later or None
        None where a part has fewer than a hundred values or does not vary.
    """
    first, second = before[~np.isnan(before)], after[~np.isnan(after)]
    if min(len(first), len(second)) < FEWEST_ADMITTED or min(np.ptp(first), np.ptp(second)) == 0:
        return None
    scale = float(first.std()) * math.sqrt(choice.inflation)
    ratio = float(second.std() / first.std())
    moved = float(second.mean() - first.mean()) / scale
    moved_error = math.sqrt(1 / len(first) + ratio**2 / len(second))
    ratio_error = math.sqrt(_variance_of_log_sd(first) + _variance_of_log_sd(second))
    cusum = Cusum.best_for(choice.moved / scale, choice.in_control)
    return Later(
        _times(cusum, moved, ratio),
        _times(
            cusum,
            _nearer_0(moved, ERRORS_ALLOWED_FOR * moved_error),
            math.exp(_nearer_0(math.log(ratio), ERRORS_ALLOWED_FOR * ratio_error)),
        ),
    )


def _variance_of_log_sd(z: Floats) -> float:
    """Sampling variance of the logarithm of the SD, by the fourth moment, with squares that hang together."""
    squares = (z - z.mean()) ** 2
    return inflation(squares) * float(squares.var() / squares.mean() ** 2) / (4 * len(z))


def _nearer_0(value: float, by: float) -> float:
    return math.copysign(max(abs(value) - by, 0.0), value)


def _times(cusum: Cusum, moved: float, ratio: float) -> float:
    return cusum.run_length(0.0) / cusum.run_length(moved, ratio)
