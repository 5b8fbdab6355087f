"""`pbm watch` when its disk is full, locked, damaged or read-only: said clearly, nothing lost, nothing acknowledged that is not kept."""

import signal
import sqlite3
from contextlib import suppress
from pathlib import Path

import pytest

from tests.commands.test_watch import csv, following, kept, pbm, results_kept, wait_for_results
from tests.live_laboratory import csv_lines, every_line, two_lines, write_folder
from tests.small_disk import nobody_may_write, small_disk

FEED = two_lines(5, 12_000)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return write_folder(tmp_path / "laboratory", every_line())


def test_on_a_full_disk_it_waits_and_with_space_again_it_goes_on_as_if_nothing_had_been(tmp_path: Path) -> None:
    whole = write_folder(tmp_path / "whole", every_line())
    live = tmp_path / "live.csv"
    live.write_text(csv(FEED))
    undisturbed = pbm("watch", "--from", live, "--lab", whole, "--once")
    assert undisturbed.returncode == 0
    (folder := tmp_path / "laboratory").mkdir()
    live.write_text(csv(FEED[:300]))
    with small_disk(folder, "4m"):
        write_folder(folder, every_line())
        with following(live, folder) as process:
            wait_for_results(folder, 300)
            (ballast := folder / "ballast").write_bytes(bytes(3_200_000))
            with live.open("a") as file:
                file.write("".join(f"{line}\n" for line in csv_lines(FEED[300:])))
            told = next(line for line in process.stderr or () if "is full" in line)
            held = results_kept(folder)
            assert 300 <= held < len(FEED)
            assert process.poll() is None
            ballast.unlink()
            wait_for_results(folder, len(FEED))
            process.send_signal(signal.SIGTERM)
            out, err = process.communicate(timeout=30)
        assert process.returncode == 0, err
        assert "Free some space" in told and "nothing was lost" in err and "Traceback" not in err
        assert out == undisturbed.stdout
        assert kept(folder) == kept(whole)


def test_stopped_while_the_disk_is_full_it_says_so_and_loses_nothing(tmp_path: Path) -> None:
    live = tmp_path / "live.csv"
    live.write_text(csv(FEED[:300]))
    (folder := tmp_path / "laboratory").mkdir()
    with small_disk(folder, "4m"):
        write_folder(folder, every_line())
        with following(live, folder) as process:
            wait_for_results(folder, 300)
            (ballast := folder / "ballast").write_bytes(bytes(3_300_000))
            with live.open("a") as file:
                file.write("".join(f"{line}\n" for line in csv_lines(FEED[300:9000])))
            assert any("is full" in line for line in process.stderr or ())
            process.send_signal(signal.SIGTERM)
            first, err = process.communicate(timeout=30)
        assert process.returncode == 2 and "What was kept before is safe" in err and "Traceback" not in err
        ballast.unlink()
        second = pbm("watch", "--from", live, "--lab", folder, "--once")
        whole = write_folder(tmp_path / "whole", every_line())
        undisturbed = pbm("watch", "--from", live, "--lab", whole, "--once")
        assert first + second.stdout == undisturbed.stdout
        assert kept(folder) == kept(whole)


@pytest.mark.parametrize("there_before", [False, True])
def test_a_disk_that_is_full_at_the_start_is_told(tmp_path: Path, there_before: bool) -> None:
    live = tmp_path / "live.csv"
    live.write_text(csv(FEED[:300]))
    (folder := tmp_path / "laboratory").mkdir()
    with small_disk(folder, "4m"):
        write_folder(folder, every_line())
        if there_before:
            assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
        ballast = folder / "ballast"
        with suppress(OSError), ballast.open("wb", buffering=0) as file:
            while True:
                file.write(bytes(4096))
        done = pbm("watch", "--from", live, "--lab", folder, "--once")
        assert done.returncode == 2 and "is full. Free some space." in done.stderr and "Traceback" not in done.stderr
        ballast.unlink()
        assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
        assert results_kept(folder) == 300


def test_a_full_disk_ends_a_run_to_the_end_of_a_file_with_a_paragraph(tmp_path: Path) -> None:
    live = tmp_path / "live.csv"
    live.write_text(csv(FEED))
    (folder := tmp_path / "laboratory").mkdir()
    with small_disk(folder, "800k"):
        write_folder(folder, every_line())
        done = pbm("watch", "--from", live, "--lab", folder, "--once")
        assert done.returncode == 2
        assert "is full. Free some space." in done.stderr and "Traceback" not in done.stderr
        first = done.stdout
        assert 0 < results_kept(folder) < len(FEED)
        (elsewhere := tmp_path / "elsewhere").mkdir()
        for file in folder.iterdir():
            (elsewhere / file.name).write_bytes(file.read_bytes())
    second = pbm("watch", "--from", live, "--lab", elsewhere, "--once")
    whole = write_folder(tmp_path / "whole", every_line())
    undisturbed = pbm("watch", "--from", live, "--lab", whole, "--once")
    assert first + second.stdout == undisturbed.stdout
    assert kept(elsewhere) == kept(whole)


def test_a_folder_that_is_read_only_is_told(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED[:30]))
    assert pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once").returncode == 0
    with nobody_may_write(folder):
        done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert done.returncode == 2 and not done.stdout
    assert "must be allowed to write there" in done.stderr and "Traceback" not in done.stderr


def test_a_store_locked_by_another_program_is_told(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("pbm.io.store_engine.LOCK_SECONDS", 0.1)
    (folder / "live.csv").write_text(csv(FEED[:30]))
    assert pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once").returncode == 0
    with sqlite3.connect(folder / "watch.sqlite", isolation_level=None) as other:
        other.execute("begin immediate")
        done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert done.returncode == 2 and "has been locked by another program for too long" in done.stderr
    assert pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once").returncode == 0


def test_a_damaged_page_stops_the_watch_with_a_paragraph_and_is_found_by_a_check(folder: Path) -> None:
    live = folder / "live.csv"
    live.write_text(csv(FEED[:6000]))
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        page = connection.execute("select rootpage from sqlite_master where name = 'one_result_once'").fetchone()[0]
        size = connection.execute("pragma page_size").fetchone()[0]
    with (folder / "watch.sqlite").open("r+b") as file:
        file.seek((page - 1) * size)
        file.write(b"\xff" * size)
    live.write_text(csv(FEED))
    done = pbm("watch", "--from", live, "--lab", folder, "--once")
    assert done.returncode == 2
    assert "is damaged. Move it and the files beside it away" in done.stderr and "Traceback" not in done.stderr
    check = pbm("store", "check", "--lab", folder)
    assert check.returncode == 1 and "WRONG" in check.stdout
