"""What a survey reads off the results themselves, before any judgement: volume, gaps, distribution, repeats, slips, runs, months."""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from functools import cached_property
from zoneinfo import ZoneInfo

import numpy as np
from scipy.stats import skew

from pbm.methods.clock_time import MICROSECONDS_PER_DAY, local_microseconds
from pbm.methods.jit import Floats, Integers
from pbm.methods.lot_steps import lot_steps
from pbm.methods.repeats import count_repeats
from pbm.methods.steady_runs import find_steady_runs
from pbm.methods.steps import quantiles_within_steps, reported_step
from pbm.methods.survey_volume import Gap as FoundGap
from pbm.methods.survey_volume import rates_and_gaps
from pbm.methods.unit_slips import CONVERSIONS, find_unit_slips
from pbm.records.laboratory import Analyte
from pbm.records.stream import StreamHistory
from pbm.records.survey import (
    Distribution,
    Gap,
    Histogram,
    Lot,
    Month,
    PatientRepeats,
    Performance,
    Slip,
    Steady,
    Volume,
)
from pbm.stages.from_plan import error_model

EPOCH = date(1970, 1, 1)
FEWEST_A_DAY = 5  # for a daily median
PARTS = 48  # of a histogram
QUANTILES = (0.0, 0.025, 0.25, 0.5, 0.75, 0.975, 1.0)
NORMAL_MIDDLE_HALF = 1.349  # SD between the quartiles of a normal distribution


def iso_day(day: int) -> str:
    """A day counted from 1970-01-01 as ISO 8601 writes it."""
    return (EPOCH + timedelta(day)).isoformat()


@dataclass(frozen=True)
class Observed:
    """A stream's results with its clock.

    Attributes
    ----------
    local, days : (n,)
        Wall-clock microseconds and local day of each result.
    """

    history: StreamHistory
    analyte: Analyte
    zone: ZoneInfo
    local: Integers
    days: Integers

    @classmethod
    def of(cls, history: StreamHistory, analyte: Analyte, zone: ZoneInfo) -> "Observed":
        """From a history."""
        local = local_microseconds(history.time, zone)
        return cls(history, analyte, zone, local, local // MICROSECONDS_PER_DAY)

    def at(self, index: int) -> str:
        """Local time of a result."""
        return datetime.fromtimestamp(int(self.history.time[index]) / 1e6, self.zone).strftime("%Y-%m-%d %H:%M")

    @cached_property
    def hours(self) -> tuple[Floats, list[FoundGap]]:
        """Mean results in each hour of the week, and the gaps."""
        return rates_and_gaps(self.local)

    def volume(self) -> Volume:
        """How many results, and when."""
        first, last, (rates, _) = int(self.days.min()), int(self.days.max()), self.hours
        return Volume(
            results=len(self.days),
            first_day=iso_day(first),
            last_day=iso_day(last),
            days=last - first + 1,
            days_with_results=len(np.unique(self.days)),
            per_day=len(self.days) / (last - first + 1),
            by_hour_of_week=tuple(rates.tolist()),
            by_weekday=tuple(rates.reshape(7, 24).sum(axis=1).tolist()),
        )

    def gaps(self) -> Iterator[Gap]:
        """Stretches without results."""
        for gap in self.hours[1]:
            yield Gap(begin=self.at(gap.before), hours=gap.hours, expected=gap.expected)

    def distribution(self) -> Distribution:
        """How the results lie."""
        x, censor, step = self.history.value, self.history.censor, self.analyte.step
        quantiles = [float(q) for q in np.quantile(x, QUANTILES)]
        names = ("lowest", "p2_5", "p25", "median", "p75", "p97_5", "highest")
        return Distribution(
            **dict(zip(names, quantiles, strict=True)),
            mean=float(x.mean()),
            spread=float(x.std()),
            skewness=_skewness(x),
            distinct=len(np.unique(x)),
            censored_below=float((censor < 0).mean()),
            censored_above=float((censor > 0).mean()),
            not_positive=int((x <= 0).sum()),
            step_found=reported_step(x[censor == 0]),
            step_stated=step,
            histogram=histogram(x, step),
        )

    def performance(self) -> Performance:
        """Imprecision against allowable error, at the median."""
        x, error = self.history.value, error_model(self.analyte)
        typical = np.array(np.median(x))
        tea, sd = float(error.tea(typical)), float(error.sd(typical))
        spread = (
            float(np.subtract(*quantiles_within_steps(x, self.analyte.step, np.array([0.75, 0.25]))))
            / NORMAL_MIDDLE_HALF
        )
        return Performance(
            allowable_error=tea,
            analytic_sd=sd,
            sigma=tea / sd if sd > 0 else None,
            patient_to_analytic=spread / sd if sd > 0 else None,
        )

    def repeats(self, patient: Integers) -> PatientRepeats | None:
        """Repeats of one patient; `patient` (n,) is a number for each, below 0 where not known."""
        known = patient >= 0
        if not known.any():
            return None
        found = count_repeats(self.history.time[known], patient[known], self.history.value[known])
        return PatientRepeats(
            known=found.known / len(patient),
            within_day=found.within_day,
            within_week=found.within_week,
            ever=found.ever,
            most=found.most,
            most_spread=found.most_spread,
        )

    def daily_medians(self) -> Floats:
        """For each calendar day from the first, shape (d,); not a number with fewer than five results."""
        first = int(self.days.min())
        medians = np.full(int(self.days.max()) - first + 1, math.nan)
        for day, x in _by(self.days, self.history.value):
            if len(x) >= FEWEST_A_DAY:
                medians[day - first] = float(np.median(x))
        return medians

    def slips(self, medians: Floats) -> Iterator[Slip]:
        """Unit slips among the daily medians."""
        for slip in find_unit_slips(medians):
            yield Slip(
                day=iso_day(int(self.days.min()) + slip.day),
                before=slip.before,
                after=slip.after,
                factor=slip.factor,
                units=CONVERSIONS[slip.factor],
            )

    def steady(self) -> Iterator[Steady]:
        """Runs of near-identical results among those that are not censored."""
        taken = np.flatnonzero(self.history.censor == 0)
        x = self.history.value[taken]
        for run in find_steady_runs(x, error_model(self.analyte).sd(x), self.analyte.step):
            count = run.last - run.first + 1
            yield Steady(begin=self.at(int(taken[run.first])), results=count, lowest=run.lowest, highest=run.highest)

    def months(self, admitted: np.ndarray[tuple[int], np.dtype[np.bool_]]) -> Iterator[Month]:
        """Month by month, of the admitted results."""
        stamp = self.days[admitted].astype("datetime64[D]").astype("datetime64[M]").astype(np.int64)
        for month, x in _by(stamp, self.history.value[admitted]):
            yield Month(
                month=f"{1970 + month // 12}-{month % 12 + 1:02}",
                results=len(x),
                median=float(np.median(x)),
                mean=float(x.mean()),
                spread=float(x.std(ddof=1)) if len(x) > 1 else None,
            )

    def lots(
        self,
        lot: Integers,
        names: Sequence[str],
        admitted: np.ndarray[tuple[int], np.dtype[np.bool_]],
        random: np.random.Generator,
    ) -> Iterator[Lot]:
        """Reagent lot by reagent lot, of the admitted results; `lot` (n,) is the place in `names` of each result's."""
        x, days = self.history.value[admitted], self.days[admitted]
        if not len(x):
            return
        tea = float(error_model(self.analyte).tea(np.array(np.median(x))))
        for one in lot_steps(x, lot[admitted], days, random):
            yield Lot(
                lot=names[one.code],
                first_day=iso_day(int(days[one.at[0]])),
                last_day=iso_day(int(days[one.at[-1]])),
                results=len(one.at),
                median=float(np.median(x[one.at])),
                mean=float(x[one.at].mean()),
                step=one.step / tea if one.step is not None and tea > 0 else None,
                step_interval=(one.interval[0] / tea, one.interval[1] / tea) if one.interval and tea > 0 else None,
            )


def _skewness(x: Floats) -> float | None:
    """Skewness; none where the results do not vary, or by too little to tell it from rounding."""
    if np.ptp(x) <= 1e-12 * np.abs(x).max():
        return None
    found = float(skew(x))
    return found if math.isfinite(found) else None


def histogram(x: Floats, step: float) -> Histogram:
    """Counts of the middle 99 % in parts of as many steps as make about fifty of them."""
    low, high = np.quantile(x, [0.005, 0.995], method="nearest")
    width = step * max(1, math.ceil((high - low) / step / PARTS))
    parts = math.floor((high - low) / width) + 1
    edges = low - step / 2 + width * np.arange(parts + 1)
    counts, _ = np.histogram(x, edges)
    return Histogram(
        edges=tuple(edges.tolist()),
        counts=tuple(counts.tolist()),
        below=int((x < edges[0]).sum()),
        above=int((x > edges[-1]).sum()),
    )


def _by(label: Integers, x: Floats) -> Iterator[tuple[int, Floats]]:
    """The values of each label, in order of the labels."""
    order = np.argsort(label, kind="stable")
    labels, first = np.unique(label[order], return_index=True)
    yield from zip(labels.tolist(), np.split(x[order], first[1:]), strict=True)
