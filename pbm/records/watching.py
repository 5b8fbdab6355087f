"""What a laboratory decides about the live watch: when silence is told, and what laboratory events do to the monitors."""

from typing import Annotated

from pydantic import Field

from pbm.records.event import EventKind
from pbm.records.quantities import AlarmRate, EveryResults, Rate, Written

LEVEL_MAY_CHANGE: tuple[EventKind, ...] = ("calibration", "reagent lot")


class Quiet(Written):
    """When a stream or an analyser that brings no results is told as quiet.

    Attributes
    ----------
    budget
        False notices of one stream or analyser; `pbm tune` learns from the history which silence keeps to it.
    """

    budget: AlarmRate = Rate(1, 90)


class EventRules(Written):
    """What laboratory events do to the monitors of the streams that they are about.

    Attributes
    ----------
    restart
        Events after which a statistic begins afresh. "restart" and "keep the old centre" always do.
    relearn
        Events after which the centre is learned again.
    relearn_over
        From so many admitted results.
    relearn_at_most
        The centre moves by at most this part of TEa from where the plan has it.
    """

    restart: tuple[EventKind, ...] = LEVEL_MAY_CHANGE
    relearn: tuple[EventKind, ...] = LEVEL_MAY_CHANGE
    relearn_over: EveryResults = 200
    relearn_at_most: Annotated[float, Field(ge=0, le=1)] = 0.25
