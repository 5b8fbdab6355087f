"""Times of an extract -> UTC microseconds. Without offset they are times of the laboratory's clocks: an hour that the clocks skip does not
exist; in one that they repeat, the sequence of the lines tells the two passages apart.
"""

from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import numpy.typing as npt
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from pbm.errors import InputError
from pbm.records.as_written import EARLIEST, LATEST, read_time

Micros = npt.NDArray[np.int64]
Kinds = npt.NDArray[np.int8]
Mask = npt.NDArray[np.bool_]

READ, NOT_A_TIME, SKIPPED = 0, 1, 2
_BAD, _LOCAL, _ABSOLUTE = 0, 1, 2
_DAY = 86_400_000_000
_WALL = r"^\d{4}-\d\d-\d\d[T ]\d\d:\d\d(:\d\d(\.\d{1,6})?)?"
_FORMS = (
    (f"{_WALL}$", pa.timestamp("us"), _LOCAL),
    (rf"{_WALL}(Z|[+-]\d\d(:?\d\d)?)$", pa.timestamp("us", tz="UTC"), _ABSOLUTE),
)
_NEAR = 100  # lines: ambiguous times further apart than this in the file are not read as one sequence
_EPOCH, _MICROSECOND = datetime(1970, 1, 1), timedelta(microseconds=1)
_EARLIEST, _LATEST = (EARLIEST - _EPOCH) // _MICROSECOND, (LATEST - _EPOCH) // _MICROSECOND


@dataclass(frozen=True, slots=True)
class _Seen:
    """The last ambiguous time of a file: its line, its local time, and whether the clock had been put back by then."""

    line: int
    local: int
    after: bool


class WallClock:
    """The laboratory's clock along one file; between blocks it remembers on which side of a repeated hour the file stands.

    Attributes
    ----------
    by_sequence
        Number of times met that the clock showed twice.
    """

    def __init__(self, zone: ZoneInfo) -> None:
        self.by_sequence = 0
        self._zone = zone
        self._seen: _Seen | None = None

    def to_utc(self, texts: pa.Array, lines: npt.NDArray[np.int64], time_format: str | None) -> tuple[Micros, Kinds]:
        """UTC microseconds of each text, and whether it was read (`READ`, `NOT_A_TIME`, `SKIPPED`: no such time on that day).

        Raises
        ------
        InputError
            If `time_format` is not a strptime pattern.
        """
        micros, kind = _in_format(texts, time_format) if time_format else _in_iso(texts)
        kind[(micros < _EARLIEST) | (micros >= _LATEST)] = _BAD
        fault = np.where(kind == _BAD, NOT_A_TIME, READ).astype(np.int8)
        local = np.flatnonzero(kind == _LOCAL)
        utc, skipped = self._localized(micros[local], lines[local])
        micros[local] = utc
        fault[local[skipped]] = SKIPPED
        return micros, fault

    def _localized(self, local: Micros, lines: npt.NDArray[np.int64]) -> tuple[Micros, Mask]:
        index = pd.DatetimeIndex(local.view("datetime64[us]"))
        before, skipped = _fixed(index, self._zone, first=True)
        after, _ = _fixed(index, self._zone, first=False)
        twice = np.flatnonzero(after != before)
        self.by_sequence += len(twice)
        put_back = self._clock_was_put_back(local[twice], lines[twice], (after - before)[twice])
        before[twice[put_back]] = after[twice[put_back]]
        return before, skipped

    def _clock_was_put_back(self, local: Micros, lines: npt.NDArray[np.int64], shift: Micros) -> Mask:
        after = np.zeros(len(local), np.bool_)
        breaks = np.flatnonzero((np.diff(lines) > _NEAR) | (np.abs(np.diff(local)) > _DAY)) + 1
        for run in np.split(np.arange(len(local)), breaks) if len(local) else []:
            after[run] = self._along(local[run], int(lines[run[0]]), int(shift[run[0]]))
            self._seen = _Seen(int(lines[run[-1]]), int(local[run[-1]]), bool(after[run[-1]]))
        return after

    def _along(self, local: Micros, line: int, shift: int) -> Mask:
        """In one sequence the clock was put back at the step that the shift makes smallest; without a step back, it was not yet.

        Where there is no step back either reading keeps the results in the same order.
        """
        seen = self._seen
        if seen is None or line - seen.line > _NEAR or abs(int(local[0]) - seen.local) > _DAY:
            seen = _Seen(line, int(local[0]), False)
        if seen.after:
            return np.ones(len(local), np.bool_)
        steps = np.diff(local, prepend=seen.local)
        gain = np.abs(steps) - np.abs(steps + shift)
        back = int(np.argmax(gain))
        after: Mask = np.arange(len(local)) >= back
        return after & bool(gain[back] > 0)


def _in_iso(texts: pa.Array) -> tuple[Micros, Kinds]:
    micros, kinds = np.zeros(len(texts), np.int64), np.zeros(len(texts), np.int8)
    rest = np.arange(len(texts))
    for form, written, kind in _FORMS if _is_local(texts) else reversed(_FORMS):
        some = texts if len(rest) == len(texts) else texts.take(pa.array(rest))
        fits = np.array(pc.match_substring_regex(some, form), np.bool_)
        try:
            # Arrow reads all or nothing, and is slow to refuse: it gets only what looks right.
            micros[rest[fits]] = np.array(some.filter(pa.array(fits)).cast(written).cast(pa.int64()))
        except pa.ArrowInvalid:
            continue  # such as 30 February
        kinds[rest[fits]] = kind
        rest = rest[~fits]
    for row, text in zip(rest.tolist(), texts.take(pa.array(rest)).to_pylist(), strict=True):
        if found := read_time(text):
            kinds[row] = _LOCAL if found.tzinfo is None else _ABSOLUTE
            micros[row] = (found.replace(tzinfo=None) - _EPOCH - (found.utcoffset() or timedelta())) // _MICROSECOND
    return micros, kinds


def _is_local(texts: pa.Array) -> bool:
    """Whether the first time that can be read has no offset."""
    found = next(filter(None, (read_time(text.as_py()) for text in texts)), None)
    return found is not None and found.tzinfo is None


def _in_format(texts: pa.Array, time_format: str) -> tuple[Micros, Kinds]:
    absolute = "%z" in time_format
    try:
        parsed: Any = pd.to_datetime(
            np.array(texts.to_pylist(), object), format=time_format, errors="coerce", utc=absolute
        )
    except ValueError as error:
        raise InputError(
            f'lab.toml, extract.time_format: "{time_format}" is not a pattern of dates and times ({error}). '
            'Write it like "%d.%m.%Y %H:%M:%S", or leave it out where times are in ISO 8601.'
        ) from None
    kinds = np.where(parsed.isna(), _BAD, _ABSOLUTE if absolute else _LOCAL).astype(np.int8)
    return _as_micros(parsed), kinds


def _fixed(index: pd.DatetimeIndex, zone: ZoneInfo, first: bool) -> tuple[Micros, Mask]:
    """UTC of local times, a repeated hour taken as its first or its second passage; and where there was no such time."""
    fixed = index.tz_localize(zone, ambiguous=np.full(len(index), first), nonexistent="NaT")
    return _as_micros(fixed), np.asarray(fixed.isna())


def _as_micros(index: Any) -> Micros:
    utc = index.tz_convert("UTC").tz_localize(None) if index.tz is not None else index
    return np.array(utc.to_numpy().astype("datetime64[us]").view(np.int64))
