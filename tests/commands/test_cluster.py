"""Work on a dask cluster: the results of this machine, and one paragraph for whatever is wrong with the cluster."""

import socket
import sys
import threading
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner

from pbm.commands import cluster, versions
from pbm.commands.cluster import Cluster
from pbm.commands.main import app
from pbm.commands.work import over_streams
from pbm.errors import InputError
from pbm.io.plan_file import read_plan
from tests.commands.many_streams import Waits, dies_on_chloride, fails_on_chloride, total, write_history
from tests.commands.test_tune import LAB
from tests.commands.test_work import until

SIZES = {"albumin@a": 10, "calcium@a": 40, "chloride@a": 30, "sodium@a": 20}
dask: Any = pytest.importorskip("dask")
distributed: Any = pytest.importorskip("distributed")


@pytest.fixture(scope="module")
def two_workers() -> Iterator[Cluster]:
    """Two processes; the first death of a worker counts, where by default it takes four."""
    with (
        dask.config.set({"distributed.scheduler.allowed-failures": 0}),
        distributed.LocalCluster(
            n_workers=2, threads_per_worker=1, processes=True, dashboard_address=":0", silence_logs=50
        ) as running,
    ):
        yield Cluster(running.scheduler_address)


@pytest.fixture(autouse=True)
def code_being_edited(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whoever edits the checkout while these tests run gives its workers another code than this process has; that is not their matter."""
    now = versions.origin()
    monkeypatch.setattr(versions, "origin", lambda: {name: one for name, one in now.items() if name != "pbm's code"})


@pytest.fixture
def impatient(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster, "ANSWERS_WITHIN", 0.5)


def test_a_cluster_gives_the_results_of_this_machine(tmp_path: Path, two_workers: Cluster) -> None:
    names = write_history(tmp_path, SIZES)
    on_cluster = over_streams(tmp_path / "history", names, total, two_workers, "Adding")
    assert on_cluster == over_streams(tmp_path / "history", names, total, 2, "Adding")


def test_a_stream_that_fails_there_tells_why_and_does_not_stop_the_others(tmp_path: Path, two_workers: Cluster) -> None:
    names = write_history(tmp_path, SIZES)
    there, here = (
        over_streams(tmp_path / "history", names, fails_on_chloride, by, "Adding") for by in (two_workers, 1)
    )
    assert there == here
    assert [str(one.name) for one in there if one.failure] == ["chloride@a"]


@pytest.mark.slow
def test_a_stream_that_ends_its_worker_is_named_and_the_others_are_done(tmp_path: Path, two_workers: Cluster) -> None:
    names = write_history(tmp_path, SIZES)
    done = over_streams(tmp_path / "history", names, dies_on_chloride, two_workers, "Adding")
    (failed,) = (one for one in done if one.failure)
    assert str(failed.name) == "chloride@a"
    assert "every worker that took it died" in failed.failure
    assert len(done) == len(SIZES)


@pytest.mark.slow
def test_tune_writes_the_same_plan_by_one_worker_by_two_and_on_a_cluster(tmp_path: Path, two_workers: Cluster) -> None:
    (tmp_path / "lab.toml").write_text(LAB, encoding="utf-8")
    write_history(tmp_path, {"sodium@line-1": 1_600, "sodium@line-2": 1_300})
    by_hand = ("--admit", "125:155", "--statistic", "ewma", "--weight", "0.1", "--lab", str(tmp_path))
    written = []
    for who in (("--workers", "1"), ("--workers", "2"), ("--cluster", two_workers.address)):
        ran = CliRunner().invoke(app, ["tune", *by_hand, *who])
        assert ran.exit_code == 0, ran.stderr
        written.append(read_plan(tmp_path / "plan.toml").model_dump_json(exclude={"made": {"at"}}))
    assert written[0] == written[1] == written[2]


def lost(folder: Path, loses: Callable[[Any], object]) -> list[str]:
    """What is told of two streams whose cluster loses something while it works on the first."""
    names = write_history(folder, {"sodium@a": 10, "sodium@b": 20})
    at_work = folder / "at work"
    at_work.mkdir()
    with distributed.LocalCluster(
        n_workers=1, threads_per_worker=1, dashboard_address=":0", silence_logs=50
    ) as running:

        def lose() -> None:
            until(lambda: any(at_work.iterdir()))
            loses(running)

        losing = threading.Thread(target=lose)
        losing.start()
        done = over_streams(folder / "history", names, Waits(at_work), Cluster(running.scheduler_address), "Waiting")
        losing.join()
    return [one.failure for one in done]


@pytest.mark.slow
def test_a_cluster_that_loses_its_workers_is_told_by_every_stream(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(cluster, "LOOKS", 0.5)
    told = lost(tmp_path, lambda running: running.scale(0))
    assert all("the cluster has no worker any more. Give the same command again" in one for one in told), told


@pytest.mark.slow
def test_a_cluster_that_is_gone_is_told_by_every_stream(tmp_path: Path) -> None:
    told = lost(tmp_path, lambda running: running.close())
    assert all("the connection to the cluster was lost. Give the same command again" in one for one in told), told


def test_a_worker_that_does_not_see_the_folder_is_named(two_workers: Cluster) -> None:
    with pytest.raises(InputError, match=r"The worker tcp://127.0.0.1:\d+ on .* does not see the folder /nowhere"):
        two_workers.connected(Path("/nowhere")).__enter__()


def test_a_worker_of_another_version_is_named(
    tmp_path: Path, two_workers: Cluster, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(versions, "origin", lambda: {"python": versions.versions()["python"], "numpy": "0.9"})
    with pytest.raises(InputError, match=r"The worker tcp://127.0.0.1:\d+ on .* has another numpy \(.*; here 0.9\)"):
        two_workers.connected(tmp_path).__enter__()


def test_a_worker_with_several_threads_inside_its_linear_algebra_is_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.delenv("OPENBLAS_NUM_THREADS", raising=False)
    with (
        distributed.LocalCluster(n_workers=1, processes=False, dashboard_address=":0", silence_logs=50) as running,
        pytest.raises(InputError, match=r"The worker .* computes with several threads"),
    ):
        Cluster(running.scheduler_address).connected(tmp_path).__enter__()


def refused(address: str) -> str:
    with pytest.raises(InputError) as error:
        Cluster(address).connected(Path()).__enter__()
    (line,) = str(error.value).splitlines()
    return line


@pytest.mark.usefixtures("impatient")
def test_an_address_where_nobody_answers_is_told() -> None:
    with socket.socket() as unused:
        unused.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{unused.getsockname()[1]}"
        assert f"No dask scheduler answers at {address}" in refused(address)


@pytest.mark.usefixtures("impatient")
def test_an_address_where_something_else_takes_the_call_and_is_silent_is_told() -> None:
    with socket.create_server(("127.0.0.1", 0)) as silent:
        address = f"tcp://127.0.0.1:{silent.getsockname()[1]}"
        assert f"No dask scheduler answers at {address}" in refused(address)


def test_what_is_no_address_is_told() -> None:
    assert "No dask scheduler answers at nonsense (missing port number" in refused("nonsense")


def test_a_cluster_without_a_worker_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster, "ANSWERS_WITHIN", 4.0)  # long enough to connect on a busy machine
    with distributed.LocalCluster(n_workers=0, dashboard_address=":0", silence_logs=50) as empty:
        assert "has no worker. Start some on machines that see" in refused(empty.scheduler_address)


def test_without_the_extra_it_is_told_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    assert 'pip install "pbm[cluster]"' in refused("tcp://127.0.0.1:8786")
