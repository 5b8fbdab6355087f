"""`pbm watch` into PostgreSQL: the same alarms and the same rows as into SQLite, stopped, killed and cut off as one likes."""

import random
import time
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from pbm.io.store import Store
from pbm.io.store_place import Place, store_place
from tests.commands.test_watch import FEED, csv, following, ndjson, pbm
from tests.io.store_samples import spoil, tables
from tests.live_laboratory import csv_lines, every_line, two_lines, write_folder
from tests.postgresql import Server

COMPARED = ("results", "alarms", "monitors", "streams", "set_aside", "tallies", "feeds")


@pytest.fixture
def address(postgresql_server: Server) -> str:
    return postgresql_server.new_database()


@pytest.fixture
def place(address: str) -> Place:
    return store_place(address, Path())


@pytest.fixture
def folder(tmp_path: Path, address: str) -> Path:
    """A laboratory whose lab.toml names the database."""
    folder = write_folder(tmp_path / "laboratory", every_line())
    lab = folder / "lab.toml"
    lab.write_text(f'store = "{address}"\n{lab.read_text()}')
    return folder


@pytest.fixture
def beside(tmp_path: Path) -> Path:
    """The same laboratory with its store in a file."""
    return write_folder(tmp_path / "beside", every_line())


def kept(place: Place) -> dict[str, list[tuple[Any, ...]]]:
    """What was kept, but for the names of the feeds."""
    found = tables(place)
    return {name: [row[2:] if name == "feeds" else row for row in found[name]] for name in COMPARED}


def test_it_prints_and_keeps_what_it_does_with_a_file(folder: Path, beside: Path, place: Place) -> None:
    odd = ["not json", ndjson(FEED[:1]).replace("sodium", "so\\u0000dium"), ndjson(FEED[:1]).strip()]
    text = ndjson(FEED) + "\n".join(odd) + "\n" + ndjson(FEED[:40])
    done = [pbm("watch", "--from", "-", "--lab", one, stdin=text) for one in (folder, beside)]
    assert done[0].stdout == done[1].stdout
    # In which batch a piece was set aside is chance, and with it the order in which that is told.
    told, as_told = (sorted(line for line in one.stderr.splitlines() if "NOTICE" not in line) for one in done)
    assert told == as_told
    assert done[0].returncode == 0 and len(done[0].stdout.splitlines()) >= 4
    assert kept(place) == kept(beside / "watch.sqlite")
    assert not list(folder.glob("watch.sqlite*"))


@pytest.mark.parametrize("cut", [1, 449, 451])
def test_stopped_and_started_again_it_goes_on_as_if_it_never_stopped(
    folder: Path, beside: Path, place: Place, cut: int
) -> None:
    (beside / "live.csv").write_text(csv(FEED))
    undisturbed = pbm("watch", "--from", beside / "live.csv", "--lab", beside, "--once")
    printed = ""
    for part in (FEED[:cut], FEED):
        (folder / "live.csv").write_text(csv(part))
        printed += pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once").stdout
    assert printed == undisturbed.stdout
    found, expected = kept(place), kept(beside / "watch.sqlite")
    del found["feeds"], expected["feeds"]  # a hash of the file so far
    assert found == expected


def test_killed_at_random_points_it_loses_nothing_and_counts_nothing_twice(
    folder: Path, beside: Path, place: Place
) -> None:
    chance, feed = random.Random(1), two_lines(5, 6000)
    (beside / "live.csv").write_text(csv(feed))
    assert pbm("watch", "--from", beside / "live.csv", "--lab", beside, "--once").returncode == 0
    live = folder / "live.csv"
    live.write_text(csv([]))
    Store(place).close()
    for part in (feed[:2500], feed[2500:4500]):
        with live.open("a") as file:
            file.write("".join(f"{line}\n" for line in csv_lines(part)))
        with following(live, folder, quiet=True) as process:
            wait_for_results(place, len(tables(place)["results"]) + chance.randint(1, 900))
            process.kill()
    live.write_text(csv(feed))
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    found, expected = kept(place), kept(beside / "watch.sqlite")
    del found["feeds"], expected["feeds"]
    assert found == expected
    assert pbm("store", "check", "--lab", folder).returncode == 0


def wait_for_results(place: Place, count: int) -> None:
    for _ in range(1500):
        if len(tables(place)["results"]) >= count:
            return
        time.sleep(0.02)
    pytest.fail(f"{count} results were not kept in time")


def test_a_second_watch_on_the_same_database_is_refused(folder: Path, place: Place) -> None:
    with Store(place):
        done = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED))
    assert done.returncode == 2
    assert "Another `pbm watch`" in done.stderr and not done.stdout


def test_a_watch_whose_connection_is_cut_says_so_and_goes_on_when_it_is_started_again(
    folder: Path, beside: Path, place: Place
) -> None:
    live = folder / "live.csv"
    live.write_text(csv(FEED[:300]))
    Store(place).close()
    with following(live, folder) as process:
        wait_for_results(place, 300)
        spoil(place, "select pg_terminate_backend(pid) from pg_locks where locktype = 'advisory'")
        with live.open("a") as file:
            file.write("".join(f"{line}\n" for line in csv_lines(FEED[300:])))
        _, err = process.communicate(timeout=30)
    assert process.returncode == 2, err
    assert "What was kept before is safe" in err and "Traceback" not in err
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    (beside / "live.csv").write_text(csv(FEED))
    assert pbm("watch", "--from", beside / "live.csv", "--lab", beside, "--once").returncode == 0
    assert kept(place)["alarms"] == kept(beside / "watch.sqlite")["alarms"]
    assert kept(place)["monitors"] == kept(beside / "watch.sqlite")["monitors"]


def test_the_password_is_neither_printed_nor_kept(folder: Path, address: str, tmp_path: Path) -> None:
    lab = folder / "lab.toml"
    lab.write_text(lab.read_text().replace("@/", ":tern-secret@/"))
    (folder / "live.csv").write_text(csv(FEED[:30]))
    ran = [
        pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once"),
        pbm("store", "check", "--lab", folder, "--json"),
        pbm("store", "export", folder / "out", "--lab", folder),
    ]
    lab.write_text(lab.read_text().replace(address.rsplit("/", 1)[-1], "nowhere"))
    ran.append(pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once"))
    assert [one.returncode for one in ran] == [0, 0, 0, 2]
    assert not any("tern-secret" in one.stdout + one.stderr for one in ran)
    files = [path for path in tmp_path.rglob("*") if path.is_file() and path != lab]
    assert files and not any(b"tern-secret" in path.read_bytes() for path in files)


def test_old_results_are_removed_there_too(folder: Path, place: Place) -> None:
    years = 31 * 365 * 24 * 3600 * 1_000_000
    old = [replace(one, time=one.time - years) for one in two_lines(3, 6000)]
    (folder / "live.csv").write_text(csv(old))
    for _ in range(6):
        done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once", "--keep", "90d")
        assert done.returncode == 0, done.stderr
        with (folder / "live.csv").open("a") as file:
            file.write("no line of data\n")
    assert len(tables(place)["results"]) < 5500
    assert pbm("store", "check", "--lab", folder).returncode == 0
