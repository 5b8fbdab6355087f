"""What a laboratory's export holds besides clean results, in known numbers: the mess is made here and accounted for in `account`.

Each row gets one category at most, so the account adds up: rows = taken + left out, by reason.
"""

from dataclasses import asdict, dataclass
from datetime import datetime, time, timedelta

import numpy as np
import numpy.typing as npt

from synthetic_streams.analysers import measure
from synthetic_streams.analytes import BY_KEY, CHEMISTRY, STREAMS
from synthetic_streams.clock import HOUR, SECOND, midnight, utc
from synthetic_streams.laboratory import Laboratory
from synthetic_streams.reporting import report
from synthetic_streams.rows import Category, Rows, join, material_rows, same
from synthetic_streams.seeds import child

Ints = npt.NDArray[np.int64]

COMMENTS = ("HEM", "QNS", "see note")
GLUCOSE_MG_PER_DL = 18.016
SLIP_FROM, SLIP_HOURS = time(14), 4


@dataclass(frozen=True, slots=True)
class MessCounts:
    """How many rows of each mess; the unit slip and the control rows follow from the clock."""

    reruns: int = 150
    duplicates: int = 120
    hem: int = 60
    qns: int = 25
    see_note: int = 15
    other_spelling: int = 400
    late: int = 200
    unmapped: int = 80
    proficiency: int = 44
    blank_lines: int = 2
    cut_short: int = 1

    def scaled(self, rows: int) -> "MessCounts":
        """In proportion for an export of another size than 450,000 rows, at least one of each; never more than here."""
        factor = min(1.0, rows / 450_000)
        counts = {name: max(1, round(count * factor)) for name, count in asdict(self).items()}
        return MessCounts(**{**counts, "blank_lines": self.blank_lines, "cut_short": self.cut_short})


@dataclass(frozen=True, slots=True)
class Spoiled:
    """Rows in file order, and the rows before which a blank line stands (in order)."""

    rows: Rows
    blanks: Ints


def spoil(laboratory: Laboratory, rows: Rows, days: int) -> Spoiled:
    """Make the mess of an export.

    Parameters
    ----------
    laboratory
        Gives seed, first day and levels.
    rows
        Patient and control results in any order; changed in place.
    days
        Days that the export covers.
    """
    rng = child(laboratory.seed, "mess")
    counts = MessCounts().scaled(len(rows))
    slip_unit(laboratory, rows, days)
    added = [
        rerun(laboratory, rows, counts.reruns, days, rng),
        ask_unmapped(rows, counts.unmapped, rng),
        proficiency(laboratory, counts.proficiency, days, rng),
    ]
    copies = pick(rows, counts.duplicates, rng)
    rows.set(copies, Category.ORIGINAL)
    for text, count in zip(COMMENTS, (counts.hem, counts.qns, counts.see_note), strict=True):
        rows.set(pick(rows, count, rng), Category.COMMENT, result=text)
    respell(rows, counts.other_spelling, rng)
    rows.set(pick(rows, counts.late, rng), Category.LATE)
    rows.set(pick(rows, counts.cut_short, rng), Category.CUT_SHORT)
    return _in_file_order(join([rows, *added]), copies, counts.blank_lines, rng)


def pick(rows: Rows, count: int, rng: np.random.Generator, among: npt.NDArray[np.bool_] | None = None) -> Ints:
    """Indices of ordinary rows chosen at random.

    Raises
    ------
    ValueError
        If there are fewer than `count`.
    """
    ordinary = rows.category == Category.ORDINARY
    free = np.flatnonzero(ordinary if among is None else ordinary & among)
    if len(free) < count:
        raise ValueError(f"{len(free)} results are too few to spoil {count} of them: give more days or a larger volume")
    return rng.choice(free, count, replace=False)


def slip_unit(laboratory: Laboratory, rows: Rows, days: int) -> None:
    """For four hours of a working day (the Wednesday next to two fifths of the history) glucose leaves in mg/dL."""
    near = laboratory.first_day + timedelta(int(0.4 * days))
    wednesday = near + timedelta(2 - near.weekday())
    day = wednesday if laboratory.first_day <= wednesday < laboratory.first_day + timedelta(days) else near
    start = utc(datetime.combine(day, SLIP_FROM))
    glucose = np.array([analyte.key == "glucose" for analyte, _ in STREAMS])[rows.stream]
    hit = (rows.category == Category.ORDINARY) & glucose
    hit &= (rows.time >= start) & (rows.time < start + SLIP_HOURS * HOUR)
    index = np.flatnonzero(hit)
    signs = {-1: "<", 0: "", 1: ">"}
    pairs = zip(rows.value[index].tolist(), rows.censor[index].tolist(), strict=True)
    texts = [f"{signs[censor]}{value * GLUCOSE_MG_PER_DL:.0f}" for value, censor in pairs]
    rows.set(index, Category.OTHER_UNIT, result=np.array(texts, dtype=object), unit="mg/dL")


def rerun(laboratory: Laboratory, rows: Rows, count: int, days: int, rng: np.random.Generator) -> Rows:
    """Measure some specimens again minutes later, where the second value differs from the first."""
    end = midnight(laboratory.first_day + timedelta(days))
    index = pick(rows, min(6 * count, len(rows) // 4), rng, rows.time < end - HOUR)
    again = rows.take(index)
    again.time = again.time + rng.integers(4 * 60, 16 * 60, size=len(again)) * SECOND
    for stream in np.unique(again.stream).tolist():
        analyte, line = STREAMS[stream]
        part = np.flatnonzero(again.stream == stream)
        level = laboratory.levels(analyte, line).at(again.time[part])
        seen = report(analyte, measure(analyte, again.true_value[part], level, rng))
        again.value[part], again.censor[part] = seen.value, seen.censor
        again.set(part, Category.RERUN, result=seen.text)
    kept = np.flatnonzero(again.cells["result"] != rows.cells["result"][index])[:count]
    rows.set(index[kept], Category.ORIGINAL)
    return again.take(kept)


def ask_unmapped(rows: Rows, count: int, rng: np.random.Generator) -> Rows:
    """Results of a test that nobody mapped, from specimens of the chemistry lines."""
    chemistry = np.array([line in CHEMISTRY for _, line in STREAMS])[rows.stream]
    extra = rows.take(pick(rows, count, rng, chemistry))
    extra.set(
        np.arange(count), Category.UNMAPPED_TEST, test="LIPAEMIA INDEX", unit="",
        result=np.array([str(index) for index in rng.integers(0, 60, size=count).tolist()], dtype=object),
    )  # fmt: skip
    extra.stream[:] = -1
    return extra


def proficiency(laboratory: Laboratory, count: int, days: int, rng: np.random.Generator) -> Rows:
    """Samples of an external scheme, run among patient specimens at 11:00 of random days."""
    parts = []
    for number in range(count):
        stream = number % len(STREAMS)
        analyte, line = STREAMS[stream]
        day = laboratory.first_day + timedelta(int(rng.integers(days)))
        at = np.array([utc(datetime.combine(day, time(11)))], dtype=np.int64)
        mean = np.array([rng.uniform(*analyte.levels)])
        seen = report(analyte, measure(analyte, mean, laboratory.levels(analyte, line).at(at), rng))
        parts.append(
            material_rows(at, seen.value, seen.text, same(f"EQA-31-{number + 1:02d}", 1), analyte, line, stream, "F")
        )
    return join(parts)


def respell(rows: Rows, count: int, rng: np.random.Generator) -> None:
    """Some sodium results carry the test's other spelling."""
    sodium = np.array([analyte.key == "sodium" for analyte, _ in STREAMS])[rows.stream]
    index = pick(rows, count, rng, sodium)
    rows.set(index, Category.OTHER_SPELLING, test=BY_KEY["sodium"].spellings[0])


def _in_file_order(rows: Rows, copies: Ints, blanks: int, rng: np.random.Generator) -> Spoiled:
    """By time, but late rows up to 40 lines down and duplicates up to 30 lines below their originals."""
    position = np.empty(len(rows))
    position[np.argsort(rows.time, kind="stable")] = np.arange(len(rows))
    late = np.flatnonzero(rows.category == Category.LATE)
    position[late] += rng.uniform(5, 40, size=len(late))
    duplicates = rows.take(copies)
    duplicates.set(np.arange(len(copies)), Category.DUPLICATE)
    position = np.concatenate([position, position[copies] + rng.uniform(1, 30, size=len(copies))])
    whole = join([rows, duplicates]).take(np.argsort(position, kind="stable"))
    return Spoiled(whole, np.sort(rng.choice(len(whole), blanks, replace=False)))
