"""One reading of a live feed -> a result, or the one reason why it is not: the rules of intake, applied one by one as results arrive.

The first reason that applies is given, in the order of intake: no line of data, no patient's result, unknown test, ward left out, no
analyser, no number, another unit, no time, implausible value. A unit is never converted. A local time that the clocks show twice is read
as its first passage: only the order of arrival counts, and either reading is the same on the wall.
"""

import math
from collections.abc import Collection
from datetime import datetime, timedelta
from functools import lru_cache
from hashlib import blake2b
from typing import Literal

from pbm.records.as_written import EARLIEST, LATEST, read_time, read_value
from pbm.records.laboratory import Analyte, Lab
from pbm.records.message import Annotation
from pbm.records.reading import Correction, Reading, SetAside
from pbm.records.result import Result
from pbm.records.sex_and_age import read_age_band, read_sex
from pbm.records.stream import LONGEST_ANALYSER, POOLED, StreamName

_EPOCH = datetime(1970, 1, 1)
_MICROSECOND = timedelta(microseconds=1)
_LONGEST_FOUND = 40
_KNOWN_TIMES = 256
_KNOWN_TEXTS = 65_536  # different values kept read: results repeat, digits are few


class ReadingError(Exception):
    """Why a reading is no result: reason and what was found."""

    def __init__(self, reason: str, found: str = "") -> None:
        super().__init__(reason)
        self.reason, self.found = reason, found


class Reader:
    """Reads one kind of feed as `lab.toml` says.

    Parameters
    ----------
    lab
        The laboratory.
    decimal, time_format
        How the feed writes numbers and times; without a format, times are in ISO 8601.
    units_given, kinds_given
        Whether every reading of the feed says its unit, and its kind.
    patient_kinds
        What says that a result is a patient's; `extract.patient_kinds` if not given.
    patient_key
        Key of the tokens that stand for patients.
    """

    def __init__(
        self,
        lab: Lab,
        decimal: Literal[".", ","] = ".",
        time_format: str | None = None,
        *,
        units_given: bool = True,
        kinds_given: bool = False,
        patient_kinds: Collection[str] | None = None,
        patient_key: bytes = b"",
    ) -> None:
        self.lab, self._zone = lab, lab.laboratory.zone
        self._extract = lab.extract
        self._analytes = {name: (key, lab.analytes[key]) for name, key in lab.spellings().items()}
        self._units = {key: set(one.known_units()) for key, one in lab.analytes.items()}
        self._time_format = time_format
        self._units_given, self._kinds_given = units_given, kinds_given
        self._patient_kinds = self._extract.patient_kinds if patient_kinds is None else patient_kinds
        self._streams: dict[tuple[str, str], StreamName] = {}
        self._token = lru_cache(_KNOWN_TEXTS)(
            lambda text: blake2b(text.encode(), digest_size=8, key=patient_key).hexdigest()
        )
        self._time = lru_cache(_KNOWN_TIMES)(self._read_time)  # results of a panel share theirs
        self._value = lru_cache(_KNOWN_TEXTS)(lambda text: read_value(text, decimal))
        self._sex, self._age = lru_cache(_KNOWN_TEXTS)(read_sex), lru_cache(_KNOWN_TEXTS)(read_age_band)

    def read(self, reading: Reading) -> Result | SetAside:
        """The result, or why it is none."""
        try:
            return self._result(Reading(reading.place, *map(str.strip, reading[1:])))
        except ReadingError as error:
            return SetAside(reading.place, error.reason, error.found[:_LONGEST_FOUND], self._name(reading))

    def annotation(self, correction: Correction, source: str) -> Annotation | SetAside:
        """What a correction says of which result, or why it cannot be known; its value is not judged."""
        reading = Reading(correction.reading.place, *map(str.strip, correction.reading[1:]))
        try:
            stream, time = self._stream_of(reading)[0], self._time(reading.time)
        except ReadingError as error:
            return SetAside(reading.place, error.reason, error.found[:_LONGEST_FOUND], self._name(reading))
        return Annotation(
            stream=stream,
            specimen=reading.specimen,
            time=time,
            status=correction.status,
            value=reading.value
            if reading.unit in self._units[stream.analyte]
            else f"{reading.value} {reading.unit}".strip(),
            at=correction.at,
            source=source,
            place=reading.place,
        )

    def _name(self, reading: Reading) -> str:
        """The stream a reading belongs to; "" where it does not say."""
        known = self._analytes.get(reading.analyte.strip())
        analyser = reading.analyser.strip() or (POOLED if self._extract.analyser is None else "")
        return f"{known[0]}@{analyser[:LONGEST_ANALYSER]}" if known and analyser else ""

    def _result(self, reading: Reading) -> Result:
        stream, analyte = self._stream_of(reading)
        value, censor = self._number(reading.value)
        self._check_unit(reading.unit, stream.analyte, analyte)
        time = self._time(reading.time)
        self._check_plausible(value, analyte)
        patient = self._token(reading.patient) if reading.patient and analyte.repeat_hours else ""
        sex, age = self._sex(reading.sex), self._age(reading.age)
        return Result(time, stream, value, censor, reading.specimen, reading.ward, patient, sex, age)

    def _stream_of(self, reading: Reading) -> tuple[StreamName, Analyte]:
        self._check_it_is_data(reading)
        known = self._analytes.get(reading.analyte)
        if known is None:
            raise ReadingError("unknown test", reading.analyte)
        key, analyte = known
        if reading.ward in analyte.leave_out_wards:
            raise ReadingError("ward is left out", reading.ward)
        return self._streams.get((key, reading.analyser)) or self._stream(key, reading.analyser), analyte

    def _check_it_is_data(self, reading: Reading) -> None:
        if not (reading.time or reading.analyte or reading.value):
            raise ReadingError("blank line")
        if reading.analyte == self._extract.analyte and reading.value == self._extract.value:
            raise ReadingError("repeated header line")
        if (reading.kind or self._kinds_given) and reading.kind not in self._patient_kinds:
            raise ReadingError("not a patient result", reading.kind)

    def _stream(self, key: str, analyser: str) -> StreamName:
        if not analyser and self._extract.analyser is not None:
            raise ReadingError("no analyser given")
        if len(analyser) > LONGEST_ANALYSER:
            raise ReadingError("not the name of an analyser")
        return self._streams.setdefault((key, analyser), StreamName(key, analyser or POOLED))

    def _number(self, text: str) -> tuple[float, int]:
        if not text:
            raise ReadingError("no value")
        number = self._value(text)
        if number is None:
            raise ReadingError("not a number", text)
        return number

    def _check_unit(self, unit: str, key: str, analyte: Analyte) -> None:
        if unit in self._units[key] or (not unit and not self._units_given):
            return
        if not unit:
            raise ReadingError("no unit given")
        raise ReadingError(f"unit is not {analyte.unit}", unit)

    def _read_time(self, text: str) -> int:
        if not text:
            raise ReadingError("no time")
        found = self._as_written(text)
        if found is None:
            raise ReadingError("not a time", text)
        offset = found.utcoffset()
        if offset is None:
            local = found.replace(tzinfo=self._zone)
            offset = local.utcoffset() or timedelta()
            if offset < (local.replace(fold=1).utcoffset() or timedelta()):
                raise ReadingError("time skipped by the clocks", text)
        return (found.replace(tzinfo=None) - _EPOCH - offset) // _MICROSECOND

    def _as_written(self, text: str) -> datetime | None:
        if self._time_format is None:
            return read_time(text)
        try:
            found = datetime.strptime(text, self._time_format)
        except ValueError:
            return None
        return found if EARLIEST <= found.replace(tzinfo=None) < LATEST else None

    @staticmethod
    def _check_plausible(value: float, analyte: Analyte) -> None:
        low, high = analyte.plausible.low, analyte.plausible.high
        if not (-math.inf if low is None else low) <= value <= (math.inf if high is None else high):
            raise ReadingError("outside the plausible range", f"{value:g}")
