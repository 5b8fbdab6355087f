"""One stream: its results in order of time, without rows that came twice, reruns of a specimen, and repeats of a patient.

- The first run of a specimen counts; a further one within 24 hours is a rerun. (Taking the last run would couple the monitor to the rule
  that asks for reruns.) With the same time and value it is a duplicate.
- Rows without a specimen are duplicates only of rows of another extract: two like rows in one extract may well be two patients.
- Where repeats are limited, results of a patient that follow one that counts by less are left out.
"""

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from pbm.records.intake import COVARIATES, LEFT_OUT_SCHEMA, Sifted
from pbm.records.stream import RERUN_HOURS, StreamName

Rows = npt.NDArray[np.int64]
Keys = npt.NDArray[np.int64] | npt.NDArray[np.float64] | npt.NDArray[np.int8]
_HOUR = 3_600_000_000


def sift(name: StreamName, results: pa.Table, repeat_hours: float) -> Sifted:
    """Order the results of one stream in time and leave out duplicates, reruns and repeats.

    Parameters
    ----------
    name
        The stream.
    results
        `RESULT_SCHEMA`, in the order in which they came, which decides between results of the same time.
    repeat_hours
        A patient's results count at most once in so many hours; 0: all of them count.
    """
    time = _numbers(results, "time")
    order = np.argsort(time, kind="stable")
    time = time[order]
    every = np.arange(len(time))
    duplicate, rerun, repeat = every.copy(), every.copy(), every.copy()

    specimen, without = _codes(results, "specimen")
    bare = every[specimen[order] == without]
    duplicate[bare] = bare[_resent(results.take(order[bare]))]
    marked = every[specimen[order] != without]
    rerun[marked] = marked[_first_within(specimen[order[marked]], time[marked], RERUN_HOURS)]
    again = _groups_of_several(rerun)
    duplicate[again] = again[_alike(rerun[again], *_measured(results.take(order[again])))[0]]

    if repeat_hours:
        patient, unknown = _codes(results, "patient")
        known = every[(patient[order] != unknown) & (duplicate == every) & (rerun == every)]
        repeat[known] = known[_first_within(patient[order[known]], time[known], repeat_hours)]
    reasons = {
        "duplicate": duplicate,
        "rerun of the specimen": rerun,
        f"same patient within {repeat_hours:g} h": repeat,
    }
    return _parted(name, results, order, reasons)


def _parted(name: StreamName, results: pa.Table, order: Rows, reasons: dict[str, Rows]) -> Sifted:
    """Rows that give way to no other are kept; the first reason of the others is told, with the row that counts instead."""
    every = np.arange(len(results))
    kept = np.ones(len(results), np.bool_)
    left = [LEFT_OUT_SCHEMA.empty_table()]
    for reason, instead in reasons.items():
        rows = every[kept & (instead != every)]
        kept[rows] = False
        left.append(_left_out(name, results.take(order[rows]), reason, results.take(order[instead[rows]])))
    return Sifted(results.take(order[kept]), pa.concat_tables(left))


def _left_out(name: StreamName, rows: pa.Table, reason: str, instead: pa.Table) -> pa.Table:
    line = pc.binary_join_element_wise("line", instead["line"].cast(pa.string()), " ")
    found = pc.if_else(
        pc.equal(rows["file"], instead["file"]), line, pc.binary_join_element_wise(line, "of", instead["file"], " ")
    )
    columns = [rows["file"], rows["line"], pa.repeat(reason, len(rows)), found, pa.repeat(str(name), len(rows))]
    return pa.table(columns, schema=LEFT_OUT_SCHEMA)


def _resent(results: pa.Table) -> Rows:
    """For each row the first row that is the same in everything and is as many-th of its kind in its extract."""
    same: list[Keys] = [*_measured(results), *(_codes(results, role)[0] for role in COVARIATES)]
    _, count = _alike(_codes(results, "file")[0], *same)
    return _alike(count, *same)[0]


def _alike(*keys: Keys) -> tuple[Rows, Rows]:
    """For each row the first row with the same keys, and how many such rows come before it."""
    order = np.lexsort(keys)
    fresh = np.ones(len(order), np.bool_)
    fresh[1:] = np.any([key[order][1:] != key[order][:-1] for key in keys], axis=0)
    every = np.arange(len(order))
    start = np.maximum.accumulate(np.where(fresh, every, 0))
    first, before = np.empty_like(order), np.empty_like(order)
    first[order], before[order] = order[start], every - start
    return first, before


def _groups_of_several(leader: Rows) -> Rows:
    """The rows that share their leader with others."""
    size = np.bincount(leader, minlength=1)
    return np.flatnonzero(size[leader] > 1)


def _first_within(who: Rows, time: Rows, hours: float) -> Rows:
    """For each row the row that counts for it: the first of the same `who`, or the first after more than so many hours since that."""
    counts = np.arange(len(who))
    several = _groups_of_several(who)
    several = several[np.argsort(who[several], kind="stable")]
    instead, leader, last, since = [], -1, -1, 0
    for row, one, at in zip(several.tolist(), who[several].tolist(), time[several].tolist(), strict=True):
        if one != last or at - since > hours * _HOUR:
            leader, last, since = row, one, at
        instead.append(leader)
    counts[several] = instead
    return counts


def _measured(results: pa.Table) -> tuple[Rows, npt.NDArray[np.float64], npt.NDArray[np.int8]]:
    return _numbers(results, "time"), np.array(results["value"]), np.array(results["censor"])


def _numbers(results: pa.Table, column: str) -> Rows:
    return np.array(results[column].cast(pa.int64()))


def _codes(results: pa.Table, column: str) -> tuple[Rows, int]:
    """A column of text as numbers, and the number of ""; -1 where there is none."""
    encoded = results[column].combine_chunks().dictionary_encode()
    return np.array(encoded.indices, np.int64), pc.index(encoded.dictionary, "").as_py()
