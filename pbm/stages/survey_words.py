"""The survey's first judgement in words: the verdict on a stream, and what to look at before a monitor is chosen.

An error begins at any result of the day, on average with half of the day's results still to come. A monitor that sees 1 TEa within half of
a day's results is likely to see it the same day (*useful*); within a day's results only if it begins early (*marginal*); else not
before the next (*not useful here*). The count is what the best statistic needs by closed form; `pbm tune` judges by simulation.
"""

from collections.abc import Iterator, Sequence
from typing import NamedTuple

from pbm.records.plan import Verdict
from pbm.records.survey import (
    Dependence,
    Distribution,
    Gap,
    LaterThird,
    Lot,
    Month,
    Needed,
    Oddity,
    PatientRepeats,
    Pattern,
    Performance,
    Slip,
    Steady,
    Volume,
)

FEWEST_DAYS, FEWEST_RESULTS = 20, 1_000  # below these `pbm tune` chooses nothing
GOOD_DAYS, GOOD_RESULTS = 90, 5_000
MUCH_CENSORED, MANY_REPEATS, MUCH_PATTERN = 0.05, 0.2, 0.1
MORE_ALARMS = 1.5
WORTH_TELLING = 0.1  # TEa, of a step between reagent lots


class Judged(NamedTuple):
    """The verdict on a stream and its reason."""

    verdict: Verdict
    reason: str


def first_judgement(
    volume: Volume, distribution: Distribution, performance: Performance, needed: Needed | None, unit: str
) -> Judged:
    """Whether a monitor is likely to pay."""
    if volume.results < FEWEST_RESULTS or volume.days_with_results < FEWEST_DAYS:
        return Judged(
            "not useful here",
            f"{_count(volume.results, 'result')} on {_count(volume.days_with_results, 'day')} are too few to choose and confirm limits "
            f"(at least {FEWEST_RESULTS} results on {FEWEST_DAYS} days)",
        )
    if needed is None:
        return Judged("not useful here", _why_nothing_moves(distribution, unit))
    about = f"about {needed.one:.0f} results to see 1 TEa ({performance.allowable_error:.3g} {unit})"
    told = f"needs {about}, the line makes {volume.per_day:{'.0f' if volume.per_day >= 10 else '.2g'}} a day"
    if needed.one > volume.per_day:
        return Judged("not useful here", told)
    if needed.one > volume.per_day / 2:
        return Judged("marginal", f"{told}: an error that begins after the first hours is seen the next day")
    return Judged("useful", told)


def _why_nothing_moves(distribution: Distribution, unit: str) -> str:
    if distribution.distinct == 1:
        return f"all results are {distribution.median:g} {unit}"
    censored = distribution.censored_below + distribution.censored_above
    if censored > 0.5:
        return f"{censored:.0%} of the results are censored, and those tell nothing of a shift"
    return "a shift of 1 TEa moves no mean of these results"


def oddities(
    volume: Volume,
    distribution: Distribution,
    gaps: Sequence[Gap],
    slips: Sequence[Slip],
    steady: Sequence[Steady],
    repeats: PatientRepeats | None,
    pattern: Pattern | None,
    dependence: Dependence | None,
    later: LaterThird | None,
    months: Sequence[Month],
    lots: Sequence[Lot],
    unit: str,
) -> Iterator[Oddity]:
    """What to look at, the gravest first."""
    yield from _of_units(distribution, slips, unit)
    yield from _of_runs(steady, unit)
    yield from _of_later_third(later, months, unit)
    yield from _of_lots(lots)
    yield from _of_gaps(gaps)
    yield from _of_history(volume, distribution)
    yield from _of_patients(repeats, pattern, dependence)


def _of_units(distribution: Distribution, slips: Sequence[Slip], unit: str) -> Iterator[Oddity]:
    if slips:
        told = "; ".join(
            f"on {s.day} the daily median went from {s.before:.4g} to {s.after:.4g} {unit}, near the factor {s.factor:g} ({s.units})"
            for s in slips[:3]
        )
        yield Oddity(
            grave=True,
            short="UNIT SLIP",
            words=f"A unit slip: {told}{_and_more(slips)}. Take the extract again with one unit, or leave these days out.",
        )
    if not distribution.step_agrees:
        yield Oddity(
            grave=True,
            short=f"step {distribution.step_found:g}",
            words=f"Results are reported in steps of {distribution.step_found:g} {unit}; lab.toml says {distribution.step_stated:g}. "
            "Simulated errors are rounded to the step of lab.toml: correct it.",
        )


def _of_runs(steady: Sequence[Steady], unit: str) -> Iterator[Oddity]:
    if steady:
        told = "; ".join(f"{s.results} from {s.begin}, {s.lowest:g} to {s.highest:g} {unit}" for s in _longest(steady))
        yield Oddity(
            grave=True,
            short=f"alike {len(steady)}",
            words=f"{_count(len(steady), 'run')} of near-identical results, as of one material measured again and again: {told}"
            f"{_and_more(steady)}. Control material in disguise, or one specimen sent many times? Leave it out by its kind or ward.",
        )


def _longest(steady: Sequence[Steady]) -> list[Steady]:
    return sorted(sorted(steady, key=lambda s: (-s.results, s.begin))[:3], key=lambda s: s.begin)


def _of_later_third(later: LaterThird | None, months: Sequence[Month], unit: str) -> Iterator[Oddity]:
    if later is None or later.alarms_at_least < MORE_ALARMS:
        return
    spreads = [month.spread for month in months if month.spread is not None and month.results >= 30]
    by_month = f" (by month from {spreads[0]:.3g} to {spreads[-1]:.3g})" if len(spreads) > 1 else ""
    yield Oddity(
        grave=True,
        short=f"later x{later.alarms:.2g}",
        words=f"The last third of the days, from {later.first_day}, differs from what came before: mean {later.mean_before:.4g} before, "
        f"{later.mean_after:.4g} after; SD {later.spread_before:.3g} before, {later.spread_after:.3g} after{by_month}, {unit}. "
        f"Limits learned before would alarm about {later.alarms:.2g} times as often as the budget allows (at least "
        f"{later.alarms_at_least:.2g} times). Find out why (population, method, lot, an error) before they go to the bench, "
        "or learn on later days only.",
    )


def _of_lots(lots: Sequence[Lot]) -> Iterator[Oddity]:
    """Steps between lots of which even the nearer end of the interval is beyond what is worth telling."""
    moved = [
        after
        for after in lots
        if after.step_interval is not None
        and (after.step_interval[0] >= WORTH_TELLING or after.step_interval[1] <= -WORTH_TELLING)
    ]
    if moved:
        told = "; ".join(
            f"{one.step:+.2f} TEa with lot {one.lot} from {one.first_day} (90 % interval {one.step_interval[0]:+.2f} to "
            f"{one.step_interval[1]:+.2f})"
            for one in moved[:3]
            if one.step is not None and one.step_interval is not None
        )
        yield Oddity(
            short=f"lots {len(moved)}",
            words=f"The level moved with a reagent lot: {told}{_and_more(moved)}. Patients or the season may have their part in it. "
            "A monitor on the live feed takes a new lot as an event and can learn its centre anew.",
        )


def _of_gaps(gaps: Sequence[Gap]) -> Iterator[Oddity]:
    if gaps:
        largest = max(gaps, key=lambda gap: gap.hours)
        yield Oddity(
            short=f"gaps {len(gaps)}",
            words=f"{_count(len(gaps), 'gap')} without results where there usually are some; the longest of {_span(largest.hours)} from "
            f"{largest.begin}, where about {largest.expected:.0f} were likely. Is the extract complete?",
        )


def _of_history(volume: Volume, distribution: Distribution) -> Iterator[Oddity]:
    if volume.days < GOOD_DAYS or volume.results < GOOD_RESULTS:
        yield Oddity(
            short="short history",
            words=f"{_count(volume.results, 'result')} in {_count(volume.days, 'day')}: limits learned from so little are uncertain "
            f"(better {GOOD_RESULTS} results in {GOOD_DAYS} days; best a year, which holds seasons and reagent lots).",
        )
    censored = distribution.censored_below + distribution.censored_above
    if censored >= MUCH_CENSORED:
        yield Oddity(
            short=f"censored {censored:.0%}",
            words=f"{censored:.1%} of the results are censored ({distribution.censored_below:.1%} below, {distribution.censored_above:.1%} "
            "above the measuring range); a shift does not move them.",
        )
    if distribution.not_positive:
        yield Oddity(
            short="not positive",
            words=f"{_count(distribution.not_positive, 'result')} at or below 0: no logarithm or Box-Cox transform is tried. Right for "
            "this analyte? If not, leave them out by `plausible`.",
        )


def _of_patients(
    repeats: PatientRepeats | None, pattern: Pattern | None, dependence: Dependence | None
) -> Iterator[Oddity]:
    if repeats is not None and repeats.within_day >= MANY_REPEATS:
        yield Oddity(
            short=f"repeats {repeats.within_day:.0%}",
            words=f"{repeats.within_day:.0%} of the results follow another one of the same patient within a day; `repeat_hours` would "
            "leave them out.",
        )
    if pattern is not None and dependence is not None and max(pattern.ward, pattern.hour_of_week) >= MUCH_PATTERN:
        yield Oddity(
            short=f"mix {max(pattern.ward, pattern.hour_of_week):.0%}",
            words=f"Who is measured matters: the ward explains {pattern.ward:.0%} of the variance, the hour of the week "
            f"{pattern.hour_of_week:.0%}. The variance of means of 50 results is {dependence.inflation:.2f} times what independence would "
            f"give, {dependence.inflation_without_mix:.2f} times with ward and hour taken away: a patient-mix baseline is worth trying.",
        )


def _and_more(found: Sequence[object]) -> str:
    return f"; and {len(found) - 3} more" if len(found) > 3 else ""


def _count(count: int, thing: str) -> str:
    return f"{count} {thing}{'' if count == 1 else 's'}"


def _span(hours: float) -> str:
    return f"{hours / 24:.1f} days" if hours >= 48 else f"{hours:.1f} hours"
