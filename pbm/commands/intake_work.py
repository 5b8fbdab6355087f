"""The walk of an intake: extract -> rows -> history, with progress on a terminal; nothing is changed unless all of it succeeds."""

import sys
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path

import pyarrow as pa
import typer

from pbm.errors import InputError, one_line
from pbm.io.extract import extract_fingerprint, open_extract
from pbm.io.history import read_extracts
from pbm.io.history_writer import HistoryWriter
from pbm.records.intake import Sifted, TakenExtract, TextBlock
from pbm.records.laboratory import Lab
from pbm.records.stream import StreamName
from pbm.stages.intake import Account, RowReader, sift, warnings

_STEPS = 1000
_READING = 0.8  # of the time; the rest goes into sorting and writing


@dataclass
class Taken:
    """What an intake did: its account, what was guessed about each extract, extracts passed over, warnings."""

    account: Account = field(default_factory=Account)
    guesses: dict[str, list[str]] = field(default_factory=dict)
    passed_over: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)


@dataclass(frozen=True)
class _NewExtract:
    path: Path
    name: str
    sha256: str


def take(files: list[Path], history: Path, lab: Lab, lab_sha256: str) -> Taken:
    """Take extracts into the history.

    Raises
    ------
    InputError
        If a file cannot be used, or nothing was taken from any; the history is then as it was.
    """
    taken = Taken()
    before = read_extracts(history)
    new = _not_taken_yet(files, before, lab_sha256, taken)
    try:
        _take_new(new, before, history, lab, lab_sha256, taken)
    except OSError as error:
        raise InputError(
            f"{history} cannot be written: {one_line(error)}. It is as it was; make room or ask for the right to write."
        ) from None
    taken.warnings += warnings(taken.account, pooled=lab.extract.analyser is None)
    return taken


def _take_new(
    new: list[_NewExtract], before: list[TakenExtract], history: Path, lab: Lab, lab_sha256: str, taken: Taken
) -> None:
    with HistoryWriter(history) as writer, _progress() as progress:
        for number, one in enumerate(new):
            for share in _read(one, lab, writer, taken):
                progress(_READING * (number + share) / len(new))
        _merge(lab, writer, taken.account, progress)
        if not taken.account.taken:
            raise InputError(f"Nothing was taken: {_why_nothing(taken)}. {history} is as it was.")
        writer.put_in_place([*before, *_told(new, taken.account, lab_sha256)])


def _not_taken_yet(files: list[Path], before: list[TakenExtract], lab_sha256: str, taken: Taken) -> list[_NewExtract]:
    """The extracts whose bytes are new, each under a name of its own."""
    known = {one.sha256: one for one in before}
    names = {one.name for one in before}
    new: dict[str, _NewExtract] = {}
    for path in files:
        sha256 = extract_fingerprint(path)
        if sha256 in known:
            taken.passed_over.append(_passed_over(path, known[sha256], lab_sha256))
        elif sha256 in new:
            taken.passed_over.append(f"{path} is the same as {new[sha256].path}")
        else:
            new[sha256] = _NewExtract(path, _own_name(path.name, names), sha256)
            names.add(new[sha256].name)
    return list(new.values())


def _passed_over(path: Path, one: TakenExtract, lab_sha256: str) -> str:
    again = (
        ""
        if one.lab_sha256 == lab_sha256
        else " under another lab.toml (to take it under this one, delete history/ and take all again)"
    )
    return f"{path} was taken before, as {one.name}{again}"


def _own_name(name: str, names: set[str]) -> str:
    return next(
        one
        for number in range(1, len(names) + 2)
        if (one := name if number == 1 else f"{name} ({number})") not in names
    )


def _read(one: _NewExtract, lab: Lab, writer: HistoryWriter, taken: Taken) -> Iterator[float]:
    """Lay the rows of one extract down; tells from time to time which share of it has been read."""
    extract = open_extract(one.path, one.name, lab.extract)
    reader = RowReader(lab, writer.patient_key)
    for block in _one_ahead(extract.blocks()):
        parsed = reader.parse(block)
        writer.add(parsed)
        taken.account.add_block(one.name, parsed)
        yield extract.share_read
    taken.guesses[one.name] = [*extract.guesses, *_guesses(reader)]


def _one_ahead(blocks: Iterator[TextBlock]) -> Iterator[TextBlock]:
    """The same blocks, the next being read while one is worked on."""
    with ThreadPoolExecutor(1) as reader:
        coming = reader.submit(next, blocks, None)
        while (block := coming.result()) is not None:
            coming = reader.submit(next, blocks, None)
            yield block


def _guesses(reader: RowReader) -> Iterator[str]:
    if count := reader.clock.by_sequence:
        yield f"{count:,} times lie in an hour that the clocks repeat; the sequence of the lines told the passages apart"
    if count := reader.covariates.not_read["age"]:
        yield f"{count:,} ages are no ages (such as a birth date) and were not kept"
    if count := reader.covariates.not_read["sex"]:
        yield f"{count:,} entries for sex say neither female nor male and count as not known"


def _merge(lab: Lab, writer: HistoryWriter, account: Account, progress: Callable[[float], None]) -> None:
    def sifted(name: StreamName, results: pa.Table) -> Sifted:
        parts = sift(name, results, lab.analytes[name.analyte].repeat_hours)
        account.add_stream(name, parts)
        return parts

    for number, _ in enumerate(writer.merge(sifted), start=1):
        progress(_READING + (1 - _READING) * number / len(writer.streams))


def _why_nothing(taken: Taken) -> str:
    reasons = [f"{count:,} rows left out: {reason}" for reason, count in taken.account.reasons.most_common(3)]
    empty = [f"{name} has a header line and no rows" for name in taken.guesses if not taken.account.extracts[name].rows]
    return "; ".join([*taken.passed_over, *empty, *reasons])


def _told(new: list[_NewExtract], account: Account, lab_sha256: str) -> Iterator[TakenExtract]:
    at = datetime.now(UTC).isoformat(timespec="seconds")
    for one in new:
        rows = account.extracts[one.name]
        yield TakenExtract(one.name, one.sha256, lab_sha256, at, rows.rows, rows.taken)


@contextmanager
def _progress() -> Iterator[Callable[[float], None]]:
    with typer.progressbar(length=_STEPS, label="Taking", file=sys.stderr, hidden=not sys.stderr.isatty()) as bar:
        yield lambda share: bar.update(int(share * _STEPS) - bar.pos)
