"""The laboratory's clock: hours in UTC with their local date, weekday and hour, so that days of 23 and 25 hours come out right."""

from dataclasses import dataclass
from datetime import date, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np
import numpy.typing as npt

Ints = npt.NDArray[np.int64]

TIMEZONE = "Atlantic/Azores"
ZONE = ZoneInfo(TIMEZONE)
SECOND = 1_000_000
HOUR = 3_600 * SECOND


@dataclass(frozen=True, slots=True)
class Hours:
    """Every hour of a span of local days.

    Attributes
    ----------
    start
        int64, UTC microseconds since 1970.
    offset
        int64, seconds that local clocks are ahead of UTC.
    day, weekday, hour
        int64, local: days since the first day, Monday = 0, hour of the day.
    """

    start: Ints
    offset: Ints
    day: Ints
    weekday: Ints
    hour: Ints

    def of(self, time: Ints) -> Ints:
        """Index of the hour in which each time lies; a time beyond the end counts to the last hour."""
        return np.clip(np.searchsorted(self.start, time, side="right") - 1, 0, len(self.start) - 1)


def utc(moment: datetime) -> int:
    """UTC microseconds since 1970 of a moment; one without a zone is read on the laboratory's clock."""
    aware = moment if moment.tzinfo else moment.replace(tzinfo=ZONE)
    return int(aware.timestamp()) * SECOND


def midnight(day: date) -> int:
    """UTC microseconds at which a local day begins."""
    return utc(datetime(day.year, day.month, day.day))


def hours(first_day: date, days: int) -> Hours:
    """Tabulate the hours of `days` local days beginning with `first_day`."""
    start = np.arange(midnight(first_day), midnight(first_day + timedelta(days)), HOUR, dtype=np.int64)
    local = [datetime.fromtimestamp(at / SECOND, ZONE) for at in start.tolist()]
    rows = [(_offset(at), (at.date() - first_day).days, at.weekday(), at.hour) for at in local]
    offset, day, weekday, hour = np.array(rows, dtype=np.int64).T
    return Hours(start, offset, day, weekday, hour)


def _offset(at: datetime) -> int:
    ahead = at.utcoffset()
    return 0 if ahead is None else int(ahead.total_seconds())


def local_text(table: Hours, time: Ints) -> list[str]:
    """Local ISO 8601 with offset, whole seconds: ``2031-03-02T07:14:05-01:00``."""
    index = table.of(time)
    local = (time // SECOND + table.offset[index]).astype("datetime64[s]")
    zones = np.array([f"{o // 3600:+03d}:00" for o in table.offset.tolist()])
    return list(map("".join, zip(np.datetime_as_string(local).tolist(), zones[index].tolist(), strict=True)))


def utc_text(time: Ints) -> list[str]:
    """UTC ISO 8601, whole seconds: ``2031-03-02T08:14:05Z``."""
    return [text + "Z" for text in np.datetime_as_string((time // SECOND).astype("datetime64[s]")).tolist()]
