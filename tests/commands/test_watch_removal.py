"""`pbm watch --keep 90d`: what is older leaves the store, alarms and states stay as they are, and too short a time is refused."""

from dataclasses import replace
from pathlib import Path

import pytest

from pbm.io.store_reader import StoreReader
from tests.commands.test_watch import FEED, csv, kept, pbm
from tests.live_laboratory import every_line, two_lines, write_folder

OLD = 31 * 365 * 24 * 3600 * 1_000_000  # the feed of 2031 as one of about 2000


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return write_folder(tmp_path / "laboratory", every_line())


def test_old_results_leave_the_store_and_alarms_and_states_stay_the_same(folder: Path, tmp_path: Path) -> None:
    whole = write_folder(tmp_path / "whole", every_line())
    feed = csv([replace(one, time=one.time - OLD) for one in two_lines(3, 9000)])
    for place, options in ((whole, ()), (folder, ("--keep", "90d"))):
        (place / "live.csv").write_text(feed)
        for _ in range(8):  # a step of a removal goes with each batch, and a short file has few
            done = pbm("watch", "--from", place / "live.csv", "--lab", place, "--once", *options)
            assert done.returncode == 0, done.stderr
            with (place / "live.csv").open("a") as file:
                file.write("no line of data\n")
    assert len(kept(whole)["results"]) == 9000
    assert len(kept(folder)["results"]) < 7000
    for name in ("alarms", "monitors", "streams"):
        assert kept(folder)[name] == kept(whole)[name]
    reader = StoreReader(folder / "watch.sqlite")
    assert len(reader.alarms()) > 10
    assert pbm("store", "check", "--lab", folder).returncode == 0


@pytest.mark.parametrize(("keep", "told"), [("90", "a number of days such as 90d"), ("1d", "Keep at least 2d")])
def test_a_time_that_cannot_be_used_is_told(folder: Path, keep: str, told: str) -> None:
    (folder / "live.csv").write_text(csv(FEED[:3]))
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once", "--keep", keep)
    assert done.returncode == 2 and told in done.stderr
