"""What a survey found: for each stream what its results look like, what is odd about them, and whether a monitor is likely to pay.

This is also the documented content of `reports/survey.json`; `version` rises when its shape changes.
"""

from typing import Annotated, Literal

from pydantic import Field

from pbm.records.figures import Found
from pbm.records.plan import Verdict


class Volume(Found):
    """How many results, and when.

    Attributes
    ----------
    results
        All of them.
    first_day, last_day
        Local days.
    days, days_with_results
        Calendar days from the first to the last, and those that have results.
    per_day
        Results a calendar day.
    by_hour_of_week
        Mean results in each of the 168 hours from Monday 00:00, outside gaps.
    by_weekday
        Mean results a day from Monday to Sunday, outside gaps.
    """

    results: int
    first_day: str
    last_day: str
    days: int
    days_with_results: int
    per_day: float
    by_hour_of_week: tuple[float, ...]
    by_weekday: tuple[float, ...]


class Gap(Found):
    """A stretch without results that its hours' own history makes unlikely.

    Attributes
    ----------
    begin
        Local time of the last result before it.
    hours
        Its length.
    expected
        Results that its hours usually have.
    """

    begin: str
    hours: float
    expected: float


class Histogram(Found):
    """Counts between equally spaced edges, in whole steps; what lies outside is counted apart.

    Attributes
    ----------
    edges
        One more than counts.
    counts
        Results in each part.
    below, above
        Results outside.
    """

    edges: tuple[float, ...]
    counts: tuple[int, ...]
    below: int
    above: int


class Distribution(Found):
    """How the results lie; a censored one counts at the limit that was printed.

    Attributes
    ----------
    lowest, p2_5, p25, median, p75, p97_5, highest
        Quantiles.
    mean, spread
        Mean and SD.
    skewness
        Of the results; none where they do not vary.
    distinct
        Different values.
    censored_below, censored_above
        Share reported as "less than" and "greater than".
    not_positive
        Results at or below 0.
    step_found
        Step in which they are reported, found in them; none with fewer than five different values.
    step_stated
        The step of `lab.toml`.
    histogram
        Counts.
    """

    lowest: float
    p2_5: float
    p25: float
    median: float
    p75: float
    p97_5: float
    highest: float
    mean: float
    spread: float
    skewness: float | None
    distinct: int
    censored_below: float
    censored_above: float
    not_positive: int
    step_found: float | None
    step_stated: float
    histogram: Histogram

    @property
    def step_agrees(self) -> bool:
        """Whether the step found is the one stated, as far as it can be told."""
        return self.step_found is None or abs(self.step_found - self.step_stated) < 1e-6 * self.step_stated


class Pattern(Found):
    """Which share of the variance of the admitted, transformed results belongs to what is known beforehand.

    Attributes
    ----------
    hour_of_day, weekday, hour_of_week, ward
        Share of the variance explained, less what chance alone would.
    means
        Mean of each hour of the week in the result's unit (transformed back); none where there is no result.
    """

    hour_of_day: float
    weekday: float
    hour_of_week: float
    ward: float
    means: tuple[float | None, ...]


class Dependence(Found):
    """How much successive admitted results hang together.

    Attributes
    ----------
    autocorrelation
        At lags 1, 2, ... results.
    effective
        Independent results that all of them are worth, for their mean.
    inflation
        Variance of a mean of 50 successive results over what independence would give.
    inflation_without_mix
        The same with the expected value by ward and hour of the week taken away.
    """

    autocorrelation: tuple[float, ...]
    effective: float
    inflation: float
    inflation_without_mix: float


class PatientRepeats(Found):
    """Repeats of one patient, among the results that name their patient.

    Attributes
    ----------
    known
        Share of the results that name their patient.
    within_day, within_week, ever
        Share that follow an earlier result of the same patient within a day, within a week, at any time.
    most
        Results of the patient who has the most.
    most_spread
        Their SD.
    """

    known: float
    within_day: float
    within_week: float
    ever: float
    most: int
    most_spread: float


class Slip(Found):
    """A step of the daily median near the factor of a conversion of units.

    Attributes
    ----------
    day
        The first day on the new level.
    before, after
        Medians.
    factor
        The conversion's.
    units
        Between which units it converts.
    """

    day: str
    before: float
    after: float
    factor: float
    units: str


class Steady(Found):
    """A run of near-identical results, such as control material in disguise or one specimen sent again and again.

    Attributes
    ----------
    begin
        Local time of its first result.
    results
        How many.
    lowest, highest
        All of them lie between.
    """

    begin: str
    results: int
    lowest: float
    highest: float


class Month(Found):
    """One month.

    Attributes
    ----------
    month
        Year and month.
    results
        How many.
    median, mean, spread
        Of the admitted results; the spread is their SD, none for a single one.
    """

    month: str
    results: int
    median: float
    mean: float
    spread: float | None


class Lot(Found):
    """One reagent lot, of the results that the suggested truncation admits.

    Attributes
    ----------
    lot
        As the extract names it.
    first_day, last_day
        Days of its first and last result.
    results
        How many.
    median, mean
        Of its results.
    step
        Its mean less that of the lot before, in TEa at the median of all; none for the first.
    step_interval
        90 % interval of it; days are drawn again as wholes.
    """

    lot: str
    first_day: str
    last_day: str
    results: int
    median: float
    mean: float
    step: float | None
    step_interval: tuple[float, float] | None


class LaterThird(Found):
    """The last third of the days, which `pbm tune` holds out, against what came before.

    Attributes
    ----------
    first_day
        Its first day.
    mean_before, mean_after, spread_before, spread_after
        Of the admitted results, in the result's unit.
    alarms
        How many times the budget limits learned before would alarm in it, by closed form.
    alarms_at_least
        The same with allowance for two standard errors of both parts.
    """

    first_day: str
    mean_before: float
    mean_after: float
    spread_before: float
    spread_after: float
    alarms: float
    alarms_at_least: float


class Truncation(Found):
    """A candidate of truncation and transform with what it keeps.

    Attributes
    ----------
    low, high
        Truncation limits; none for an open side.
    mode
        What happens to a result outside.
    transform, transform_lambda
        Its name, and the exponent of Box-Cox.
    admitted
        Share of the results that the statistic takes.
    moved
        Movement of their mean under a shift of 1 TEa, in their own SD.
    needed
        Results until the best statistic sees 1 TEa; none if never.
    """

    low: float | None
    high: float | None
    mode: Literal["truncate", "winsorize"]
    transform: Literal["none", "log", "boxcox"]
    transform_lambda: float | None
    admitted: float
    moved: float
    needed: float | None


class Performance(Found):
    """What the method's imprecision leaves of the allowable error, at the median result.

    Attributes
    ----------
    allowable_error, analytic_sd
        TEa and analytic SD, in the result's unit.
    sigma
        (TEa - bias) / SD with a bias of 0, since `lab.toml` knows none; none where the SD is 0.
    patient_to_analytic
        SD of the results (middle half, as of a normal distribution) over the analytic SD; none where that is 0.
    """

    allowable_error: float
    analytic_sd: float
    sigma: float | None
    patient_to_analytic: float | None


class Needed(Found):
    """Results that the best statistic needs to see a shift, by closed form, with the suggested preparation.

    Attributes
    ----------
    half, one, two
        For a shift of 0.5, 1 and 2 TEa.
    baseline
        Whether ward and hour of the week are taken away first.
    """

    half: float
    one: float
    two: float
    baseline: bool


class Oddity(Found):
    """Something to look at before a monitor is chosen.

    Attributes
    ----------
    short
        In as few words as a table bears.
    words
        What was found and what to do.
    grave
        Whether figures of this stream may mislead until it is cleared up.
    """

    short: str
    words: str
    grave: bool = False


class StreamSurvey(Found):
    """One stream.

    Attributes
    ----------
    stream
        Its name.
    unit
        Of its results.
    verdict, reason
        The first judgement and why.
    budget_per_day
        False alarms a day.
    oddities
        What to look at.
    volume
        How many results, and when.
    gaps
        Stretches without results, in order of time.
    distribution
        How the results lie.
    performance
        Imprecision against allowable error.
    repeats
        Of one patient; none where the history does not tell patients.
    slips
        Unit slips.
    steady
        Runs of near-identical results.
    daily_medians
        For each calendar day from the first; none on days with fewer than five results.
    months
        Month by month.
    lots
        Reagent lot by reagent lot, in order of first use; none where the history does not tell them.
    pattern, dependence
        Of the results with the suggested preparation; none where they are too few or do not vary.
    later_third
        Against what came before; none where there is too little of either.
    needed
        Results needed; none where no candidate sees a shift.
    suggested
        Place of the suggested preparation among the candidates; none without one.
    truncations
        The candidates.
    """

    stream: str
    unit: str
    verdict: Verdict
    reason: str
    budget_per_day: float
    oddities: tuple[Oddity, ...]
    volume: Volume
    gaps: tuple[Gap, ...]
    distribution: Distribution
    performance: Performance
    repeats: PatientRepeats | None
    slips: tuple[Slip, ...]
    steady: tuple[Steady, ...]
    daily_medians: tuple[float | None, ...]
    months: tuple[Month, ...]
    lots: tuple[Lot, ...]
    pattern: Pattern | None
    dependence: Dependence | None
    later_third: LaterThird | None
    needed: Needed | None
    suggested: int | None
    truncations: tuple[Truncation, ...]


class Survey(Found):
    """All of `survey.json`.

    Attributes
    ----------
    version
        Of this layout.
    made_by
        Version of the tool.
    laboratory
        Its name.
    seed
        Master seed.
    history_sha256, lab_sha256
        What was surveyed: the history and `lab.toml`.
    streams
        The streams.
    """

    version: Annotated[int, Field(ge=1)] = 2
    made_by: str
    laboratory: str
    seed: int
    history_sha256: str
    lab_sha256: str
    streams: tuple[StreamSurvey, ...]
