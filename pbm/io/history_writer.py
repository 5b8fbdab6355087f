"""Extracts into `history/` in two passes, in bounded memory, whole or not at all.

Pass 1 lays the parsed rows down in one scratch file, stream by stream within each block. Pass 2 brings together what the old history and
the scratch file hold of one stream at a time, lets the caller sift it, and writes its Parquet file. All of it happens in a scratch folder
beside the history, which takes the history's place at the end by a rename.
"""

import fcntl
import json
import os
import secrets
import shutil
import tempfile
from collections import defaultdict
from collections.abc import Callable, Iterable, Iterator
from dataclasses import asdict
from pathlib import Path
from types import TracebackType
from typing import Self

import pyarrow as pa
import pyarrow.parquet as pq

from pbm.errors import InputError
from pbm.io.history import (
    EXTRACTS,
    LEFT_OUT,
    PATIENT_KEY,
    RESULTS,
    read_extracts,
    read_results,
    set_aside,
    stream_folder,
)
from pbm.records.intake import LEFT_OUT_SCHEMA, RESULT_SCHEMA, ParsedBlock, Sifted, TakenExtract
from pbm.records.stream import StreamName

_MOST_STREAMS = 2000
_LEFT_OUT_ROWS = 100_000

Sift = Callable[[StreamName, pa.Table], Sifted]


class HistoryWriter:
    """Writes a new history from the old one, if any, and new rows: `add` blocks, `merge`, `put_in_place`.

    As a context it removes everything that was not put in place.

    Attributes
    ----------
    patient_key
        The key of this history's tokens for patients.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        if not folder.exists() and (kept := set_aside(folder)).is_dir():
            kept.rename(folder)
        self._old = folder if folder.is_dir() else None
        self._held = read_extracts(folder)
        _remove_abandoned(folder)
        self._scratch = Path(tempfile.mkdtemp(dir=folder.parent, prefix=f".{folder.name}-"))
        self._lock = _locked(self._scratch)
        self._new = self._scratch / "new"
        self._new.mkdir()
        self.patient_key = self._own_key()
        self._spool = pa.ipc.new_file(str(self._scratch / "rows.arrow"), RESULT_SCHEMA)
        self._left_out = _LeftOutFile(self._new / LEFT_OUT)
        self._batches: dict[StreamName, list[int]] = defaultdict(list)
        self._written = 0

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._spool.close()
        self._left_out.close()
        shutil.rmtree(self._scratch, ignore_errors=True)
        if self._lock is not None:
            os.close(self._lock)

    def add(self, block: ParsedBlock) -> None:
        """Take over a block.

        Raises
        ------
        InputError
            If there are too many streams for their names to be those of analysers.
        """
        self._left_out.add(block.left_out)
        start = 0
        for name, rows in block.streams:
            self._spool.write_batch(block.results.slice(start, rows).combine_chunks().to_batches()[0])
            self._batches[name].append(self._written)
            self._written += 1
            start += rows
        if len(self._batches) > _MOST_STREAMS:
            raise InputError(
                f"There are more than {_MOST_STREAMS} streams (analyte on analyser), the last of them {name}. Does the column that "
                "lab.toml names as extract.analyser really hold the analyser?"
            )

    @property
    def streams(self) -> list[StreamName]:
        """Streams that got rows so far."""
        return sorted(self._batches)

    def merge(self, sift: Sift) -> Iterator[StreamName]:
        """Write the streams that got rows, one by one; each is told when it is done.

        Parameters
        ----------
        sift
            Puts all rows of a stream (the old ones first) in order and leaves some out.
        """
        self._spool.close()
        with pa.OSFile(str(self._scratch / "rows.arrow")) as file:
            spool = pa.ipc.open_file(file)
            for name in self.streams:
                batches = [spool.get_batch(number) for number in self._batches[name]]
                sifted = sift(name, pa.concat_tables([self._old_rows(name), pa.Table.from_batches(batches)]))
                self._left_out.add(sifted.left_out)
                (self._new / stream_folder(name)).mkdir()
                _write_results(sifted.results, self._new / stream_folder(name) / RESULTS)
                yield name

    def put_in_place(self, extracts: Iterable[TakenExtract]) -> None:
        """Make what was merged the history; streams without new rows stay as they were.

        Parameters
        ----------
        extracts
            All extracts that the history is then made from.

        Raises
        ------
        InputError
            If another intake changed the history meanwhile.
        """
        self._keep_old_left_out()
        self._left_out.close()
        for path in self._old.glob(f"*/{RESULTS}") if self._old else ():
            place = self._new / path.parent.name / RESULTS
            if not place.exists():
                place.parent.mkdir()
                _link(path, place)
        (self._new / EXTRACTS).write_text(
            json.dumps([asdict(one) for one in extracts], indent=1, ensure_ascii=False) + "\n", "utf-8"
        )
        for path in self._new.rglob("*.*"):
            _to_disk(path)
        if read_extracts(self._folder) != self._held:
            raise InputError(
                f"Another intake changed {self._folder} meanwhile; nothing was taken by this one. Run it again."
            )
        self._swap()

    def _keep_old_left_out(self) -> None:
        if self._old and (self._old / LEFT_OUT).exists():
            with pq.ParquetFile(self._old / LEFT_OUT) as file:
                for batch in file.iter_batches():
                    self._left_out.add(pa.Table.from_batches([batch]).cast(LEFT_OUT_SCHEMA))

    def _swap(self) -> None:
        kept = set_aside(self._folder)
        try:
            if self._old:
                self._folder.rename(kept)
            self._new.rename(self._folder)
        except BaseException:
            if kept.exists() and not self._folder.exists():
                kept.rename(self._folder)
            raise
        shutil.rmtree(kept, ignore_errors=True)

    def _own_key(self) -> bytes:
        old = self._old / PATIENT_KEY if self._old else None
        key = old.read_bytes() if old and old.exists() else secrets.token_bytes(32)
        place = self._new / PATIENT_KEY
        place.touch(0o600)
        place.write_bytes(key)
        return key

    def _old_rows(self, name: StreamName) -> pa.Table:
        if self._old and (self._old / stream_folder(name) / RESULTS).exists():
            return read_results(self._old, name).cast(RESULT_SCHEMA)
        return RESULT_SCHEMA.empty_table()


def _remove_abandoned(folder: Path) -> None:
    """Remove scratch folders whose intake was killed: nobody holds their lock any more."""
    for scratch in folder.parent.glob(f".{folder.name}-*"):
        if (lock := _locked(scratch)) is not None:
            shutil.rmtree(scratch, ignore_errors=True)
            os.close(lock)


def _locked(scratch: Path) -> int | None:
    """A lock on a scratch folder, which ends with the process however that ends; None if another process holds it."""
    handle = os.open(scratch, os.O_RDONLY)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        os.close(handle)
        return None
    return handle


class _LeftOutFile:
    """`left-out.parquet`, written some hundred thousand rows at a time."""

    def __init__(self, path: Path) -> None:
        self._writer = pq.ParquetWriter(path, LEFT_OUT_SCHEMA, compression="zstd")
        self._waiting: list[pa.Table] = []

    def add(self, rows: pa.Table) -> None:
        self._waiting.append(rows)
        if sum(map(len, self._waiting)) >= _LEFT_OUT_ROWS:
            self._flush()

    def close(self) -> None:
        if self._writer.is_open:
            self._flush()
            self._writer.close()

    def _flush(self) -> None:
        if self._waiting:
            self._writer.write_table(pa.concat_tables(self._waiting))
        self._waiting = []


def _write_results(results: pa.Table, path: Path) -> None:
    """Columns with few different texts by dictionary, rising numbers by their steps: half the time and size of the defaults."""
    rising = ("time", "line")
    dictionary = [name for name in results.column_names if name not in (*rising, "specimen")]
    steps = dict.fromkeys(rising, "DELTA_BINARY_PACKED")
    pq.write_table(results, path, compression="zstd", use_dictionary=dictionary, column_encoding=steps)


def _link(path: Path, place: Path) -> None:
    try:
        place.hardlink_to(path)
    except OSError:
        shutil.copyfile(path, place)


def _to_disk(path: Path) -> None:
    if not path.is_file():
        return
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
