"""`pbm store check` and `pbm store export`: what they print, their exit codes, and what they say when there is nothing to read."""

import json
import sqlite3
from pathlib import Path

import pytest

from tests.commands.test_watch import FEED, csv, pbm
from tests.live_laboratory import SODIUM, every_line, write_folder
from tests.small_disk import small_disk


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A laboratory's folder whose watch has taken some results."""
    folder = write_folder(tmp_path / "laboratory", every_line())
    (folder / "live.csv").write_text(csv(FEED[:300]))
    assert pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once").returncode == 0
    return folder


def spoil(folder: Path, change: str) -> None:
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        connection.execute(change)


def test_a_whole_store_is_called_whole(folder: Path) -> None:
    done = pbm("store", "check", "--lab", folder)
    assert done.returncode == 0 and not done.stderr
    assert done.stdout.splitlines()[-1] == "The store is whole."
    assert (
        "300 results + 0 set aside + 0 duplicates + 0 removed as too old = 300; the feeds delivered 300" in done.stdout
    )
    assert "the watch would go on from 4 of 4 monitors" in done.stdout


def test_a_store_that_is_not_whole_is_told_with_what_is_wrong_and_leaves_with_1(folder: Path) -> None:
    spoil(folder, "delete from results where seq = 7")
    done = pbm("store", "check", "--lab", folder)
    assert done.returncode == 1
    assert "WRONG" in done.stdout and "1 do not add up" in done.stdout
    assert done.stdout.splitlines()[-1] == "The store is not whole: 1 mistake."


def test_a_state_from_which_the_watch_could_not_go_on_is_found(folder: Path) -> None:
    spoil(folder, "update monitors set state = substr(state, 1, 20) where stream = 1")
    done = pbm("store", "check", "--lab", folder)
    assert done.returncode == 1
    assert f"The state of {SODIUM} in the store is damaged (20 bytes)" in done.stdout


def test_states_are_not_read_without_a_plan_and_it_says_so(folder: Path) -> None:
    (folder / "plan.toml").unlink()
    done = pbm("store", "check", "--lab", folder)
    assert done.returncode == 0 and "not read: " in done.stdout


def test_json_tells_the_same(folder: Path) -> None:
    told = json.loads(pbm("store", "check", "--lab", folder, "--json").stdout)
    assert told["whole"] and told["store"] == str(folder / "watch.sqlite")
    assert [one["what"] for one in told["checks"]] == [
        "database", "references", "account", "reasons", "alarms", "audit", "states"
    ]  # fmt: skip
    spoil(folder, "delete from results where seq = 7")
    done = pbm("store", "check", "--lab", folder, "--json")
    told = json.loads(done.stdout)
    assert done.returncode == 1 and not told["whole"]
    assert [one["what"] for one in told["checks"] if not one["ok"]] == ["account"]


def test_a_hash_that_was_noted_is_looked_for(folder: Path) -> None:
    line = next(one for one in pbm("store", "check", "--lab", folder).stdout.splitlines() if one.startswith("audit"))
    noted = line.split()[-1]
    assert pbm("store", "check", "--lab", folder, "--head", noted).returncode == 0
    done = pbm("store", "check", "--lab", folder, "--head", "0" * 64)
    assert done.returncode == 1 and "no entry has the hash 0000" in done.stdout
    for wrong in (noted[:7], "xyz" * 4):
        assert pbm("store", "check", "--lab", folder, "--head", wrong).returncode == 2


def test_export_names_each_file_and_its_rows(folder: Path) -> None:
    done = pbm("store", "export", folder / "out", "--lab", folder)
    assert done.returncode == 0
    assert f"{folder / 'out' / 'results.csv'}: 300 rows" in done.stdout.splitlines()
    assert pbm("store", "export", folder / "out", "--lab", folder, "--json").returncode == 0
    assert len((folder / "out" / "results.ndjson").read_text().splitlines()) == 300


@pytest.mark.parametrize("command", [("check",), ("export", "out")])
def test_where_there_is_no_store_it_says_who_makes_one(tmp_path: Path, command: tuple[str, ...]) -> None:
    folder = write_folder(tmp_path / "laboratory", every_line())
    done = pbm("store", *command, "--lab", folder)
    assert done.returncode == 2 and "There is no store" in done.stderr and "Traceback" not in done.stderr


@pytest.mark.parametrize("command", [("check",), ("export", "out")])
def test_what_is_no_store_is_told(folder: Path, command: tuple[str, ...]) -> None:
    (folder / "watch.sqlite").write_bytes(b"no database " * 500)
    done = pbm("store", *command, "--lab", folder)
    assert done.returncode == 2 and "is not a store of pbm" in done.stderr and "Traceback" not in done.stderr


def test_a_full_disk_is_told_and_no_part_of_a_file_is_left(folder: Path, tmp_path: Path) -> None:
    (disk := tmp_path / "disk").mkdir()
    with small_disk(disk, "16k"):
        done = pbm("store", "export", disk / "out", "--lab", folder)
        assert done.returncode == 2 and "No space left on device" in done.stderr and "Traceback" not in done.stderr
        assert {path.name for path in (disk / "out").iterdir()} <= {
            "audit.csv",
            "events.csv",
            "notices.csv",
            "annotations.csv",
        }


def test_a_folder_that_cannot_be_made_is_told(folder: Path) -> None:
    done = pbm("store", "export", folder / "nowhere" / "out", "--lab", folder)
    assert done.returncode == 2 and "cannot be written" in done.stderr and "Traceback" not in done.stderr
