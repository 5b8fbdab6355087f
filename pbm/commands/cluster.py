"""Work on the workers of a dask cluster: the same jobs; its workers must see the folder and hold the same version of pbm."""

import logging
import os
import platform
import threading
from collections.abc import Iterable, Iterator, Sequence
from concurrent.futures import CancelledError, Future
from contextlib import contextmanager
from dataclasses import dataclass
from importlib import import_module
from pathlib import Path
from typing import Any

from pbm.commands.job import FOLDER_SHARED, Done, Job, T
from pbm.errors import InputError, one_line

Connection = Any  # a distributed.Client: the library carries no types

ANSWERS_WITHIN = 10.0  # seconds
LOOKS = 5.0  # seconds between two looks whether there are workers still
LOOKS_WITHOUT = 6  # so many looks without any worker, and the rest is given up

_DIED = (
    "every worker that took it died, and again when it was the only stream; most often there was not enough memory. Give the workers "
    "more (--memory-limit of `dask worker`), and give the same command again."
)


@dataclass(frozen=True)
class Cluster:
    """A running dask.distributed scheduler, such as tcp://10.0.0.5:8786."""

    address: str

    @contextmanager
    def connected(self, history: Path) -> Iterator[Connection]:
        """A connection to the cluster, of which every worker has been asked whether it can do the work.

        Raises
        ------
        InputError
            If the extra is not installed, no scheduler answers within `ANSWERS_WITHIN` seconds, it has no worker, or a worker does not see
            the history or holds another version of pbm or of a library that decides figures.
        """
        client = _client(self.address)
        try:
            _ask_workers(client, self.address, history)
            yield client
        finally:
            client.close()


def at_once(client: Connection) -> int:
    """How many jobs the cluster does at the same time."""
    return sum(client.nthreads().values())


def on_cluster(client: Connection, jobs: Sequence[Job[T]]) -> Iterator[Done[T]]:
    """Do the jobs, begun in their order; answers as they come.

    A job whose workers died is tried again when it is the only one, and only then given up: it may have died of its neighbour.
    """
    lost: list[Job[T]] = []
    for job, done in _answers(client, jobs):
        if done is None:
            lost.append(job)
        else:
            yield done
    for job in lost:
        ((_, again),) = _answers(client, [job])
        yield again or job.failed(_DIED)


def _answers(client: Connection, jobs: Iterable[Job[T]]) -> Iterator[tuple[Job[T], Done[T] | None]]:
    """Answers as they come; None where the workers died."""
    waiting: dict[Any, Job[T]] = {client.submit(job, pure=False): job for job in jobs}
    without = 0
    while waiting and without < LOOKS_WITHOUT:
        try:
            finished = _finished(client, list(waiting))
        except (CancelledError, OSError):  # the scheduler has gone
            break
        without = without + 1 if finished is None else 0
        for future in finished or ():
            job = waiting.pop(future)
            yield job, _answer(job, future)
    why = (
        "the connection to the cluster was lost." if without < LOOKS_WITHOUT else "the cluster has no worker any more."
    )
    yield from (
        (job, job.failed(f"{why} Give the same command again when the cluster runs.")) for job in waiting.values()
    )


def _finished(client: Connection, waiting: list[Any]) -> set[Any] | None:
    """The next that are finished, none when there are none in time; None when there is no worker either."""
    try:
        finished: set[Any] = _library().wait(waiting, timeout=LOOKS, return_when="FIRST_COMPLETED").done
    except TimeoutError:
        return set() if client.nthreads() else None
    return finished


def _answer(job: Job[T], future: Any) -> Done[T] | None:
    try:
        done: Done[T] = future.result()
    except _library().KilledWorker:
        return None
    except Exception as error:  # what a worker could not load or send back
        return job.failed(f"{type(error).__name__}: {one_line(error)}")
    return done


def _library() -> Any:
    try:
        return import_module("distributed")
    except ModuleNotFoundError:
        raise InputError(
            'Work on a cluster needs dask.distributed, which is not installed here. Install it with pip install "pbm[cluster]", or leave '
            "--cluster out and work on this machine."
        ) from None


def _client(address: str) -> Connection:
    library = _library()
    for name in ("distributed", "distributed.client"):
        logging.getLogger(name).setLevel(logging.CRITICAL)  # what went wrong is told here, in one paragraph
    answer: Future[Connection] = Future()

    def connect() -> None:
        try:
            answer.set_result(library.Client(address, timeout=ANSWERS_WITHIN))
        except Exception as error:
            answer.set_exception(error)

    # In a thread: the library's own time limit does not hold where something that is no scheduler takes the call.
    threading.Thread(target=connect, daemon=True).start()
    try:
        return answer.result(ANSWERS_WITHIN + 2)
    except Exception as error:  # another server's answer is misread in more ways than can be listed
        raise InputError(
            f"No dask scheduler answers at {address} ({one_line(error) or 'no answer in time'}). Start one with `dask scheduler`, give the "
            "address that it names as --cluster tcp://HOST:PORT, or leave --cluster out and work on this machine."
        ) from None


def _ask_workers(client: Connection, address: str, history: Path) -> None:
    try:
        client.wait_for_workers(1, timeout=ANSWERS_WITHIN)
    except TimeoutError:
        raise InputError(
            f"The cluster at {address} has no worker. Start some on machines that see {history}: dask worker {address} --nthreads 1"
        ) from None
    expected = _seen(history).origin
    for worker, answer in client.run(_seen, history, on_error="return").items():
        if not isinstance(answer, Seen):
            raise InputError(
                f"The worker {worker} cannot do the work ({one_line(answer)}). Install the same version of pbm there, and start it again."
            )
        if wrong := _wrong(answer, history, expected):
            raise InputError(f"The worker {worker} on {answer.machine} {wrong}")


def _wrong(answer: "Seen", history: Path, expected: dict[str, str]) -> str | None:
    if not answer.history:
        return f"does not see the folder {history}. {FOLDER_SHARED}"
    if not answer.one_thread:
        return (
            "computes with several threads inside its linear algebra, which may change figures. Start it with OPENBLAS_NUM_THREADS=1 and "
            "MKL_NUM_THREADS=1 in its environment, as `dask worker` itself does where it is not told --no-nanny."
        )
    for name, one in expected.items():
        if (there := answer.origin.get(name)) != one:
            return f"has another {name} ({there}; here {one}), which may change figures. Install the same there, and start it again."
    return None


@dataclass(frozen=True)
class Seen:
    """What a worker finds where it runs.

    Attributes
    ----------
    machine
        Its name.
    history
        Whether the folder is there.
    one_thread
        Whether its linear algebra computes with one thread.
    origin
        Versions that decide figures.
    """

    machine: str
    history: bool
    one_thread: bool
    origin: dict[str, str]


def _seen(history: Path) -> Seen:
    from pbm.commands.versions import ONE_THREAD, origin

    return Seen(platform.node(), history.is_dir(), ONE_THREAD.items() <= os.environ.items(), origin())
