"""Whether a monitor pays on a stream: useful, marginal, or not useful here, with the reason in words."""

from dataclasses import dataclass

import numpy as np

from pbm.records.plan import Verdict

WORTHWHILE, SOME_GAIN = 0.1, 0.02


@dataclass(frozen=True, slots=True)
class Judgement:
    """The verdict on a stream and the reason in words."""

    word: Verdict
    reason: str


def judge_usefulness(needed: float, per_day: float, gain: float) -> Judgement:
    """Whether a monitor pays on a stream.

    Parameters
    ----------
    needed
        Median number of results until a shift of 1 TEa is found; infinite where more than half are not.
    per_day
        Results a day.
    gain
        Share by which the monitor lowers the expected unreliable results of the schedule alone, averaged over the faults.

    Notes
    -----
    Useful: found within an average day's run (common practice) and a gain of at least a tenth. Marginal: one of the two, and
    at least some gain.
    """
    sees = f"needs about {needed:.0f} results to see" if np.isfinite(needed) else "does not see"
    gained = f"averaged over the errors tried, {max(gain, 0):.0%} fewer unreliable results expected than with the controls alone"
    reason = f"{sees} a shift of 1 TEa; the line makes {per_day:.0f} a day; {gained}"
    same_day, gains = needed <= per_day, gain >= WORTHWHILE
    word: Verdict = (
        "useful"
        if same_day and gains
        else "marginal"
        if gain >= SOME_GAIN and (same_day or gains)
        else "not useful here"
    )
    return Judgement(word, reason)
