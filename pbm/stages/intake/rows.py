"""A block of text -> results, stream by stream, and every row that is left out with its one reason.

The first reason that applies is given, in this order: no line of data, no patient's result, unknown test, ward left out, no analyser, no
number, another unit, no time, implausible value. A unit is never converted.
"""

from collections.abc import Iterable
from functools import lru_cache

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from pbm.records.as_written import read_value
from pbm.records.intake import RESULT_SCHEMA, ParsedBlock, TextBlock
from pbm.records.laboratory import Lab
from pbm.records.stream import LONGEST_ANALYSER, POOLED, StreamName
from pbm.stages.intake.covariates import Covariates
from pbm.stages.intake.sieve import Codes, Mask, Sieve
from pbm.stages.intake.times import NOT_A_TIME, SKIPPED, WallClock

_KNOWN_VALUES = 65_536  # different texts kept read: results repeat, digits are few
Floats = npt.NDArray[np.float64]


class RowReader:
    """Reads the blocks of one extract, in their order, as `lab.toml` says.

    Attributes
    ----------
    clock
        The laboratory's clock along this extract.
    covariates
        Reads what is kept beside a result; `patient_key` is the key of its tokens for patients.
    """

    def __init__(self, lab: Lab, patient_key: bytes) -> None:
        analytes = lab.analytes.values()
        self.clock = WallClock(lab.laboratory.zone)
        self.covariates = Covariates(patient_key)
        self._value = lru_cache(_KNOWN_VALUES)(read_value)
        self._columns = lab.extract
        self._keys = list(lab.analytes)
        self._spellings = {name: self._keys.index(key) for name, key in lab.spellings().items()}
        self._units = [one.known_units() for one in analytes]
        self._wards = [one.leave_out_wards for one in analytes]
        self._low = np.array([-np.inf if one.plausible.low is None else one.plausible.low for one in analytes])
        self._high = np.array([np.inf if one.plausible.high is None else one.plausible.high for one in analytes])

    def parse(self, block: TextBlock) -> ParsedBlock:
        """Results and rows left out: together as many as the block has rows, and lines that are none.

        Raises
        ------
        InputError
            If the block's pattern of times is not one.
        """
        sieve = Sieve(block)
        self._leave_what_is_no_data(sieve)
        analyte = sieve.mapped("analyte", lambda name: self._spellings.get(name, -1))
        sieve.leave(analyte < 0, "unknown test", "analyte")
        self._leave_wards(sieve, analyte)
        sieve.leave_where("analyser", lambda name: not name, "no analyser given")
        sieve.leave_where("analyser", lambda name: len(name) > LONGEST_ANALYSER, "not the name of an analyser")
        value, censor = self._values(sieve, block)
        self._leave_other_units(sieve, analyte)
        time = self._times(sieve, block)
        sieve.leave(
            (value < self._low[analyte]) | (value > self._high[analyte]), "outside the plausible range", "value"
        )
        return self._gathered(block, sieve, analyte, (time, value, censor))

    def _leave_what_is_no_data(self, sieve: Sieve) -> None:
        empty = np.flatnonzero(
            sieve.where("analyte", lambda text: not text) & sieve.where("value", lambda text: not text)
        )
        sieve.leave_rows(empty[_equal(sieve.trimmed("time", empty), "")], "blank line")
        heading = sieve.where("analyte", lambda text: text == self._columns.analyte)
        sieve.leave(heading & sieve.where("value", lambda text: text == self._columns.value), "repeated header line")
        sieve.leave_where("kind", lambda kind: kind not in self._columns.patient_kinds, "not a patient result")

    def _leave_wards(self, sieve: Sieve, analyte: Codes) -> None:
        if sieve.has("ward"):
            wards, names = sieve.encoded("ward")
            sieve.leave(_listed(names, self._wards)[analyte, wards], "ward is left out", "ward")

    def _values(self, sieve: Sieve, block: TextBlock) -> tuple[Floats, Codes]:
        codes, texts = sieve.encoded("value")
        read = [self._value(text, block.decimal) for text in texts]
        sieve.leave_where("value", lambda text: not text, "no value")
        value = np.array([np.nan if one is None else one[0] for one in read], np.float64)[codes]
        sieve.leave(np.isnan(value), "not a number", "value")
        return value, np.array([0 if one is None else one[1] for one in read], np.int64)[codes]

    def _leave_other_units(self, sieve: Sieve, analyte: Codes) -> None:
        if not sieve.has("unit"):
            return
        units, names = sieve.encoded("unit")
        other = ~_listed(names, self._units)[analyte, units]
        sieve.leave(other & sieve.where("unit", lambda unit: not unit), "no unit given")
        for number in np.unique(analyte[other]):
            sieve.leave(other & (analyte == number), f"unit is not {self._units[number][0]}", "unit")

    def _times(self, sieve: Sieve, block: TextBlock) -> Codes:
        sieve.leave_rows(sieve.kept()[_equal(sieve.trimmed("time", sieve.kept()), "")], "no time")
        rows = sieve.kept()
        time = np.zeros(len(block.line), np.int64)
        time[rows], fault = self.clock.to_utc(sieve.trimmed("time", rows), block.line[rows], block.time_format)
        sieve.leave_rows(rows[fault == NOT_A_TIME], "not a time", "time")
        sieve.leave_rows(rows[fault == SKIPPED], "time skipped by the clocks", "time")
        return time

    def _gathered(
        self, block: TextBlock, sieve: Sieve, analyte: Codes, measured: tuple[Codes, Floats, Codes]
    ) -> ParsedBlock:
        streams = _Streams(self._keys, sieve, analyte)
        kept = sieve.kept()
        numbers, counts = np.unique(streams.numbers[kept], return_counts=True)
        # Stable: within a stream the order of the file stays.
        rows = kept[np.argsort(streams.numbers[kept], kind="stable")]
        time, value, censor = (column[rows] for column in measured)
        columns = [
            pa.array(time).cast(RESULT_SCHEMA.field("time").type),
            value,
            censor.astype(np.int8),
            *self.covariates.kept(sieve, rows),
            pa.repeat(block.file, len(rows)),
            block.line[rows],
        ]
        names = tuple((streams.name(one), count) for one, count in zip(numbers.tolist(), counts.tolist(), strict=True))
        return ParsedBlock(pa.table(columns, schema=RESULT_SCHEMA), names, sieve.left_out(streams.labels))


class _Streams:
    """The stream of every row of a block, as a number; -1 where it is not known."""

    def __init__(self, analytes: list[str], sieve: Sieve, analyte: Codes) -> None:
        self._analytes = analytes
        analyser, self._analysers = (
            sieve.encoded("analyser") if sieve.has("analyser") else (np.zeros_like(analyte), [POOLED])
        )
        given = np.array([bool(name) for name in self._analysers], np.bool_)[analyser]
        self.numbers = np.where((analyte >= 0) & given, analyte * len(self._analysers) + analyser, -1)

    def name(self, number: int) -> StreamName:
        """The name of a stream by its number."""
        return StreamName(
            self._analytes[number // len(self._analysers)], self._analysers[number % len(self._analysers)]
        )

    def labels(self, rows: Codes) -> pa.Array:
        """The names of the streams of some rows as text, "" where not known."""
        met, each = np.unique(self.numbers[rows], return_inverse=True)
        return pa.array(["" if one < 0 else str(self.name(one)) for one in met.tolist()], pa.string()).take(
            pa.array(each)
        )


def _listed(texts: list[str], lists: Iterable[Iterable[str]]) -> Mask:
    """For each list (a row) and each text (a column), whether the text is in the list."""
    return np.array([[text in known for text in texts] for known in map(frozenset, lists)], np.bool_)


def _equal(texts: pa.Array, text: str) -> Mask:
    return np.array(pc.equal(texts, text), np.bool_)
