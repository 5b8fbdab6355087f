"""Work on many streams: the same whoever does it; what fails or dies is told by its stream; what is interrupted is kept."""

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest
import typer

from pbm.commands.resume import FinishedStreams
from pbm.commands.work import chosen_streams, chosen_workers, over_streams, report_failures
from pbm.errors import InputError
from pbm.records.stream import StreamHistory, StreamName
from tests.commands.many_streams import (
    Counted,
    DiesOnce,
    InterruptedOn,
    dies_on_chloride,
    fails_on_chloride,
    total,
    write_history,
)

SIZES = {"albumin@a": 10, "calcium@a": 40, "chloride@a": 30, "sodium@a": 20, "sodium@b": 50}


@pytest.fixture
def names(tmp_path: Path) -> list[StreamName]:
    return write_history(tmp_path, SIZES)


def kept(folder: Path) -> FinishedStreams[float]:
    return FinishedStreams(folder / ".pbm-tune", float, {"seed": "1"})


def test_results_come_by_name_and_are_the_same_whatever_the_number_of_workers(
    tmp_path: Path, names: list[StreamName]
) -> None:
    alone, two, many = (over_streams(tmp_path / "history", names, total, n, "Adding") for n in (1, 2, 3))
    assert [str(done.name) for done in alone] == sorted(SIZES)
    assert alone == two == many


def test_the_longest_stream_comes_first_and_none_twice(tmp_path: Path, names: list[StreamName]) -> None:
    assert chosen_streams(tmp_path / "history", None) == names
    assert list(map(str, names)) == ["sodium@b", "calcium@a", "chloride@a", "sodium@a", "albumin@a"]
    twice = ["sodium@a", "calcium@a", "sodium@a"]
    assert list(map(str, chosen_streams(tmp_path / "history", twice))) == ["calcium@a", "sodium@a"]


@pytest.mark.parametrize("workers", [1, 2])
def test_a_stream_that_fails_tells_why_and_does_not_stop_the_others(
    tmp_path: Path, names: list[StreamName], workers: int, capsys: pytest.CaptureFixture[str]
) -> None:
    done = over_streams(tmp_path / "history", names, fails_on_chloride, workers, "Adding")
    assert [str(one.name) for one in done if one.result is not None] == sorted(set(SIZES) - {"chloride@a"})
    with pytest.raises(typer.Exit) as left:
        report_failures(done)
    assert left.value.exit_code == 2
    assert "chloride@a failed: ZeroDivisionError: chloride was divided by nothing (many_streams.py:" in (
        capsys.readouterr().err
    )


def test_a_process_that_dies_is_told_by_its_stream_and_the_others_are_done(
    tmp_path: Path, names: list[StreamName]
) -> None:
    done = over_streams(tmp_path / "history", names, dies_on_chloride, 2, "Adding")
    assert [str(one.name) for one in done if one.failure] == ["chloride@a"]
    (failed,) = (one for one in done if one.failure)
    assert "ended from outside, and again when it ran alone" in failed.failure
    expected = over_streams(tmp_path / "history", names, total, 1, "Adding")
    assert [one for one in done if not one.failure] == [one for one in expected if one.name != failed.name]


def test_a_stream_whose_process_died_only_beside_others_is_done_alone(tmp_path: Path, names: list[StreamName]) -> None:
    done = over_streams(tmp_path / "history", names, DiesOnce(tmp_path), 2, "Adding")
    assert (tmp_path / "died").exists()
    assert done == over_streams(tmp_path / "history", names, total, 1, "Adding")


def test_a_history_that_changes_meanwhile_is_told(tmp_path: Path, names: list[StreamName]) -> None:
    other = tmp_path / "history" / "stream=albumin@a" / "results.parquet"

    def changes_another(history: StreamHistory) -> float:
        with other.open("ab") as file:
            file.write(b"x")
        return total(history)

    done = over_streams(tmp_path / "history", names, changes_another, 1, "Adding")
    assert [str(one.name) for one in done if one.failure] == ["albumin@a"]
    assert f"{other}, as seen from" in done[0].failure
    assert "is not the file with which the work began" in done[0].failure


def test_a_finished_stream_is_not_worked_on_again(
    tmp_path: Path, names: list[StreamName], capsys: pytest.CaptureFixture[str]
) -> None:
    calls = tmp_path / "calls"
    calls.mkdir()
    first = over_streams(tmp_path / "history", names[:3], Counted(calls), 1, "Adding", kept(tmp_path))
    assert capsys.readouterr().err == ""
    again = over_streams(tmp_path / "history", names, Counted(calls), 2, "Adding", kept(tmp_path))
    assert "3 of 5 streams were finished before and are kept" in capsys.readouterr().err
    assert sorted(path.name.rpartition(".")[0] for path in calls.iterdir()) == sorted(SIZES)
    assert again == over_streams(tmp_path / "history", names, total, 1, "Adding")
    assert [one for one in again if one.name in names[:3]] == first


def test_a_stream_that_failed_is_tried_again(tmp_path: Path, names: list[StreamName]) -> None:
    over_streams(tmp_path / "history", names, fails_on_chloride, 1, "Adding", kept(tmp_path))
    again = over_streams(tmp_path / "history", names, total, 1, "Adding", kept(tmp_path))
    assert not any(one.failure for one in again)


def test_ctrl_c_leaves_with_130_and_says_how_to_go_on(
    tmp_path: Path, names: list[StreamName], capsys: pytest.CaptureFixture[str]
) -> None:
    with pytest.raises(typer.Exit) as left:
        over_streams(tmp_path / "history", names, InterruptedOn("chloride@a"), 1, "Adding", kept(tmp_path))
    assert left.value.exit_code == 130
    assert capsys.readouterr().err.splitlines() == [
        "pbm: stopped; 2 of 5 streams are finished and kept. Give the same command again to go on."
    ]
    over_streams(tmp_path / "history", names, total, 1, "Adding", kept(tmp_path))
    assert "2 of 5 streams were finished before" in capsys.readouterr().err


def test_nothing_is_said_of_progress_where_stderr_is_no_terminal(
    tmp_path: Path, names: list[StreamName], capsys: pytest.CaptureFixture[str]
) -> None:
    over_streams(tmp_path / "history", names, total, 1, "Adding")
    assert capsys.readouterr() == ("", "")


def test_processes_and_a_cluster_are_not_both_given() -> None:
    assert chosen_workers(3, None) == 3
    with pytest.raises(InputError, match="give one of them"):
        chosen_workers(3, "tcp://127.0.0.1:8786")


RUN = """
import sys
from pathlib import Path
from pbm.commands.work import chosen_streams, over_streams
from tests.commands.many_streams import Waits
folder = Path(sys.argv[1])
over_streams(folder / "history", chosen_streams(folder / "history", None), Waits(folder / "at work"), 2, "Waiting")
"""


def test_the_workers_of_a_command_that_was_killed_end_too(tmp_path: Path, names: list[StreamName]) -> None:
    at_work = tmp_path / "at work"
    at_work.mkdir()
    with subprocess.Popen([sys.executable, "-c", RUN, str(tmp_path)], cwd=Path(__file__).parents[2]) as command:
        until(lambda: len(list(at_work.iterdir())) == 2)
        command.kill()
    workers = [int(path.name) for path in at_work.iterdir()]
    until(lambda: not any(map(alive, workers)))


def until(happens: object, seconds: float = 60) -> None:
    """Wait for something; fail if it does not happen."""
    assert callable(happens)
    given_up = time.monotonic() + seconds
    while not happens():
        assert time.monotonic() < given_up
        time.sleep(0.02)


def alive(process: int) -> bool:
    """Whether a process still runs; one that ended and was not asked for does not."""
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
