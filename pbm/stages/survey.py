"""Survey: what each stream's results look like, what is odd about them, and a first judgement of whether a monitor is likely to pay."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from pbm.errors import InputError
from pbm.methods.autocorrelation import autocorrelation, effective_size
from pbm.methods.candidates import QUICK_GRID, preparations
from pbm.methods.chain import Preparation
from pbm.methods.clock_time import HOURS_A_WEEK
from pbm.methods.jit import Floats, Integers
from pbm.methods.split import first_held_out_day
from pbm.methods.survey_judgement import (
    FEWEST_ADMITTED,
    NEAR_BEST,
    Choice,
    best_choice,
    choices,
    later_alarms,
    with_baseline,
)
from pbm.methods.survey_pattern import group_means, share_of_variance
from pbm.methods.trials import Stretch
from pbm.records.laboratory import Lab
from pbm.records.stream import StreamHistory
from pbm.records.survey import Dependence, LaterThird, Needed, Pattern, StreamSurvey, Truncation
from pbm.stages.surroundings import Surroundings
from pbm.stages.survey_parts import Observed, iso_day
from pbm.stages.survey_words import first_judgement, oddities

LARGEST = 1e60  # its fourth power is still a number


def survey_stream(
    history: StreamHistory,
    patient: Integers,
    lab: Lab,
    seed: int,
    lot: Integers | None = None,
    lots: Sequence[str] = (),
) -> StreamSurvey:
    """Look at one stream.

    Parameters
    ----------
    history
        All results of the stream, at least one.
    patient : (n,)
        A number for each patient, below 0 where not known.
    lot : (n,), optional
        Place in `lots` of each result's reagent lot, below 0 where not known.
    lots
        Names of the lots.
    lab
        The laboratory.
    seed
        Master seed; the same seed gives the same survey.

    Raises
    ------
    InputError
        If the laboratory does not know the analyte, or a result is too large to reckon with.
    """
    if history.name.analyte not in lab.analytes:
        raise InputError(
            f"lab.toml has no analyte {history.name.analyte}, of which the history holds results. Describe it there, or delete history/ "
            "and take the extracts again with `pbm intake`."
        )
    if (highest := float(np.abs(history.value).max())) > LARGEST:
        raise InputError(
            f"A result of {history.name} is {highest:g}, which no method measures. Say in lab.toml what is `plausible`, delete history/ "
            "and take the extracts again with `pbm intake`."
        )
    around = Surroundings.of(history.name, lab, seed)
    seen = Observed.of(history, around.analyte, lab.laboratory.zone)
    known = np.full(len(history), -1) if lot is None else lot
    return _Survey(around, seen, around.stretch(history)).of_stream(patient, known, lots)


@dataclass(frozen=True)
class _Survey:
    """The work on one stream."""

    around: Surroundings
    seen: Observed
    stretch: Stretch

    def of_stream(self, patient: Integers, lot: Integers, names: Sequence[str]) -> StreamSurvey:
        unit, medians = self.around.analyte.unit, self.seen.daily_medians()
        volume, distribution, performance = self.seen.volume(), self.seen.distribution(), self.seen.performance()
        gaps, slips, steady = tuple(self.seen.gaps()), tuple(self.seen.slips(medians)), tuple(self.seen.steady())
        months, repeats, needed = tuple(self.seen.months(self._admitted)), self.seen.repeats(patient), self._needed()
        pattern, dependence, later = self._pattern(), self._dependence(), self._later_third()
        lots = tuple(self.seen.lots(lot, names, self._admitted, self.around.random("lots")))
        judged = first_judgement(volume, distribution, performance, needed, unit)
        odd = oddities(
            volume, distribution, gaps, slips, steady, repeats, pattern, dependence, later, months, lots, unit
        )
        return StreamSurvey(
            stream=str(self.around.name),
            unit=unit,
            verdict=judged.verdict,
            reason=judged.reason,
            budget_per_day=self._budget,
            oddities=tuple(odd),
            volume=volume,
            gaps=gaps,
            distribution=distribution,
            performance=performance,
            repeats=repeats,
            slips=slips,
            steady=steady,
            daily_medians=tuple(None if math.isnan(median) else median for median in medians.tolist()),
            months=months,
            lots=lots,
            pattern=pattern,
            dependence=dependence,
            later_third=later,
            needed=needed,
            suggested=self._choices.index(self._suggested) if self._suggested else None,
            truncations=tuple(_truncation(choice) for choice in self._choices),
        )

    @property
    def _budget(self) -> float:
        return self.around.lab.budget_of(self.around.name.analyte).per_day

    @cached_property
    def _choices(self) -> list[Choice]:
        """Every truncation and transform, weighed; none where the results are too few or do not vary."""
        x, days = self.stretch.value, self.seen.days
        if len(x) < FEWEST_ADMITTED or np.ptp(x) == 0:
            return []
        per_day = len(x) / float(days.max() - days.min() + 1)
        given = preparations(x, self.around.analyte.step, self.around.random("transform"), QUICK_GRID)
        return choices(self.stretch, given, per_day / self._budget)

    @cached_property
    def _suggested(self) -> Choice | None:
        return best_choice(self._choices)

    @cached_property
    def _with_baseline(self) -> Choice | None:
        return with_baseline(self.stretch, self._suggested) if self._suggested else None

    @cached_property
    def _z(self) -> Floats:
        """Results with the suggested preparation, as they are where there is none."""
        return self.stretch.prepared(self._preparation)

    @property
    def _preparation(self) -> Preparation:
        return self._suggested.preparation if self._suggested else Preparation()

    @cached_property
    def _admitted(self) -> np.ndarray[tuple[int], np.dtype[np.bool_]]:
        taken: np.ndarray[tuple[int], np.dtype[np.bool_]] = ~np.isnan(self._z)
        return taken

    def _needed(self) -> Needed | None:
        if self._suggested is None or self._with_baseline is None:
            return None
        pays = NEAR_BEST * self._with_baseline.needed() < self._suggested.needed()
        best = self._with_baseline if pays else self._suggested
        return Needed(half=best.needed(0.5), one=best.needed(), two=best.needed(2.0), baseline=pays)

    def _pattern(self) -> Pattern | None:
        if self._suggested is None:
            return None
        z, mix = self._z[self._admitted], self.stretch.mix.rows(self._admitted)
        means = group_means(z, mix.hour, HOURS_A_WEEK).tolist()
        return Pattern(
            hour_of_day=share_of_variance(z, mix.hour % 24),
            weekday=share_of_variance(z, mix.hour // 24),
            hour_of_week=share_of_variance(z, mix.hour),
            ward=share_of_variance(z, mix.ward),
            means=tuple(None if math.isnan(mean) else self._preparation.back(mean) for mean in means),
        )

    def _dependence(self) -> Dependence | None:
        if self._suggested is None or self._with_baseline is None:
            return None
        z = self._z[self._admitted]
        r = autocorrelation(z)
        return Dependence(
            autocorrelation=tuple(r.tolist()),
            effective=effective_size(len(z), r),
            inflation=self._suggested.inflation,
            inflation_without_mix=self._with_baseline.inflation,
        )

    def _later_third(self) -> LaterThird | None:
        days, needed = self.seen.days, self._needed()
        if len(np.unique(days)) < 2 or needed is None or self._suggested is None or self._with_baseline is None:
            return None
        first = first_held_out_day(days)
        choice = self._with_baseline if needed.baseline else self._suggested
        z, later = self.stretch.prepared(choice.preparation), days >= first
        found = later_alarms(z[~later], z[later], choice)
        if found is None:
            return None
        before, after = (self.stretch.value[self._admitted & part] for part in (~later, later))
        return LaterThird(
            first_day=iso_day(first),
            mean_before=float(before.mean()),
            mean_after=float(after.mean()),
            spread_before=float(before.std()),
            spread_after=float(after.std()),
            alarms=found.alarms,
            alarms_at_least=found.alarms_at_least,
        )


def _truncation(choice: Choice) -> Truncation:
    preparation, needed = choice.preparation, choice.needed()
    return Truncation.model_validate(
        {
            "low": preparation.low if math.isfinite(preparation.low) else None,
            "high": preparation.high if math.isfinite(preparation.high) else None,
            "mode": "winsorize" if preparation.winsorize else "truncate",
            "transform": preparation.transform,
            "transform_lambda": preparation.transform_lambda if preparation.transform == "boxcox" else None,
            "admitted": choice.admitted,
            "moved": choice.moved / choice.spread,
            "needed": needed if math.isfinite(needed) else None,
        }
    )
