"""The Tern Bay District Laboratory at work: for each stream, who was measured, when, the true value, and what was reported."""

from collections.abc import Sequence
from dataclasses import dataclass, fields
from datetime import date
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from synthetic_streams.analysers import Levels, levels, measure
from synthetic_streams.analytes import Analyte, known, stream_name
from synthetic_streams.clock import SECOND, Hours, hours
from synthetic_streams.draws import Draws, collect
from synthetic_streams.faults import Fault, error
from synthetic_streams.reporting import report
from synthetic_streams.seeds import child
from synthetic_streams.wards import WARDS

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Texts = npt.NDArray[np.object_]

NAME = "Tern Bay District Laboratory"
FIRST_DAY = date(2031, 1, 6)
JITTER_SECONDS = 20
WARD_CODES = np.array([ward.code for ward in WARDS], dtype=object)


@dataclass(frozen=True, slots=True)
class StreamSample:
    """The results of one stream in order of time; one array element a result.

    Attributes
    ----------
    analyte, line
        The stream.
    time
        int64, UTC microseconds since 1970 (whole seconds).
    draw
        Index of the specimen in the laboratory's `draws`.
    specimen, ward, patient
        Text: specimen number, ward's code, patient's token.
    lot
        int64, reagent lot of the stream, counted from 1.
    true_value
        The patient's own value.
    raw
        As measured, faults included, before rounding and the measuring range.
    value, censor, text
        As reported: number, -1 for "<", +1 for ">", 0, and the printed text.
    error
        What the faults added to the raw value; 0 where none acted.
    value_without, text_without
        What would have been reported without the faults.
    """

    analyte: Analyte
    line: str
    time: Ints
    draw: Ints
    specimen: Texts
    ward: Texts
    patient: Texts
    lot: Ints
    true_value: Floats
    raw: Floats
    value: Floats
    censor: npt.NDArray[np.int8]
    text: Texts
    error: Floats
    value_without: Floats
    text_without: Texts

    def __len__(self) -> int:
        return len(self.time)

    def rows(self, chosen: Any) -> "StreamSample":
        """The same stream with a subset of its rows (slice, mask or index)."""
        named = {f.name: getattr(self, f.name) for f in fields(self)}
        return StreamSample(**{k: v[chosen] if isinstance(v, np.ndarray) else v for k, v in named.items()})


@dataclass(frozen=True)
class Laboratory:
    """The laboratory over a span of days.

    Parameters
    ----------
    days
        Local days, counted from `first_day`.
    volume
        Factor on the number of specimens; 1 is about 750 sodium results a day over two lines.
    seed
        Master seed.
    first_day
        First local day.
    """

    days: int
    volume: float = 1.0
    seed: int = 1
    first_day: date = FIRST_DAY

    def __post_init__(self) -> None:
        if self.days < 1 or not self.volume > 0 or self.seed < 0:
            raise ValueError("expected days >= 1, volume > 0 and seed >= 0")

    @cached_property
    def hours(self) -> Hours:
        """The laboratory's hours."""
        return hours(self.first_day, self.days)

    @cached_property
    def draws(self) -> Draws:
        """Every specimen."""
        return collect(self.hours, self.volume, self.seed)

    def levels(self, analyte: Analyte, line: str) -> Levels:
        """Calibrations and reagent lots of a stream."""
        return levels(analyte, line, self.first_day, self.days, self.seed)

    def sample(self, analyte: Analyte, line: str, faults: Sequence[Fault] = ()) -> StreamSample:
        """All results of one stream, with the faults that concern it."""
        name = stream_name(analyte, line)
        rng = child(self.seed, "stream", name)
        draw = self.draws.measured(analyte, line)
        delay = analyte.delay + rng.integers(JITTER_SECONDS, size=len(draw))
        time = self.draws.time[draw] + delay * SECOND
        order = np.argsort(time, kind="stable")
        draw, time = draw[order], time[order]
        true_value = self.draws.true_values(analyte, draw)
        levels = self.levels(analyte, line)
        without = measure(analyte, true_value, levels.at(time), rng)
        added = self.fault_error(analyte, line, without, time, time, faults)
        seen, unseen = report(analyte, without + added), report(analyte, without)
        return StreamSample(
            analyte=analyte,
            line=line,
            time=time,
            draw=draw,
            specimen=self.draws.specimen[draw],
            ward=WARD_CODES[self.draws.ward[draw]],
            patient=self.draws.patients.token[self.draws.patient[draw]],
            lot=levels.lot_at(time),
            true_value=true_value,
            raw=without + added,
            value=seen.value,
            censor=seen.censor,
            text=seen.text,
            error=added,
            value_without=unseen.value,
            text_without=unseen.text,
        )

    def fault_error(
        self, analyte: Analyte, line: str, raw: Floats, time: Ints, clock: Ints, faults: Sequence[Fault],
        what: str = "patients",
    ) -> Floats:  # fmt: skip
        """Summed error of the faults that concern a stream; arguments as in `faults.error`."""
        added = np.zeros(len(raw))
        for number, fault in enumerate(faults):
            if (fault.analyte, fault.line) == (analyte.key, line):
                rng = child(self.seed, "fault", stream_name(analyte, line), str(number), what)
                added += error(fault, analyte, raw, time, clock, rng)
        return added


def stream_sample(
    analyte: str, line: str, *, days: int = 30, volume: float = 1.0, seed: int = 1, faults: Sequence[Fault] = ()
) -> StreamSample:
    """A fresh stream in memory, with injected faults.

    Parameters
    ----------
    analyte, line
        The stream, for example ``"sodium", "line-2"``.
    days, volume, seed
        Size and master seed. `write_laboratory` writes the same stream when its history and its two live days have as many
        days together.
    faults
        Faults to apply; those of other streams are ignored.

    Raises
    ------
    ValueError
        If the laboratory does not measure this stream.
    """
    return Laboratory(days, volume, seed).sample(known(analyte, line), line, faults)
