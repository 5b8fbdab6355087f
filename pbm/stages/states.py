"""The state of a stream's monitor in one word: armed, warming, open alarm, quiet, off."""

from typing import Literal

State = Literal["armed", "warming", "open alarm", "quiet", "off"]


def state_of(admitted: int, needed: int, episode: int, *, quiet: bool) -> State:
    """The state of a monitor; a stream without one is "off".

    Parameters
    ----------
    admitted, needed
        Results that its statistic has taken, and those that it needs before it is judged.
    episode
        +1 or -1 in an open alarm, 0 armed.
    quiet
        Whether its stream, or its analyser, brings no results: then no alarm says nothing.
    """
    if episode:
        return "open alarm"
    if quiet:
        return "quiet"
    return "warming" if admitted < needed else "armed"
