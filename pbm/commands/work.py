"""Work on many streams at once, by processes of this machine or on a cluster, with the same results; the longest streams first."""

from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

import typer

from pbm.commands.cluster import Cluster, at_once, on_cluster
from pbm.commands.job import Done, Job, T, Task, file_sha256, stream_file
from pbm.commands.processes import in_processes
from pbm.commands.progress import Progress
from pbm.commands.resume import FinishedStreams
from pbm.errors import InputError
from pbm.records.stream import StreamName

Workers = int | Cluster | None


def chosen_streams(history: Path, given: list[str] | None) -> list[StreamName]:
    """The streams named on the command line, or all in the history; the longest first, so that workers end together.

    Raises
    ------
    InputError
        If a name is not in the history.
    """
    from pbm.io.history import stream_sizes

    sizes = stream_sizes(history)
    wanted = {StreamName.parse(text) for text in given} if given else set(sizes)
    for name in sorted(wanted):
        if name not in sizes:
            known = ", ".join(str(n) for n in sorted(sizes)) or "none"
            raise InputError(f"There is no stream {name} in {history}. Streams there: {known}.")
    return sorted(wanted, key=lambda n: (-sizes[n], n))


def chosen_workers(workers: int | None, cluster: str | None) -> Workers:
    """Who does the work, as given on the command line.

    Raises
    ------
    InputError
        If both are given.
    """
    if workers is not None and cluster is not None:
        raise InputError("--workers are processes of this machine, and a --cluster brings its own: give one of them.")
    return Cluster(cluster) if cluster else workers


def over_streams(
    history: Path,
    names: list[StreamName],
    task: Task[T],
    workers: Workers,
    label: str,
    finished: FinishedStreams[T] | None = None,
) -> list[Done[T]]:
    """Run a task on each stream's history; results in order of stream name, whoever did the work.

    Parameters
    ----------
    history
        The folder; each worker reads its own stream.
    task
        A picklable function of a history.
    workers
        Processes, one for each processor if not given; or a cluster.
    label
        Shown with the progress on a terminal.
    finished
        Streams that are not done again; each is added as soon as it is done.

    Raises
    ------
    InputError
        If the cluster cannot do the work, or a finished stream cannot be kept.
    typer.Exit
        With 130 when interrupted.
    """
    folder = history.absolute()
    jobs = [Job(folder, name, file_sha256(stream_file(folder, name)), task) for name in names]
    done = [one for job in jobs if (one := _known(job, finished))]
    if done:
        typer.echo(f"pbm: {len(done)} of {len(jobs)} streams were finished before and are kept.", err=True)
    known = {one.name for one in done}
    try:
        for one in _worked([job for job in jobs if job.name not in known], workers, label, finished):
            done.append(one)
    except KeyboardInterrupt:
        finished_now = sum(not one.failure for one in done)
        kept = f"; {finished_now} of {len(jobs)} streams are finished and kept" if finished else ""
        typer.echo(f"pbm: stopped{kept}. Give the same command again to go on.", err=True)
        raise typer.Exit(130) from None
    return sorted(done, key=lambda one: one.name)


def _known(job: Job[T], finished: FinishedStreams[T] | None) -> Done[T] | None:
    result = finished.result(job.name, job.sha256) if finished else None
    return None if result is None else Done(job.name, result)


def _worked(jobs: list[Job[T]], workers: Workers, label: str, finished: FinishedStreams[T] | None) -> Iterator[Done[T]]:
    from pbm.io.history import stream_sizes

    if not jobs:
        return
    marks = {job.name: job.sha256 for job in jobs}
    sizes = stream_sizes(jobs[0].history)
    with (
        _answering(jobs, workers) as (count, answers),
        Progress(label, {name: sizes[name] for name in marks}, count) as progress,
    ):
        for done in answers:
            if finished and done.result is not None:
                finished.keep(done.name, marks[done.name], done.result)
            progress.step(done.name)
            yield done


@contextmanager
def _answering(jobs: list[Job[T]], workers: Workers) -> Iterator[tuple[int, Iterator[Done[T]]]]:
    """How many jobs are done at once, and the answers as they come."""
    if isinstance(workers, Cluster):
        with workers.connected(jobs[0].history) as client:
            yield at_once(client), on_cluster(client, jobs)
        return
    count = min(workers or _processors(), len(jobs))
    with closing(in_processes(jobs, count)) as answers:
        yield count, answers


def _processors() -> int:
    from joblib import cpu_count  # it knows what a container or a batch system allows

    return int(cpu_count())


def report_failures(done: list[Done[T]]) -> None:
    """Tell on stderr which streams failed and why, and leave with exit code 2 if any did."""
    failed = [d for d in done if d.failure]
    for d in failed:
        typer.echo(f"pbm: {d.name} failed: {d.failure}", err=True)
    if failed:
        raise typer.Exit(2)
