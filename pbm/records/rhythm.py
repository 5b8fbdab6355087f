"""The rhythm of a stream or an analyser: results to be expected at each hour of the week, and how long a silence is too long."""

from typing import Annotated

from pydantic import Field

from pbm.records.quantities import NotNegative, Positive, Written


class Rhythm(Written):
    """Results to be expected by the hour of the week, and the silence that raises a notice.

    Attributes
    ----------
    quiet_at
        A silence in which so many results were to be expected raises a notice.
    false_per_day
        Notices a day that the history makes likely although all is well.
    by_hour
        Results an hour in each of the 168 hours of the week, from Monday 00:00.
    """

    quiet_at: Positive
    false_per_day: Positive
    by_hour: Annotated[tuple[NotNegative, ...], Field(min_length=168, max_length=168)]
