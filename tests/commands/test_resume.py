"""An interrupted tune goes on where it was; what is kept is used only where it would come out the same."""

import os
import re
import shutil
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import pbm
from pbm.commands import versions
from pbm.commands.resume import FinishedStreams
from pbm.errors import InputError
from pbm.records.stream import StreamName
from pbm.records.tuning import Truncation
from tests.commands.many_streams import write_history
from tests.commands.test_tune import LAB
from tests.commands.test_work import until

# Whoever runs the tests may have SIGINT ignored, which a child inherits.
TERMINAL = "import signal; signal.signal(signal.SIGINT, signal.default_int_handler)"
RUN = [sys.executable, "-c", f"{TERMINAL}; from pbm.commands.main import main; main()"]
NA, K = StreamName("sodium", "a"), StreamName("potassium", "a/b")
FOUND = Truncation(low=0.1 + 0.2, high=None, mode="truncate", transform="none", keeps=1 / 3, moves=1e-300)
BY_HAND = ("--admit", "125:155", "--statistic", "ewma", "--weight", "0.1", "--no-mix")  # quick: one choice
STREAMS = {f"sodium@line-{number}": 2_000 - 50 * number for number in range(14)}  # enough that some are always left


def kept(folder: Path, **changed: str) -> FinishedStreams[Truncation]:
    return FinishedStreams(folder / "kept", Truncation, {"seed": "1", "lab": "abc", **changed})


def test_a_result_comes_back_to_the_last_bit(tmp_path: Path) -> None:
    kept(tmp_path).keep(K, "123", FOUND)
    assert kept(tmp_path).result(K, "123") == FOUND
    assert kept(tmp_path).result(NA, "123") is None


@pytest.mark.parametrize("changed", [{"seed": "2"}, {"lab": "abd"}, {"more": ""}])
def test_a_result_of_another_seed_lab_or_option_is_not_used(tmp_path: Path, changed: dict[str, str]) -> None:
    kept(tmp_path).keep(NA, "123", FOUND)
    assert kept(tmp_path, **changed).result(NA, "123") is None


def test_a_result_of_another_history_is_not_used(tmp_path: Path) -> None:
    kept(tmp_path).keep(NA, "123", FOUND)
    assert kept(tmp_path).result(NA, "124") is None


@pytest.mark.parametrize("part", ["pbm", "pbm's code", "python", "numpy", "statsmodels"])
def test_a_result_of_another_version_is_not_used(tmp_path: Path, part: str, monkeypatch: pytest.MonkeyPatch) -> None:
    kept(tmp_path).keep(NA, "123", FOUND)
    now = versions.origin()
    monkeypatch.setattr("pbm.commands.resume.origin", lambda: now | {part: "another"})
    assert kept(tmp_path).result(NA, "123") is None


@pytest.mark.parametrize("harm", ["cut short", "emptied", "of another shape"])
def test_a_file_that_does_not_hold_a_result_is_not_used(tmp_path: Path, harm: str) -> None:
    kept(tmp_path).keep(NA, "123", FOUND)
    (file,) = (tmp_path / "kept").iterdir()
    whole = file.read_bytes()
    harmed = {"cut short": whole[:-20], "emptied": b"", "of another shape": whole.partition(b"\n")[0] + b'\n{"low": 1}'}
    file.write_bytes(harmed[harm])
    assert kept(tmp_path).result(NA, "123") is None


def test_what_is_removed_leaves_the_other_streams_and_at_last_no_folder(tmp_path: Path) -> None:
    for name in (NA, K):
        kept(tmp_path).keep(name, "123", FOUND)
    kept(tmp_path).remove([NA])
    assert kept(tmp_path).result(NA, "123") is None
    assert kept(tmp_path).result(K, "123") == FOUND
    kept(tmp_path).remove([NA, K])
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_cannot_be_written_is_told(tmp_path: Path) -> None:
    (tmp_path / "kept").write_text("mine")
    with pytest.raises(InputError, match="finished streams cannot be kept"):
        kept(tmp_path).keep(NA, "123", FOUND)


@pytest.fixture
def laboratory(tmp_path: Path) -> Iterator[Path]:
    """Small streams of sodium; beside it a copy of the code, since an edit meanwhile rightly makes what was kept void."""
    shutil.copytree(Path(pbm.__file__).parent, tmp_path / "code" / "pbm")
    folder = tmp_path / "laboratory"
    folder.mkdir()
    (folder / "lab.toml").write_text(LAB, encoding="utf-8")
    write_history(folder, STREAMS)
    yield folder


def run(folder: Path, workers: int) -> subprocess.Popen[str]:
    """`pbm tune` in a session of its own, as from a terminal."""
    return subprocess.Popen(
        [*RUN, "tune", *BY_HAND, "--workers", str(workers), "--lab", str(folder)],
        cwd=folder.with_name("code"),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def finished(folder: Path) -> list[str]:
    return sorted(path.name for path in (folder / ".pbm-tune").glob("stream=*"))


def without_time(folder: Path) -> dict[str, str]:
    """The files that tune writes, without the time at which it did."""
    written = {"plan.toml": folder / "plan.toml", "tuning.json": folder / "reports" / "tuning.json"}
    text = {name: path.read_text(encoding="utf-8") for name, path in written.items()}
    return {name: re.sub(r'at"?(=| = |: ?)"?20\d\d-[-:0-9TZ]+"?', "", one) for name, one in text.items()}


def undisturbed(folder: Path) -> dict[str, str]:
    with run(folder, 1) as command:
        _, said = command.communicate(timeout=120)
    assert (command.returncode, said) == (0, "")
    return without_time(folder)


@pytest.mark.slow
def test_a_tune_that_was_killed_goes_on_with_what_it_had_finished(laboratory: Path) -> None:
    with run(laboratory, 2) as command:
        until(lambda: finished(laboratory))
        os.kill(command.pid, signal.SIGKILL)
    before = finished(laboratory)
    assert 1 <= len(before) < len(STREAMS)
    assert not (laboratory / "plan.toml").exists()
    with run(laboratory, 2) as again:
        _, said = again.communicate(timeout=120)
    assert again.returncode == 0, said
    assert said == f"pbm: {len(before)} of {len(STREAMS)} streams were finished before and are kept.\n"
    assert not (laboratory / ".pbm-tune").exists()
    found = without_time(laboratory)
    assert found == undisturbed(laboratory)


@pytest.mark.slow
def test_ctrl_c_leaves_nothing_half_written_and_says_how_to_go_on(laboratory: Path) -> None:
    with run(laboratory, 2) as command:
        until(lambda: finished(laboratory))
        os.killpg(command.pid, signal.SIGINT)
        _, said = command.communicate(timeout=60)
    assert command.returncode == 130
    assert re.fullmatch(
        r"pbm: stopped; \d+ of 14 streams are finished and kept. Give the same command again to go on.\n", said
    )
    assert sorted(path.name for path in laboratory.iterdir()) == [".pbm-tune", "history", "lab.toml"]
    assert all(re.fullmatch(r"stream=sodium@line-\d+\.ndjson", name) for name in finished(laboratory))
