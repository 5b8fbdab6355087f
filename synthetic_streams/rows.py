"""The export as a table: its columns as text, and beside each row what it is, so that every later spoiling can be accounted for."""

from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import Analyte
from synthetic_streams.clock import Hours, local_text
from synthetic_streams.controls import ControlResults
from synthetic_streams.draws import Draws
from synthetic_streams.laboratory import StreamSample

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Texts = npt.NDArray[np.object_]

COLUMNS = (
    "reported_at", "test", "line", "result", "unit", "specimen", "location", "sex", "age", "lot", "patient", "kind",
)  # fmt: skip
HEADER = ",".join(COLUMNS)


class Category(IntEnum):
    """What became of a row. The first four are results that an intake should take."""

    ORDINARY = 0
    ORIGINAL = 1
    OTHER_SPELLING = 2
    LATE = 3
    CONTROL = 4
    PROFICIENCY = 5
    UNMAPPED_TEST = 6
    RERUN = 7
    DUPLICATE = 8
    COMMENT = 9
    OTHER_UNIT = 10
    CUT_SHORT = 11


TAKEN = (Category.ORDINARY, Category.ORIGINAL, Category.OTHER_SPELLING, Category.LATE)


@dataclass(slots=True)
class Rows:
    """Rows of the export; one array element a row.

    Attributes
    ----------
    time
        int64, UTC microseconds.
    category
        int64, see `Category`.
    stream
        int64, index into `analytes.STREAMS`, -1 where the row is of no stream.
    true_value, value, censor
        Float64 and int8; NaN where there is none.
    cells
        Column name (all but ``reported_at``) -> text.
    """

    time: Ints
    category: Ints
    stream: Ints
    true_value: Floats
    value: Floats
    censor: npt.NDArray[np.int8]
    cells: dict[str, Texts]

    def __len__(self) -> int:
        return len(self.time)

    def take(self, index: Ints) -> "Rows":
        """Copy of chosen rows."""
        cells = {name: cell[index] for name, cell in self.cells.items()}
        return Rows(
            self.time[index], self.category[index], self.stream[index], self.true_value[index], self.value[index],
            self.censor[index], cells,
        )  # fmt: skip

    def set(self, index: Ints, category: Category, **cells: str | Texts) -> None:
        """Give rows a category and, in some columns, another text."""
        self.category[index] = category
        for name, text in cells.items():
            self.cells[name][index] = text

    def lines(self, hours: Hours) -> list[str]:
        """Every row as a line of CSV, without its end of line."""
        columns = [self.cells[name].tolist() for name in COLUMNS[1:]]
        return list(map(",".join, zip(local_text(hours, self.time), *columns, strict=True)))


def join(parts: Sequence[Rows]) -> Rows:
    """Rows one part after the other."""
    return Rows(
        time=np.concatenate([part.time for part in parts]),
        category=np.concatenate([part.category for part in parts]),
        stream=np.concatenate([part.stream for part in parts]),
        true_value=np.concatenate([part.true_value for part in parts]),
        value=np.concatenate([part.value for part in parts]),
        censor=np.concatenate([part.censor for part in parts]),
        cells={name: np.concatenate([part.cells[name] for part in parts]) for name in COLUMNS[1:]},
    )


def same(text: str, count: int) -> Texts:
    """A column that holds one text throughout."""
    return np.full(count, text, dtype=object)


def patient_rows(draws: Draws, sample: StreamSample, stream: int) -> Rows:
    """The patient results of one stream."""
    count = len(sample)
    who = draws.patient[sample.draw]
    named = f"{sample.analyte.code}-{sample.line.rpartition('-')[2].upper()}"
    lots = np.array([f"{named}-{number:02}" for number in range(int(sample.lot.max(initial=0)) + 1)], dtype=object)
    ages = np.array([str(age) for age in range(102)], dtype=object)
    cells = {
        "test": same(sample.analyte.code, count),
        "line": same(sample.line, count),
        "result": sample.text.copy(),
        "unit": same(sample.analyte.unit, count),
        "specimen": sample.specimen,
        "location": sample.ward,
        "sex": np.array(["F", "M"], dtype=object)[draws.patients.male[who].astype(np.int64)],
        "age": ages[draws.patients.age[who]],
        "lot": lots[sample.lot],
        "patient": sample.patient,
        "kind": same("P", count),
    }
    ordinary = np.full(count, Category.ORDINARY, dtype=np.int64)
    index = np.full(count, stream, dtype=np.int64)
    return Rows(sample.time, ordinary, index, sample.true_value, sample.value, sample.censor, cells)


def material_rows(
    time: Ints, value: Floats, text: Texts, specimen: Texts, analyte: Analyte, line: str, stream: int, role: str
) -> Rows:
    """Measurements of materials that come from no patient: role "Q" control, "F" proficiency."""
    count = len(time)
    category = {"Q": Category.CONTROL, "F": Category.PROFICIENCY}[role]
    cells = {name: same("", count) for name in COLUMNS[1:]}
    cells |= {
        "test": same(analyte.code, count),
        "line": same(line, count),
        "result": text,
        "unit": same(analyte.unit, count),
        "specimen": specimen,
        "location": same({"Q": "QC", "F": "EQA"}[role], count),
        "kind": same(role, count),
    }
    whole = np.full(count, category, dtype=np.int64)
    nothing = np.full(count, np.nan)
    return Rows(time, whole, np.full(count, stream, dtype=np.int64), nothing, value, np.zeros(count, np.int8), cells)


def control_rows(controls: ControlResults, analyte: Analyte, line: str, stream: int) -> Rows:
    """The control results of one stream as the export shows them."""
    specimen = np.array(["", "QC-LEVEL-1", "QC-LEVEL-2"], dtype=object)[controls.level]
    return material_rows(controls.time, controls.value, controls.text, specimen, analyte, line, stream, "Q")
