"""The search for one monitor of a stream, for shifts or for imprecision: successive halving in three rounds.

Round one compares everything at few onsets over a short horizon, round two the best at more, the last the finalists of each family with
and without a patient-mix baseline, at most onsets, on days that fitted no baseline.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

from pbm.methods.baseline import fit_baseline
from pbm.methods.candidates import Candidate, Grid, preparations
from pbm.methods.jit import Floats
from pbm.methods.search import Runner, best_of, limited, simplest_near_best
from pbm.methods.trials import Stretch
from pbm.stages.by_hand import ByHand
from pbm.stages.proving_ground import ProvingGround, Weighted

FIRST_ONSETS, FIRST_HORIZON_DAYS = 40, 2.0
SECOND_ONSETS, SECOND_HORIZON_DAYS, SECOND_ROUND = 120, 4.0, 60
FINALISTS = 12
WINDOWS = 50  # a window is no longer than this part of the training results


@dataclass(frozen=True, slots=True)
class Watch:
    """What a monitor is to find: shift or imprecision, by which faults it is judged, and the upper side's share of its alarms."""

    watches: Literal["shift", "imprecision"]
    faults: Weighted
    upper: float

    @classmethod
    def shifts(cls, faults: Weighted) -> "Watch":
        """Every fault but added noise, to both sides alike."""
        return cls("shift", [(fault, weight) for fault, weight in faults if fault.kind != "noise"], 0.5)

    @classmethod
    def imprecision(cls, faults: Weighted) -> "Watch":
        """Added noise; results that spread less than usual raise no alarm."""
        return cls("imprecision", [(fault, weight) for fault, weight in faults if fault.kind == "noise"], 1.0)


@dataclass(frozen=True, slots=True)
class Found:
    """What a search gave.

    Attributes
    ----------
    watch
        What was looked for.
    chosen
        The winner, its baseline fitted on all training days.
    first, first_score
        Everything that was compared in the first round, c of them, and the scores at r onsets, (c, r).
    finalists, score, winner
        The last round likewise, and the winner's place in it.
    rounds
        Of each round: how many were compared, at how many onsets of each fault.
    """

    watch: Watch
    chosen: Runner
    first: list[Runner]
    first_score: Floats
    finalists: list[Runner]
    score: Floats
    winner: int
    rounds: tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True)
class MonitorSearch:
    """A search on a proving ground; `expected` is how many alarms the budget allows on the training days."""

    ground: ProvingGround
    watch: Watch
    by_hand: ByHand
    grid: Grid
    expected: float

    def run(self) -> Found | None:
        """Find the monitor; None if no candidate has a tail from which limits can be learned."""
        first = self._limited(self._candidates())
        if not first:
            return None
        onsets = self.ground.early_onsets(FIRST_ONSETS, FIRST_HORIZON_DAYS)
        first_score = self.ground.scores(first, self.watch.faults, onsets)
        rounds = [(len(first), len(onsets.at))]
        left = best_of(first, first_score, SECOND_ROUND)
        if len(left) > 2 * FINALISTS:
            onsets = self.ground.early_onsets(SECOND_ONSETS, SECOND_HORIZON_DAYS)
            rounds.append((len(left), len(onsets.at)))
            left = best_of(left, self.ground.scores(left, self.watch.faults, onsets), FINALISTS)
        finalists = self._with_and_without_baseline(left)
        if not finalists:
            return None
        onsets = self.ground.last_onsets(self.watch.faults)
        score = self.ground.scores(finalists, self.watch.faults, onsets)
        rounds.append((len(finalists), len(onsets.at)))
        winner = simplest_near_best(finalists, score)
        chosen = self._refitted(finalists[winner])
        if chosen is None:
            return None
        return Found(self.watch, chosen, first, first_score, finalists, score, winner, tuple(rounds))

    def _candidates(self) -> list[Candidate]:
        around, training = self.ground.around, self.ground.training
        choices = preparations(training.value, around.analyte.step, around.random("transform"), self.grid)
        families = self.grid.watching(self.watch.watches)
        return self.by_hand.candidates(self.by_hand.preparations(choices), len(training) // WINDOWS, families)

    def _limited(self, given: Sequence[Candidate]) -> list[Runner]:
        return limited(self.ground.training, given, self.expected, self.watch.upper)

    def _with_and_without_baseline(self, plain: list[Runner]) -> list[Runner]:
        """The finalists as they are, and adjusted for patient mix, unless one of the two is wanted."""
        if self.by_hand.baseline is False:
            return plain
        given = with_baseline([one.candidate for one in plain], self.ground.training, self.ground.choose_at)
        adjusted = self._limited(given)
        return adjusted if self.by_hand.baseline else plain + adjusted

    def _refitted(self, chosen: Runner) -> Runner | None:
        """The chosen candidate with its baseline fitted on all training days."""
        plain = replace(chosen.candidate, preparation=replace(chosen.candidate.preparation, baseline=None))
        if chosen.candidate == plain:
            return chosen
        training = self.ground.training
        again = self._limited(with_baseline([plain], training, len(training)))
        return again[0] if again else None


def with_baseline(given: Sequence[Candidate], training: Stretch, until: int) -> list[Candidate]:
    """The same candidates with a patient-mix baseline, fitted once for each preparation, on the first `until` results."""
    mix = training.mix.rows(slice(0, until))
    fitted = {
        plain: fit_baseline(plain.transformed(training.value[:until], training.censor[:until]), mix)
        for plain in {candidate.preparation for candidate in given}
    }
    return [replace(c, preparation=replace(c.preparation, baseline=fitted[c.preparation])) for c in given]
