"""Work on many streams at once: one task a stream, read in the worker; a stream that fails tells why and does not stop the others."""

import os
import sys
import traceback
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Generic, TypeVar

import typer

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


def chosen_streams(history: Path, given: list[str] | None) -> list[StreamName]:
    """The streams named on the command line, or all in the history; the longest first, so that workers end together.

    Raises
    ------
    InputError
        If a name is not in the history.
    """
    from pbm.io.history import stream_sizes

    sizes = stream_sizes(history)
    wanted = [StreamName.parse(text) for text in given] if given else list(sizes)
    for name in wanted:
        if name not in sizes:
            known = ", ".join(str(n) for n in sorted(sizes)) or "none"
            raise InputError(f"There is no stream {name} in {history}. Streams there: {known}.")
    return sorted(wanted, key=lambda n: (-sizes[n], n))


def over_streams(
    history: Path, names: list[StreamName], task: Task[T], workers: int | None, label: str
) -> list[Done[T]]:
    """Run a task on each stream's history in worker processes; results in order of stream name, whatever the number of workers.

    Parameters
    ----------
    history
        The folder; each worker reads its own stream.
    task
        A picklable function of a history.
    workers
        Processes; the number of processors if not given.
    label
        Shown with the progress on a terminal.
    """
    count = min(workers or os.cpu_count() or 1, len(names))
    jobs = _finished(history, names, task, count)
    with typer.progressbar(
        jobs, length=len(names), label=label, file=sys.stderr, hidden=not sys.stderr.isatty()
    ) as progress:
        return sorted(progress, key=lambda done: done.name)


def _finished(history: Path, names: list[StreamName], task: Task[T], workers: int) -> Iterator[Done[T]]:
    if workers <= 1:
        yield from (_attempt(history, name, task) for name in names)
        return
    from joblib import Parallel, delayed

    run: Any = Parallel(n_jobs=workers, return_as="generator_unordered")
    yield from run(delayed(_attempt)(history, name, task) for name in names)


def _attempt(history: Path, name: StreamName, task: Task[T]) -> Done[T]:
    from pbm.io.history import read_history

    try:
        return Done(name, task(read_history(history, name)))
    except PbmError as error:
        return Done(name, None, str(error))
    except Exception as error:  # a defect in one stream must not lose the others' work; it is told in full
        place = traceback.extract_tb(error.__traceback__)[-1]
        return Done(name, None, f"{type(error).__name__}: {error} ({Path(place.filename).name}:{place.lineno})")


def report_failures(done: list[Done[T]]) -> None:
    """Tell on stderr which streams failed and why, and leave with exit code 2 if any did."""
    failed = [d for d in done if d.failure]
    for d in failed:
        typer.echo(f"pbm: {d.name} failed: {d.failure}", err=True)
    if failed:
        raise typer.Exit(2)
