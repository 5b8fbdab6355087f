"""What an appraisal says in words: the verdict and its reason, when patients are few, other spacings, and what `--check` objects to."""

from collections.abc import Iterator, Sequence

from pbm.methods.verdict import Gain
from pbm.records.figures import AloneAndWith, Figure, WorstCase
from pbm.records.judged import FalseAlarms, OnsetTime

SPACING_CAUTION = (
    "Information, not advice: rules and regulation decide how often controls run. Controls further apart let more unreliable results out "
    "before anyone can know. The final ones among them, released before the last accepted control event, can all the same fall as "
    "controls move apart where a monitor is running, because its alarm then comes before the bracket closes; the results in that open "
    "bracket are unreliable none the less. So both counts are shown."
)
WHEN = {"day": "in the daytime", "night": "at night", "weekend": "at a weekend"}


def reason_in_words(gain: Gain, average: AloneAndWith, worst: WorstCase, alarms: FalseAlarms) -> str:
    """Why the verdict on the held-out days is what it is."""
    saved = (
        f"{_share(average.share_fewer)} fewer unreliable results than with the controls alone, averaged over the errors tried, and "
        f"{_percent(worst.share_fewer.value)} fewer in the worst case"
    )
    kept = "kept" if alarms.kept else "not kept"
    return "; ".join(
        [
            f"on held-out days {saved}",
            *(["no more than its false alarms would save"] if gain.by_chance else []),
            f"{_alarms(alarms)} in {alarms.days} days, the budget allows {alarms.allowed:.2g}: {kept}",
        ]
    )


def _alarms(found: FalseAlarms) -> str:
    return f"{found.episodes} {'alarm' if found.episodes == 1 else 'alarms'}"


def objections(gain: Gain, average: AloneAndWith, alarms: Sequence[tuple[str, FalseAlarms]]) -> Iterator[str]:
    """Limits that were not kept, and a monitor that does more harm than good: it interrupts work and saves nothing that counts."""
    for whose, found in alarms:
        if not found.kept:
            low, high = found.interval
            yield (
                f"{whose}: {_alarms(found)} in {found.days} held-out days, the budget allows {found.allowed:.2g} "
                f"(90 % interval of the expected count {low:.2g} to {high:.2g})"
            )
    if gain.by_chance:
        yield (
            f"more harm than good: it saves {average.fewer.value:.3g} unreliable results of an error, no more than its false alarms would "
            "at random times"
        )


def onset_times_in_words(parts: Sequence[OnsetTime]) -> str:
    """How much slower errors are found, and how much they cost, at night and at the weekend."""
    by_when = {part.when: part for part in parts}
    if "day" not in by_when or len(by_when) < 2:
        return "All onsets fall into one part of the week."
    told = [_beside(by_when["day"], part) for when, part in by_when.items() if when != "day"]
    day = by_when["day"]
    together, alone = _hours(day.until_hours.both), _hours(day.until_hours.monitor)
    return (
        f"An error that begins in the daytime ({day.results_per_hour:.3g} results an hour) is found on average after {together} by "
        f"controls and monitors together, after {alone} by the monitors alone; {'; '.join(told)}."
    )


def _beside(day: OnsetTime, part: OnsetTime) -> str:
    together, alone = _hours(part.until_hours.both), _hours(part.until_hours.monitor)
    return (
        f"one that begins {WHEN[part.when]} ({part.results_per_hour:.3g} an hour) after {together} and {alone}, with "
        f"{part.unreliable.with_monitor.value:.3g} unreliable results against {day.unreliable.with_monitor.value:.3g}"
    )


def _hours(found: Figure) -> str:
    return f"{found.value:.3g} h"


def _share(found: Figure) -> str:
    return f"{_percent(found.value)} ({_percent(found.low)} to {_percent(found.high)})"


def _percent(share: float) -> str:
    return f"{share:.0%}".replace("%", " %")
