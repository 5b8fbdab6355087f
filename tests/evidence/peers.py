"""The plan's monitors against river's general drift detectors on raw results: results needed at 1 TEa, at the same alarm budget.

Run as `python -m tests.evidence.peers` at the top of the tree: some minutes later it writes a section for docs/evidence/tuning.md.
"""

import sys
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cache

import numpy as np

from pbm.methods.candidates import WHOLE_GRID, Grid
from pbm.methods.chain import Preparation
from pbm.methods.clock_time import local_days
from pbm.methods.expected import follow
from pbm.methods.faults import Fault
from pbm.methods.jit import Floats
from pbm.methods.peers import PEERS, Detector, PeerMonitor, calibrated
from pbm.methods.seeds import child
from pbm.methods.split import Split, first_held_out_day, split_at
from pbm.methods.trials import Stretch, Trial, draw_onsets, trial
from pbm.records.plan import MonitorPlan
from pbm.records.stream import StreamHistory, StreamName
from pbm.stages.appraise.watch import Running, Watch
from pbm.stages.from_plan import limits, preparation, tracker
from pbm.stages.surroundings import Surroundings
from pbm.stages.tune import tune_stream
from pbm.stages.words import monitor_in_brief
from synthetic_streams import Laboratory
from tests.evidence.patient_mix import LAB, history

SEED = 1
DAYS = 270  # two thirds of them allow a whole number of alarms
SIZE = 1.0
ONSETS, FOLLOWED = 50, 1_000
WARM_UP = 3_000  # results that a detector reads before the held-out days
DAYS_PER_ALARM = 30
STREAMS = (
    StreamName("sodium", "line-2"),
    StreamName("calcium", "line-1"),
    StreamName("creatinine", "line-1"),
)
# Last training days on which a detector is calibrated; all of them where none are given.
CALIBRATED_ON = {"kswin": 60}
STEPS = {"adwin": 14, "page-hinkley": 14, "kswin": 10}
PLAN = "the plan"
RESAMPLES = 2_000
RAW = Preparation()
HALF = 0.5
WIDER = tuple(1 + i / 100 for i in range(1, 200))


@dataclass(frozen=True)
class Raced:
    """What a monitor did on the held-out days.

    Attributes
    ----------
    title, setting
        What it is.
    needed : (2, r)
        Results from each onset to the alarm, for both signs; infinite where none comes in `FOLLOWED` results.
    false_alarms
        On the held-out days as they were.
    """

    title: str
    setting: str
    needed: Floats
    false_alarms: int

    @property
    def counted(self) -> Floats:
        """The same, with what was not found counted at the horizon."""
        return np.minimum(self.needed, FOLLOWED)

    @property
    def mean(self) -> float:
        """Mean results needed."""
        return float(self.counted.mean())

    @property
    def median(self) -> float:
        """Their median; infinite where most were not found."""
        return float(np.median(self.needed))

    @property
    def missed(self) -> float:
        """Share of the errors that were not found."""
        return float(np.isinf(self.needed).mean())


@dataclass(frozen=True)
class Course:
    """A stream with the shift of both signs at the same onsets, all on held-out days."""

    stretch: Stretch
    split: Split
    trials: tuple[Trial, ...]

    @classmethod
    def of(cls, given: StreamHistory) -> "Course":
        """Inflict the shift."""
        days = local_days(given.time, LAB.laboratory.zone)
        stretch, split = Surroundings.of(given.name, LAB, SEED).stretch(given), split_at(days, first_held_out_day(days))
        at = draw_onsets(split.at, len(stretch) - FOLLOWED, ONSETS, child(SEED, given.name, "peers"))
        far = follow(at, at + FOLLOWED, np.zeros(0, dtype=np.int64), 1)
        tried = tuple(trial(stretch, Fault("shift", SIZE, "TEa", sign), far, np.ones(2)) for sign in (-1, 1))
        return cls(stretch, split, tried)

    @property
    def allowed(self) -> float:
        """Alarms that the budget allows on the held-out days."""
        return self.split.held_out_days / DAYS_PER_ALARM

    def by_plan(self, monitors: Sequence[MonitorPlan]) -> Iterator[Raced]:
        """The first alarm of any monitor of the plan; and, if they overspend on the held-out days, so widened that they do not."""
        yield self._planned(monitors, 1.0)
        if self._planned(monitors, 1.0).false_alarms > self.allowed:
            wider = (self._planned(monitors, factor) for factor in WIDER)
            yield next(one for one in wider if one.false_alarms <= self.allowed)

    def _planned(self, monitors: Sequence[MonitorPlan], factor: float) -> Raced:
        watch = Watch(tuple(self._running(one, factor) for one in monitors))
        alarms = sum(one.alarms_since(self.split.at) for one in watch.monitors)
        needed = np.array([watch.results_to_alarm(one) for one in self.trials])
        title = PLAN if factor == 1 else f"{PLAN}, limits {factor - 1:.0%} wider"
        setting = " and ".join(monitor_in_brief(one) for one in monitors)
        return Raced(title, setting, np.where(needed > 0, needed, np.inf), alarms)

    def _running(self, monitor: MonitorPlan, factor: float) -> Running:
        given = limits(monitor)
        low, high = (given.centre + factor * (end - given.centre) for end in (given.low, given.high))
        within = given._replace(low=low, high=high)
        return Running.with_limits(preparation(monitor), tracker(monitor), within, self.stretch, self.trials[0].onsets)

    def by_peer(self, name: str) -> Raced:
        """A detector of river, calibrated on the last training days."""
        days = CALIBRATED_ON.get(name, self.split.training_days)
        first = int(np.searchsorted(self.split.days, self.split.days[self.split.at] - days))
        raw = self.stretch.prepared(RAW)
        monitor = calibrated(name, raw[first : self.split.at], days / DAYS_PER_ALARM, SEED, STEPS[name])
        begun = max(self.split.at - WARM_UP, 0)
        alarms = int((monitor.alarms(raw[begun:]) + begun >= self.split.at).sum())
        peer, states = PEERS[name], monitor.states_at(raw[begun:], self.trials[0].onsets.at - begun)
        setting = (
            f"{peer.sensitivity} {monitor.sensitivity:.3g}: at most {days / DAYS_PER_ALARM:g} alarms in {days} days"
        )
        needed = np.array([_needed(monitor, states, one) for one in self.trials])
        return Raced(peer.title, setting, needed, alarms)


def _needed(monitor: PeerMonitor, states: list[Detector], tried: Trial) -> Floats:
    found = monitor.first_alarms(tried.prepared(RAW), states, tried.starts, tried.ends)
    return np.where(found >= 0, found - tried.starts + 1, np.inf)


@dataclass(frozen=True)
class Race:
    """The plan's monitors and the detectors on one stream.

    Attributes
    ----------
    course
        Where they ran.
    plan
        As planned; and widened, if they overspend.
    peers
        Each detector by its name.
    """

    course: Course
    plan: tuple[Raced, ...]
    peers: dict[str, Raced]

    def ratio(self, peer: str) -> float:
        """Mean results that the plan needs for one of the detector: of the monitors as planned or as widened, the slower."""
        return max(one.mean for one in self.plan) / self.peers[peer].mean


@cache
def race(name: StreamName, peers: tuple[str, ...] = tuple(PEERS), days: int = DAYS, grid: Grid = WHOLE_GRID) -> Race:
    """Tune, calibrate and race on one stream."""
    given = history(Laboratory(days, seed=SEED), name)
    course = Course.of(given)
    plan = tuple(course.by_plan(tune_stream(given, LAB, SEED, grid=grid).plan.monitors))
    sys.stderr.write(f"{name}: tuned\n")
    return Race(course, plan, {peer: course.by_peer(peer) for peer in peers})


def interval(plan: Raced, peer: Raced) -> tuple[float, float]:
    """95 % interval of the ratio of mean results needed, plan to detector: bootstrap over onsets."""
    drawn = child(SEED, "ratio").integers(0, ONSETS, (RESAMPLES, ONSETS))
    ratios = plan.counted[:, drawn].mean(axis=(0, 2)) / peer.counted[:, drawn].mean(axis=(0, 2))
    low, high = np.quantile(ratios, [0.025, 0.975])
    return float(low), float(high)


def lines() -> Iterator[str]:
    """The section."""
    races = {name: race(name) for name in STREAMS}
    yield from f"""
One invented laboratory of {DAYS} days without errors. What `pbm tune` chooses on the first two thirds, patient mix and truncation
included, against general drift detectors of river on raw results. The budget is one false alarm in {DAYS_PER_ALARM} days for each.
Each detector has the keenest setting that on training days alarms no more often than the budget, all else as river has it; the part is so
long that the budget in it is a whole number. ADWIN and Page-Hinkley are set on all training days. KSWIN costs many times as much a
result and is set on the last {CALIBRATED_ON["kswin"]} of them: so few alarms tell its true rate only roughly, and its alarms on held-out
days are to be read beside its speed. Each detector has read {WARM_UP:,} results when those days begin. On them a shift of {SIZE:g} TEa
begins at {ONSETS} onsets, the same for all, upwards and downwards, and is followed for {FOLLOWED:,} results without control events. Mean
results until the alarm, what was not found counted as {FOLLOWED:,}, which favours whoever misses much; median; share never found; the
plan's mean to the detector's, with a 95 % interval (bootstrap over onsets); alarms on the held-out days without a shift. Where the plan's
monitors alarm there more often than the budget allows, they are tried again with limits so widened, by the least whole per cent, that they
do not: knowledge that no detector is given.
""".strip().splitlines()
    yield ""
    yield "| stream | monitor | setting | mean | median | never found | plan to it | alarms (allowed) |"
    yield "|---|---|---|---|---|---|---|---|"
    for name, one in races.items():
        yield from (_row(name, one, raced) for raced in (*one.plan, *one.peers.values()))
    yield from ("", *_verdict(races))


def _row(name: StreamName, one: Race, raced: Raced) -> str:
    ratio = "" if raced in one.plan else " / ".join(_ratio(plan, raced) for plan in one.plan)
    title = f"**{raced.title}**" if raced in one.plan else raced.title
    median = f"{raced.median:.0f}" if np.isfinite(raced.median) else f"over {FOLLOWED:,}"
    cells = (
        *(str(name), title, raced.setting, f"{raced.mean:.1f}", median, f"{raced.missed:.0%}", ratio),
        f"{raced.false_alarms} ({one.course.allowed:.1f})",
    )
    return f"| {' | '.join(cells)} |"


def _ratio(plan: Raced, peer: Raced) -> str:
    low, high = interval(plan, peer)
    return f"{plan.mean / peer.mean:.2f} ({low:.2f} to {high:.2f})"


def _verdict(races: Mapping[StreamName, Race]) -> Iterator[str]:
    """What was asked for, and whether it is so, by the means; and what the medians say."""
    yield "Asked for: at most half the results of ADWIN and of KSWIN, and fewer than Page-Hinkley, on every stream. By the means:"
    yield ""
    for name, one in races.items():
        told = (
            f"{PEERS[peer].title} {'yes' if met(one, peer) else '**no**'} ({one.ratio(peer):.2f})" for peer in PEERS
        )
        yield f"- {name}{', with the wider limits' if len(one.plan) > 1 else ''}: {', '.join(told)}"
    yield from ("", "By the medians, in which it does not matter how long one who misses is followed:", "")
    for name, one in races.items():
        slower = max(raced.median for raced in one.plan)
        told = (
            f"{peer.title} {slower / min(peer.median, FOLLOWED):.2f}{'' if np.isfinite(peer.median) else ' or less'}"
            for peer in one.peers.values()
        )
        yield f"- {name}: {', '.join(told)}"
    yield from """
ADWIN looks at every 32nd result only. KSWIN compares its latest 30 results with some of the 70 before them: an error older than that is in
both, and what is not found soon is found only by chance.
""".rstrip().splitlines()


def met(one: Race, peer: str) -> bool:
    """Whether the plan needs at most half the results of ADWIN or KSWIN, or fewer than Page-Hinkley."""
    return one.ratio(peer) < 1 if peer == "page-hinkley" else one.ratio(peer) <= HALF


if __name__ == "__main__":
    sys.stdout.write("\n".join(lines()) + "\n")
