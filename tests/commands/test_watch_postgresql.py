"""`pbm watch` into PostgreSQL: the same alarms and the same rows as into SQLite, stopped, killed and cut off as one likes."""

import random
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.io.store import Store
from tests.commands.test_watch import (  # noqa: F401  the tests of the watch, with the laboratory of this module
    FEED,
    csv,
    following,
    kept,
    ndjson,
    pbm,
    place_of,
    results_kept,
    test_a_file_is_followed_until_a_signal_which_leaves_a_whole_store,
    test_a_new_plan_restarts_only_the_monitors_that_changed_and_leaves_a_mark,
    test_a_second_watch_on_the_same_store_is_refused,
    test_an_open_alarm_is_told_again_at_the_next_start,
    test_repeats_of_a_patient_are_left_out_and_nobody_can_be_found_in_what_is_kept,
    test_standard_input_given_again_counts_once,
    test_stopped_and_started_again_it_goes_on_as_if_it_never_stopped,
    test_what_cannot_be_taken_is_set_aside_counted_and_does_not_stop_the_feed,
    test_what_is_not_watched_is_told_with_the_reason_and_kept,
    wait_for_results,
)
from tests.io.store_samples import spoil, tables
from tests.live_laboratory import csv_lines, every_line, two_lines, write_folder
from tests.postgresql import Server


@pytest.fixture
def address(postgresql_server: Server) -> str:
    return postgresql_server.new_database()


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


def test_it_prints_and_keeps_what_it_does_with_a_file(folder: Path, beside: Path) -> None:
    odd = ["not json", ndjson(FEED[:1]).replace("sodium", "so\\u0000dium"), ndjson(FEED[:1]).strip()]
    text = ndjson(FEED) + "\n".join(odd) + "\n" + ndjson(FEED[:40])
    done = [pbm("watch", "--from", "-", "--lab", one, stdin=text) for one in (folder, beside)]
    assert done[0].stdout == done[1].stdout
    # In which batch a piece was set aside is chance, and with it the order in which that is told.
    told, as_told = (sorted(line for line in one.stderr.splitlines() if "NOTICE" not in line) for one in done)
    assert told == as_told
    assert done[0].returncode == 0 and len(done[0].stdout.splitlines()) >= 4
    found, expected = (tables(place_of(one)) for one in (folder, beside))
    assert all(found[name] == expected[name] for name in kept(folder))
    assert not list(folder.glob("watch.sqlite*"))


def test_killed_at_random_points_it_loses_nothing_and_counts_nothing_twice(folder: Path, beside: Path) -> None:
    chance, feed = random.Random(1), two_lines(5, 6000)
    (beside / "live.csv").write_text(csv(feed))
    assert pbm("watch", "--from", beside / "live.csv", "--lab", beside, "--once").returncode == 0
    live = folder / "live.csv"
    live.write_text(csv([]))
    Store(place_of(folder)).close()
    for part in (feed[:2500], feed[2500:4500]):
        with live.open("a") as file:
            file.write("".join(f"{line}\n" for line in csv_lines(part)))
        with following(live, folder, quiet=True) as process:
            wait_for_results(folder, results_kept(folder) + chance.randint(1, 900))
            process.kill()
    live.write_text(csv(feed))
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    assert kept(folder) == kept(beside)
    assert pbm("store", "check", "--lab", folder).returncode == 0


def test_a_watch_whose_connection_is_cut_says_so_and_goes_on_when_it_is_started_again(
    folder: Path, beside: Path
) -> None:
    live = folder / "live.csv"
    live.write_text(csv(FEED[:300]))
    Store(place_of(folder)).close()
    with following(live, folder) as process:
        wait_for_results(folder, 300)
        spoil(place_of(folder), "select pg_terminate_backend(pid) from pg_locks where locktype = 'advisory'")
        with live.open("a") as file:
            file.write("".join(f"{line}\n" for line in csv_lines(FEED[300:])))
        _, err = process.communicate(timeout=30)
    assert process.returncode == 2, err
    assert "What was kept before is safe" in err and "Traceback" not in err
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    (beside / "live.csv").write_text(csv(FEED))
    assert pbm("watch", "--from", beside / "live.csv", "--lab", beside, "--once").returncode == 0
    assert kept(folder)["alarms"] == kept(beside)["alarms"]
    assert kept(folder)["monitors"] == kept(beside)["monitors"]


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


def test_old_results_are_removed_there_too(folder: Path) -> None:
    years = 31 * 365 * 24 * 3600 * 1_000_000
    old = [replace(one, time=one.time - years) for one in two_lines(3, 6000)]
    (folder / "live.csv").write_text(csv(old))
    for _ in range(6):
        done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once", "--keep", "90d")
        assert done.returncode == 0, done.stderr
        with (folder / "live.csv").open("a") as file:
            file.write("no line of data\n")
    assert results_kept(folder) < 5500
    assert pbm("store", "check", "--lab", folder).returncode == 0
