"""Streams that a command has finished, kept in a working folder until all are, so that it can go on where it was interrupted.

A file a stream: a line that names everything that decides the result, and a line with the result. A result is used again only where that
first line is what this command would write.
"""

import json
from collections.abc import Iterable, Mapping
from contextlib import suppress
from pathlib import Path
from typing import Generic, TypeVar

from pydantic import TypeAdapter, ValidationError

from pbm.commands.versions import origin
from pbm.errors import InputError
from pbm.io.atomic import replace_file
from pbm.io.history import stream_folder
from pbm.records.stream import StreamName

T = TypeVar("T")


class FinishedStreams(Generic[T]):
    """Results of streams in a working folder.

    Parameters
    ----------
    folder
        The working folder; made when the first stream is finished.
    kind
        The type of a result, one that pydantic reads and writes as JSON.
    decided_by
        What decides the results beside each stream's history and the versions of pbm and its libraries.
    """

    def __init__(self, folder: Path, kind: type[T], decided_by: Mapping[str, str]) -> None:
        self._folder = folder
        self._results = TypeAdapter(kind)
        self._decided_by = {**origin(), **decided_by}

    def result(self, name: StreamName, history_sha256: str) -> T | None:
        """What was kept of a stream, if it would come out the same now."""
        try:
            head, _, body = self._place(name).read_bytes().partition(b"\n")
            return self._results.validate_json(body) if head == self._head(history_sha256) else None
        except (OSError, ValidationError):
            return None

    def keep(self, name: StreamName, history_sha256: str, result: T) -> None:
        """Keep a result; on disk and whole when this returns.

        Raises
        ------
        InputError
            If it cannot be written.
        """
        try:
            self._folder.mkdir(exist_ok=True)
            body = self._results.dump_json(result)
            replace_file(self._place(name), b"\n".join([self._head(history_sha256), body, b""]))
        except OSError as error:
            raise InputError(
                f"{self._folder} cannot be written ({error.strerror}), so finished streams cannot be kept. Make room or allow this user to "
                "write there, and give the same command again."
            ) from None

    def remove(self, names: Iterable[StreamName]) -> None:
        """Forget streams, and the folder when it is empty."""
        for name in names:
            self._place(name).unlink(missing_ok=True)
        with suppress(OSError):  # other streams are kept there, or nothing ever was
            self._folder.rmdir()

    def _place(self, name: StreamName) -> Path:
        return self._folder / f"{stream_folder(name)}.ndjson"

    def _head(self, history_sha256: str) -> bytes:
        return json.dumps({**self._decided_by, "history": history_sha256}, sort_keys=True).encode()
