"""An alarm as the bench meets it: which stream, which side, how large, since when."""

from dataclasses import dataclass
from typing import Literal

from pbm.records.stream import StreamName


@dataclass(frozen=True, slots=True)
class OnsetEstimate:
    """When an error began and how large it is, judged from the results before the alarm.

    Attributes
    ----------
    onset, onset_low, onset_high
        UTC microseconds: the most likely first affected result and the ends of its 90 % set.
    results
        Offered results from the onset to the alarm, both included.
    size
        Estimated error in the stream's unit, signed.
    size_in_tea
        The same in units of TEa at the centre.
    expected_unreliable
        Expected number of unreliable results among them.
    """

    onset: int
    onset_low: int
    onset_high: int
    results: int
    size: float
    size_in_tea: float
    expected_unreliable: float


@dataclass(frozen=True, slots=True)
class Alarm:
    """The opening of an episode.

    Attributes
    ----------
    stream, monitor
        The stream and the index of the monitor in its plan.
    time, specimen
        Of the result that opened the episode.
    side
        "HIGH" or "LOW".
    statistic, value, limit
        Name of the statistic, its value and the limit it crossed (on its own scale).
    shown, shown_limit
        The same for people: in the result's unit where the statistic is a level of results.
    estimate
        Onset and size; None where the statistic does not tell to which side results have moved.
    last_control
        UTC microseconds of the last control event before the alarm: the last one recorded, else the last one scheduled; None where none is
        recorded and the schedule goes by counts or is not given.
    plan_sha256
        Which plan was in force.
    shadow
        Whether it is kept off the bench: the watch ran on trial.
    last_control_passed
        Whether its controls were accepted; None where its outcome is not known.
    """

    stream: StreamName
    monitor: int
    time: int
    specimen: str
    side: Literal["HIGH", "LOW"]
    statistic: str
    value: float
    limit: float
    shown: float
    shown_limit: float
    estimate: OnsetEstimate | None
    last_control: int | None = None
    plan_sha256: str = ""
    shadow: bool = False
    last_control_passed: bool | None = None
