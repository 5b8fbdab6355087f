"""Work in processes of this machine; a process that dies is told by its stream, and the other streams go on."""

import os
import signal
import threading
import time
from collections.abc import Generator, Iterable, Iterator, Sequence
from concurrent.futures.process import BrokenProcessPool
from typing import Any

from pbm.commands.job import Done, Job, T

_LOOKS = 1.0  # seconds between two looks whether the command still lives

_DIED = (
    "the process that worked on it was ended from outside, and again when it ran alone; most often the system has run out of memory. "
    "Close other programs or take a machine with more memory, and give the same command again."
)


def in_processes(jobs: Sequence[Job[T]], workers: int) -> Generator[Done[T], None, None]:
    """Do the jobs, begun in their order; answers as they come. One worker is this process itself.

    A dead process takes down the others and does not say what it was at. So each stream that was under way is tried once more alone:
    one that only lacked memory beside another then succeeds, and one that ends its process again is named. The rest goes on as before.
    """
    if workers <= 1:
        yield from (job() for job in jobs)
        return
    waiting = {job.name: job for job in jobs}
    while waiting:
        begun: list[Job[T]] = []
        try:
            for done in _parallel(_noted(list(waiting.values()), begun), workers):
                del waiting[done.name]
                yield done
        except BrokenProcessPool:
            suspects = [job for job in begun if job.name in waiting] or list(waiting.values())
            for job in suspects:
                yield _alone(waiting.pop(job.name))


def _noted(jobs: Iterable[Job[T]], begun: list[Job[T]]) -> Iterator[Job[T]]:
    for job in jobs:
        begun.append(job)
        yield job


def _alone(job: Job[T]) -> Done[T]:
    try:
        return next(_parallel([job], 2))  # with one, joblib would do it in this process
    except BrokenProcessPool:
        return job.failed(_DIED)


def _parallel(jobs: Iterable[Job[T]], workers: int) -> Iterator[Done[T]]:
    from joblib import Parallel, delayed, parallel_config

    # Threads inside a linear algebra library change the order of its sums, and with it the last bit: one everywhere.
    with parallel_config(backend="loky", inner_max_num_threads=1):
        # One job a process at a time and none in a queue: then those begun and not answered are those under way.
        run: Any = Parallel(n_jobs=workers, return_as="generator_unordered", batch_size=1, pre_dispatch="n_jobs")
        return iter(run(delayed(_in_worker)(job, os.getpid()) for job in jobs))


def _in_worker(job: Job[T], command: int) -> Done[T]:
    signal.signal(
        signal.SIGINT, signal.SIG_IGN
    )  # Ctrl-C reaches the whole group; the command stops, and ends its workers
    if not any(thread.name == _Watch.NAME for thread in threading.enumerate()):
        _Watch(command).start()
    return job()


class _Watch(threading.Thread):
    """Ends a worker whose command was killed, so that the command, started again, has the machine for itself."""

    NAME = "command lives"

    def __init__(self, command: int) -> None:
        super().__init__(name=self.NAME, daemon=True)
        self._command = command

    def run(self) -> None:
        while os.getppid() == self._command:
            time.sleep(_LOOKS)
        os._exit(1)
