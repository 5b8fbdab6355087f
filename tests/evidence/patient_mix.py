"""What the patient-mix baseline is worth: results needed to see a shift of a quarter of TEa, with and without it.

Run as `python -m tests.evidence.patient_mix` at the top of the tree: some minutes later it writes a section for docs/evidence/tuning.md.
"""

import sys
import tomllib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from pbm.methods.alarm import Limits, count_episodes
from pbm.methods.baseline import Baseline, Groups, Mix, fit_baseline
from pbm.methods.candidates import WHOLE_GRID
from pbm.methods.chain import Preparation, Tracker, tracker_for
from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.expected import follow
from pbm.methods.faults import Fault
from pbm.methods.in_control import inflation
from pbm.methods.jit import Floats, Integers
from pbm.methods.limits import quick_limits
from pbm.methods.seeds import child
from pbm.methods.trials import Stretch, Trial, draw_onsets, trial
from pbm.records.laboratory import Lab
from pbm.records.sex_and_age import age_band
from pbm.records.stream import StreamHistory, StreamName
from pbm.stages.surroundings import Surroundings
from synthetic_streams import Laboratory
from synthetic_streams.analytes import BY_KEY
from synthetic_streams.lab_file import lab_toml
from tests.evidence import sex_and_age

LAB = Lab.model_validate(tomllib.loads(lab_toml()))
DAYS, TRAINING_DAYS = 360, 240
LABORATORIES = tuple(range(1, 25))
ONSETS, FOLLOWED = 150, 6_000
SIZE = 0.25
BUDGET_PER_DAY = 1 / 30
RESAMPLES = 2_000
WITHOUT, WARD_AND_HOUR, WHOLE = "no baseline", "ward, hour", "ward, hour, sex, age"
WAYS = (WITHOUT, WARD_AND_HOUR, WHOLE)
OWN = "the best of them for each"
SODIUM = StreamName("sodium", "line-2")
ADMITTED = {
    SODIUM: Preparation(125, 155),
    StreamName("haemoglobin", "haem-1"): Preparation(70, 180),
    StreamName("creatinine", "line-1"): Preparation(30, 250, transform="log"),
}
# Of the parameters that `pbm tune` tries, those of a memory long enough for so small a shift.
LONG_MEMORY = {"ewma": lambda x: x <= 0.05, "mean": lambda x: x >= 80, "cusum": lambda x: x <= 0.3}
SHOWN = {"ewma": "EWMA", "mean": "moving mean", "cusum": "CUSUM"}
Option = tuple[str, float]
OPTIONS: tuple[Option, ...] = tuple(
    (family.statistic, parameter)
    for family in WHOLE_GRID.shift
    if family.statistic in LONG_MEMORY
    for parameter in family.parameters
    if LONG_MEMORY[family.statistic](parameter)
)


@dataclass(frozen=True)
class Judged:
    """A statistic on the days that fitted neither baseline nor limits.

    Attributes
    ----------
    needed
        Results from each onset to the alarm, for both signs; infinite where none comes in `FOLLOWED` results.
    false_alarms
        In 30 days.
    """

    needed: Floats
    false_alarms: float


@dataclass(frozen=True)
class Ground:
    """A stream as prepared in one way: in control, and under the shift at onsets in the training days and after them."""

    z: Floats
    at: int
    early: "Shifted"
    late: "Shifted"

    @classmethod
    def of(cls, stretch: Stretch, prepared: Preparation, at: int, seed: int) -> "Ground":
        """With the onsets that the seed gives, whichever the preparation."""
        last = len(stretch) - FOLLOWED // 4
        early = draw_onsets(at // 10, at - FOLLOWED // 4, ONSETS, child(seed, "early"))
        late = draw_onsets(at, last, ONSETS, child(seed, "late"))
        return cls(
            stretch.prepared(prepared), at, Shifted.of(stretch, prepared, early), Shifted.of(stretch, prepared, late)
        )

    def monitor(self, option: Option) -> tuple[Tracker, Limits]:
        """A statistic with centre and limits of the training days."""
        training = self.z[: self.at]
        tracker = tracker_for(training, *option)
        limits = quick_limits(tracker.path(training), tracker.centre, TRAINING_DAYS * BUDGET_PER_DAY)
        assert limits is not None
        return tracker, limits

    def needed_early(self, option: Option) -> float:
        """Median of the results needed on the training days."""
        return float(np.median(self.early.needed(self.z, *self.monitor(option))))

    def judged(self, option: Option) -> Judged:
        """A statistic on the held-out days."""
        tracker, limits = self.monitor(option)
        alarms = count_episodes(tracker.path(self.z)[self.at :], limits)
        return Judged(self.late.needed(self.z, tracker, limits), 30 * alarms / (DAYS - TRAINING_DAYS))


@dataclass(frozen=True)
class Shifted:
    """The shift in both directions at many onsets, as prepared."""

    onsets: Integers
    trials: tuple[tuple[Trial, Floats], ...]

    @classmethod
    def of(cls, stretch: Stretch, prepared: Preparation, onsets: Integers) -> "Shifted":
        """Inflict it."""
        far = follow(onsets, np.minimum(onsets + FOLLOWED, len(stretch)), np.zeros(0, dtype=np.int64), 1)
        tried = [trial(stretch, Fault("shift", SIZE, "TEa", sign), far, np.ones(2)) for sign in (-1, 1)]
        return cls(onsets, tuple((one, one.prepared(prepared)) for one in tried))

    def needed(self, z: Floats, tracker: Tracker, limits: Limits) -> Floats:
        """Results until the alarm."""
        standing = tracker.standing(z, limits, self.onsets)
        counts = [one.results_to_alarm(faulted, tracker, limits, standing) for one, faulted in self.trials]
        return np.concatenate([np.where(count > 0, count, np.inf) for count in counts])


def history(laboratory: Laboratory, name: StreamName) -> StreamHistory:
    """A stream of the invented laboratory as a history holds it."""
    sample = laboratory.sample(BY_KEY[name.analyte], name.analyser)
    people, who = laboratory.draws.patients, laboratory.draws.patient[sample.draw]
    sex = np.array(["F", "M"], dtype=object)[people.male[who].astype(np.int64)]
    bands = np.array([age_band(years) for years in range(int(people.age.max()) + 1)], dtype=object)
    return StreamHistory(
        name, sample.time, sample.value, sample.censor, sample.specimen, sample.ward, sex, bands[people.age[who]]
    )


def training_end(stretch: Stretch) -> int:
    """Index of the first held-out result."""
    return int(np.searchsorted(stretch.time, stretch.time[0] + TRAINING_DAYS * MICROSECONDS_PER_DAY))


def baselines(stretch: Stretch, plain: Preparation, at: int) -> dict[str, Baseline | None]:
    """Every way of adjusting, fitted on the training days."""
    y, mix = plain.transformed(stretch.value[:at], stretch.censor[:at]), stretch.mix.rows(slice(0, at))
    return {
        WITHOUT: None,
        WARD_AND_HOUR: fit_baseline(y, replace(mix, sex=None, age=None)),
        WHOLE: fit_baseline(y, mix),
    }


def judged(
    stretch: Stretch, plain: Preparation, seed: int, ways: Sequence[str] = WAYS
) -> dict[tuple[str, str], Judged]:
    """Each statistic, with the parameter that needs fewest results without a baseline on the training days; and each way's own best.

    Truncation, transform, budget and onsets are the same throughout.
    """
    at = training_end(stretch)
    fits = baselines(stretch, plain, at)
    grounds = {way: Ground.of(stretch, replace(plain, baseline=fits[way]), at, seed) for way in ways}
    early = {way: {option: ground.needed_early(option) for option in OPTIONS} for way, ground in grounds.items()}
    chosen = {
        (SHOWN[statistic], way): min((o for o in OPTIONS if o[0] == statistic), key=early[WITHOUT].__getitem__)
        for statistic in SHOWN
        for way in ways
    } | {(OWN, way): min(OPTIONS, key=early[way].__getitem__) for way in ways}
    return {(row, way): grounds[way].judged(option) for (row, way), option in chosen.items()}


@dataclass(frozen=True)
class Left:
    """Variance on held-out days, of single values and of means of many (in units of 1 / number)."""

    values: float
    means: float

    @classmethod
    def of(cls, z: Floats) -> "Left":
        """Of prepared values."""
        return cls(float(np.nanvar(z)), float(np.nanvar(z)) * inflation(z))


def variance_left(stretch: Stretch, plain: Preparation) -> list[Left]:
    """Without a baseline, by ward and hour, with added effects of sex and age, and with effects of age for each sex."""
    at, mix = training_end(stretch), stretch.mix
    y = plain.transformed(stretch.value, stretch.censor)
    assert mix.sex and mix.age
    names = tuple(f"{sex}, {age}" for sex in mix.sex.names for age in mix.age.names)
    crossed = replace(mix, sex=None, age=Groups(names, mix.sex.code * len(mix.age.names) + mix.age.code))
    tried: list[Mix] = [replace(mix, sex=None, age=None), mix, crossed]
    adjusted = [(y - fit_baseline(y[:at], one.rows(slice(0, at))).all(one))[at:] for one in tried]
    return [Left.of(z) for z in (y[at:], *adjusted)]


def reduction(without: Sequence[Floats], adjusted: Sequence[Floats]) -> float:
    """Share of the median results needed that the adjustment saves, over all laboratories."""
    return 1 - float(np.median(np.concatenate(adjusted)) / np.median(np.concatenate(without)))


def interval(without: Sequence[Floats], adjusted: Sequence[Floats]) -> tuple[float, float]:
    """95 % interval of the reduction: bootstrap over laboratories."""
    random = child(1, "patient mix")
    drawn = random.integers(0, len(without), (RESAMPLES, len(without)))
    found = [reduction([without[i] for i in row], [adjusted[i] for i in row]) for row in drawn.tolist()]
    low, high = np.quantile(found, [0.025, 0.975])
    return float(low), float(high)


Rows = Mapping[StreamName, list[dict[tuple[str, str], Judged]]]
Variances = Mapping[StreamName, list[list[Left]]]


def measured(seeds: Sequence[int]) -> tuple[Rows, Variances]:
    """Every stream in every laboratory."""
    rows: dict[StreamName, list[dict[tuple[str, str], Judged]]] = {name: [] for name in ADMITTED}
    variances: dict[StreamName, list[list[Left]]] = {name: [] for name in ADMITTED}
    for seed in seeds:
        laboratory = Laboratory(DAYS, seed=seed)
        for name, plain in ADMITTED.items():
            stretch = Surroundings.of(name, LAB, seed).stretch(history(laboratory, name))
            rows[name].append(judged(stretch, plain, seed))
            variances[name].append(variance_left(stretch, plain))
        sys.stderr.write(f"laboratory {seed}\n")
    return rows, variances


def section(seeds: Sequence[int] = LABORATORIES) -> Iterator[str]:
    """Lines of the section."""
    rows, variances = measured(seeds)
    yield from _needed(rows, len(seeds))
    yield from ("", _verdict(rows[SODIUM]), "")
    yield from _variances(variances)
    yield from ("", *sex_and_age.lines(), "")
    yield "Effects of age for each sex save next to nothing over added ones: the plan adds them."


def _needed(rows: Rows, laboratories: int) -> Iterator[str]:
    yield from f"""
## What the patient-mix baseline is worth

{laboratories} invented laboratories of {DAYS} days. Baseline, centre and limits are learned on the first {TRAINING_DAYS} days, for one
false alarm in 30 days. On the last {DAYS - TRAINING_DAYS} days, which fitted nothing, a shift of {SIZE:g} TEa begins at {ONSETS} onsets in
each laboratory, upwards and downwards. Truncation, transform, budget and onsets are the same with and without a baseline. Each statistic
has the parameter, of those that `pbm tune` tries, that needs fewest results *without* a baseline on the first {TRAINING_DAYS} days; in the
rows "{OWN}", statistic and parameter are chosen with the baseline as without it, on those days. Median of the results
needed; what the whole baseline saves, with a 95 % interval (bootstrap over laboratories); false alarms in 30 of the last days.
""".strip().splitlines()
    yield ""
    yield f"| stream | statistic | {WITHOUT} | {WARD_AND_HOUR} | {WHOLE} | saved | false alarms without, with |"
    yield "|---|---|---|---|---|---|---|"
    for name, of_stream in rows.items():
        for row in (*SHOWN.values(), OWN):
            yield f"| {name} | {row} | {' | '.join(_cells(of_stream, row))} |"


def _cells(of_stream: list[dict[tuple[str, str], Judged]], row: str) -> Iterator[str]:
    needed = {way: [one[row, way].needed for one in of_stream] for way in WAYS}
    yield from (f"{np.median(np.concatenate(needed[way])):.0f}" for way in WAYS)
    low, high = interval(needed[WITHOUT], needed[WHOLE])
    yield f"{reduction(needed[WITHOUT], needed[WHOLE]):.0%} ({low:.0%} to {high:.0%})"
    yield ", ".join(f"{np.mean([one[row, way].false_alarms for one in of_stream]):.2f}" for way in (WITHOUT, WHOLE))


def _verdict(of_sodium: list[dict[tuple[str, str], Judged]]) -> str:
    saved = {
        row: reduction([one[row, WITHOUT].needed for one in of_sodium], [one[row, WHOLE].needed for one in of_sodium])
        for row in (*SHOWN.values(), OWN)
    }
    kept = ", ".join(f"{row} {share:.0%}" for row, share in saved.items() if row != OWN)
    return (
        f"A third was asked for on sodium. It is {'' if saved[OWN] >= 1 / 3 else 'not '}saved where each has its own best monitor "
        f"({saved[OWN]:.0%}). With the parameter of the monitor without a baseline the savings are {kept}."
    )


def _variances(variances: Variances) -> Iterator[str]:
    yield from """
Variance of the last days that is left, in per cent of the variance without a baseline: of single values, and of the means of many values
(which also holds how far neighbours resemble each other). The last column gives each sex effects of age of its own.
""".strip().splitlines()
    yield ""
    yield f"| stream | {WARD_AND_HOUR} | {WHOLE} | {WARD_AND_HOUR}, sex x age |"
    yield "|---|---|---|---|"
    for name, of_stream in variances.items():
        cells = [
            f"{100 * np.mean([one[way].values / one[0].values for one in of_stream]):.1f}, "
            f"{100 * np.mean([one[way].means / one[0].means for one in of_stream]):.1f}"
            for way in (1, 2, 3)
        ]
        yield f"| {name} | {' | '.join(cells)} |"


if __name__ == "__main__":
    sys.stdout.write("\n".join(section()) + "\n")
