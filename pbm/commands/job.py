"""One stream's work, wherever it is done: read its history there, run the task, and give the result or the reason why there is none."""

import hashlib
import platform
import traceback
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Generic, TypeVar

from pbm.errors import InputError, PbmError
from pbm.records.stream import StreamHistory, StreamName

T = TypeVar("T")
Task = Callable[[StreamHistory], T]


@dataclass(frozen=True)
class Done(Generic[T]):
    """What a task gave for a stream, or why it failed."""

    name: StreamName
    result: T | None
    failure: str = ""


@dataclass(frozen=True, eq=False)
class Job(Generic[T]):
    """A task on one stream; picklable where its task is.

    Attributes
    ----------
    history
        The folder, by its full path: a worker on another machine has another working folder.
    name
        The stream.
    sha256
        Of the stream's file when the work began.
    task
        A picklable function of a history.
    """

    history: Path
    name: StreamName
    sha256: str
    task: Task[T]

    def __call__(self) -> Done[T]:
        """Do it; whatever goes wrong is told in the answer, so that the other streams are not lost."""
        from pbm.io.history import read_history

        try:
            self._check()
            return Done(self.name, self.task(read_history(self.history, self.name)))
        except PbmError as error:
            return self.failed(str(error))
        except Exception as error:  # a defect in one stream must not lose the others' work; it is told in full
            place = traceback.extract_tb(error.__traceback__)[-1]
            return self.failed(f"{type(error).__name__}: {error} ({Path(place.filename).name}:{place.lineno})")

    def failed(self, why: str) -> Done[T]:
        """The answer of a job that came to nothing."""
        return Done(self.name, None, why)

    def _check(self) -> None:
        path = stream_file(self.history, self.name)
        if not path.is_file():
            raise InputError(f"{path} is not there, as seen from {platform.node()}. {FOLDER_SHARED}")
        if file_sha256(path) != self.sha256:
            raise InputError(
                f"{path}, as seen from {platform.node()}, is not the file with which the work began: it was changed meanwhile, or that "
                f"machine sees another folder. Start the same command again. {FOLDER_SHARED}"
            )


FOLDER_SHARED = "Every worker of a cluster must see the laboratory's folder under the same path."


def stream_file(history: Path, name: StreamName) -> Path:
    """The Parquet file of a stream."""
    from pbm.io.history import RESULTS, stream_folder

    return history / stream_folder(name) / RESULTS


def file_sha256(path: Path) -> str:
    """SHA-256 of a file's bytes, in hexadecimal; the file is never whole in memory."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
