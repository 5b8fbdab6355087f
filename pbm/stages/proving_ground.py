"""Where choices for a stream's monitors are compared: its training days, the errors of `lab.toml` and the control schedule.

The first two thirds of the days train; the last third of these, which fits no baseline, compares the finalists.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from pbm.methods.chain import Preparation
from pbm.methods.cross_fit import cross_fitted
from pbm.methods.expected import Onsets
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats
from pbm.methods.search import Runner, Team, onsets_for, scores
from pbm.methods.split import Split, first_held_out_day, split_at
from pbm.methods.trials import Stretch, Trial, alarm_and_stop, trial
from pbm.stages.from_plan import faults_of
from pbm.stages.surroundings import Surroundings

Weighted = Sequence[tuple[Fault, float]]


@dataclass(frozen=True)
class ProvingGround:
    """The training days of one stream.

    Attributes
    ----------
    around
        Analyte, schedule and seed.
    training
        The results of the training days.
    split
        Of the whole history into training and held-out days.
    """

    around: Surroundings
    training: Stretch
    split: Split
    _chances: dict[Fault, Floats] = field(default_factory=dict)
    _not_fitted: dict[Preparation, Floats] = field(default_factory=dict)

    @property
    def per_day(self) -> float:
        """Results a day."""
        days = self.split.days
        return len(days) / float(days[-1] - days[0] + 1)

    @property
    def choose_at(self) -> int:
        """Index of the first result of the last third of the training days: finalists are compared there, baselines fitted before."""
        training = self.split.days[: self.split.at]
        return split_at(training, first_held_out_day(training)).at

    @property
    def faults(self) -> Weighted:
        """Every error condition of the analyte, with its weight."""
        return faults_of(self.around.analyte)

    def not_fitted_to(self, preparation: Preparation) -> Floats:
        """The training results as prepared, shape (n,), each by a patient-mix baseline that has not seen it; worked out once."""
        if preparation.baseline is None:
            return self.training.prepared(preparation)
        if preparation not in self._not_fitted:
            y = preparation.transformed(self.training.value, self.training.censor)
            self._not_fitted[preparation] = cross_fitted(y, self.training.mix, self.split.days[: self.split.at])
        return self._not_fitted[preparation]

    def early_onsets(self, count: int, horizon_days: float) -> Onsets:
        """Onsets on any training day but the first, for the rounds in which no baseline is fitted yet."""
        second_day = int(np.searchsorted(self.split.days, self.split.days[0], side="right"))
        return self.around.onsets(self.training.time, second_day, len(self.training), count, horizon_days)

    def last_onsets(self, faults: Weighted) -> Onsets:
        """Onsets on the days that compare finalists."""
        return self.around.onsets(self.training.time, self.choose_at, len(self.training), onsets_for(len(faults)))

    def scores(
        self, runners: Sequence[Runner], faults: Weighted, onsets: Onsets, teams: Sequence[Team] | None = None
    ) -> Floats:
        """Expected unreliable results of each monitor (or team) at each onset, averaged over the faults, shape (c, r)."""
        around = self.around
        stop = partial(
            alarm_and_stop,
            lag_results=around.lag_results,
            lag_microseconds=around.lag_microseconds,
            time=self.training.time,
        )
        return scores(self.training, runners, self.trials(faults, onsets), stop, teams)

    def schedule_alone(self, faults: Weighted, onsets: Onsets) -> float:
        """The same with the control schedule and no monitor, averaged over the onsets too."""
        total, weights = 0.0, 0.0
        for tried, weight in self.trials(faults, onsets):
            total += weight * float(tried.exposure.unreliable(onsets.length).mean())
            weights += weight
        return total / weights

    def trials(self, faults: Weighted, onsets: Onsets) -> Iterator[tuple[Trial, float]]:
        """The faults at the same onsets, each with its weight."""
        for fault, weight in faults:
            yield trial(self.training, fault, onsets, self._passed(fault, onsets)), weight

    def _passed(self, fault: Fault, onsets: Onsets) -> Floats:
        """Chance of passing the first control events; worked out once for each fault, for the longest horizon met.

        Of a drift it depends on the onsets: how far it has grown at each event.
        """
        if fault.kind == "drift":
            return self.around.chance_of_passing(fault, onsets).passed
        events = onsets.edges.shape[1]
        if fault not in self._chances or len(self._chances[fault]) <= events:
            self._chances[fault] = self.around.chance_of_passing(fault, onsets).passed
        return self._chances[fault][: events + 1]
