"""`pbm watch` and `pbm note`: laboratory events by every door, the same whichever it is, and through restarts."""

import json
import random
import signal
import sqlite3
import subprocess
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from pbm.errors import StoreWaits
from pbm.io.store import Store
from pbm.io.store_reader import StoreReader
from pbm.records.result import Result
from tests.commands.test_watch import FEED, RUN, csv, kept, ndjson, pbm, results_kept, wait_for_results
from tests.contract.test_live_events import with_rhythms
from tests.live_laboratory import MINUTE, every_line, two_lines, write_folder

LOT_AT, CONTROL_AT, KEEP_AT = 300, 420, 600  # the places of results that are the first after each event


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return write_folder(tmp_path / "laboratory", every_line())


def iso(time: int) -> str:
    return datetime.fromtimestamp(time / 1e6, UTC).isoformat()


EVENTS = [
    (LOT_AT, "reagent lot", "sodium", "line-1", "lot 4711"),
    (CONTROL_AT, "control rejected", "", "line-2", "level 1: 121"),
    (KEEP_AT, "keep the old centre", "NA", "line-1", ""),
]


def events_csv(some: Sequence[tuple[int, str, str, str, str]] = EVENTS, feed: Sequence[Result] = FEED) -> str:
    lines = [
        f"{iso(feed[place].time)},{kind},{analyte},{analyser},{detail}"
        for place, kind, analyte, analyser, detail in some
    ]
    return "".join(f"{line}\n" for line in ["time,event,analyte,analyser,detail", *lines])


def with_events(some: Sequence[Result]) -> str:
    lines = ndjson(some).splitlines(keepends=True)
    for place, kind, analyte, analyser, detail in reversed(EVENTS):
        given = {
            "time": iso(FEED[place].time),
            "event": kind,
            "analyte": analyte,
            "analyser": analyser,
            "detail": detail,
        }
        lines.insert(place, json.dumps(given) + "\n")
    return "".join(lines)


def kept_events(folder: Path) -> list[tuple[Any, ...]]:
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        return connection.execute(
            "select time, kind, analyte, analyser, detail, effect from events order by time"
        ).fetchall()


def states(folder: Path) -> list[tuple[Any, ...]]:
    return kept(folder)["monitors"]


def alarms(folder: Path) -> list[tuple[Any, ...]]:
    return kept(folder)["alarms"]


def test_events_by_file_and_inside_the_feed_do_the_same(folder: Path, tmp_path: Path) -> None:
    other, plain = (write_folder(tmp_path / name, every_line()) for name in ("other", "plain"))
    for one in (folder, plain):
        (one / "live.csv").write_text(csv(FEED))
    (folder / "events.csv").write_text(events_csv())
    by_file = pbm("watch", "--from", folder / "live.csv", "--events", folder / "events.csv", "--lab", folder, "--once")
    by_feed = pbm("watch", "--from", "-", "--lab", other, stdin=with_events(FEED))
    pbm("watch", "--from", plain / "live.csv", "--lab", plain, "--once")
    assert by_file.returncode == by_feed.returncode == 0, by_file.stderr + by_feed.stderr
    assert by_file.stdout == by_feed.stdout
    assert states(folder) == states(other) != states(plain)
    assert kept_events(folder) == kept_events(other)
    assert [row[1:4] for row in kept_events(folder)] == [
        ("reagent lot", "sodium", "line-1"),
        ("control rejected", "", "line-2"),
        ("keep the old centre", "sodium", "line-1"),
    ]
    assert kept_events(folder)[0][5].startswith("1 monitor to begin afresh and learn their centre again")
    assert "last control 2031-02-" in by_file.stdout and " failed" in by_file.stdout


@pytest.mark.parametrize("cut", [1, 299, 300, 301, 450, 650])
def test_stopped_and_started_again_with_events_it_goes_on_as_if_it_never_stopped(
    folder: Path, tmp_path: Path, cut: int
) -> None:
    whole = write_folder(tmp_path / "whole", every_line())
    for one, upto in ((whole, len(FEED)), (folder, cut)):
        (one / "live.csv").write_text(csv(FEED[:upto]))
        (one / "events.csv").write_text(events_csv([event for event in EVENTS if event[0] <= upto]))
    undisturbed = pbm("watch", "--from", whole / "live.csv", "--events", whole / "events.csv", "--lab", whole, "--once")
    first = pbm("watch", "--from", folder / "live.csv", "--events", folder / "events.csv", "--lab", folder, "--once")
    (folder / "live.csv").write_text(csv(FEED))
    (folder / "events.csv").write_text(events_csv())
    second = pbm("watch", "--from", folder / "live.csv", "--events", folder / "events.csv", "--lab", folder, "--once")
    assert first.stdout + second.stdout == undisturbed.stdout
    assert kept(folder) == kept(whole)
    assert kept_events(folder) == kept_events(whole)


@contextmanager
def running(folder: Path, *arguments: str | Path) -> Iterator["subprocess.Popen[str]"]:
    """A watch in a process of its own, ended whatever happens."""
    command = [*RUN, "watch", *map(str, arguments), "--lab", str(folder)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    try:
        yield process
    finally:
        process.kill()
        process.communicate(timeout=30)


def stopped(process: "subprocess.Popen[str]") -> tuple[str, str]:
    """What it printed."""
    process.send_signal(signal.SIGTERM)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 0 and "Traceback" not in err, err
    return out, err


def test_a_note_is_taken_up_by_the_running_watch_once_and_kept_through_a_restart(folder: Path) -> None:
    live = folder / "live.csv"
    live.write_text(csv(FEED[:300]))
    with running(folder, "--from", live) as process:
        wait_for_results(folder, 300)
        noted = pbm("note", "restart", "--analyser", "line-2", "--by", "kim", "--lab", folder)
        wait_for_events(folder, 1)
        stopped(process)
    assert noted.stdout.startswith("Noted: restart of line-2 at ")
    assert noted.stdout.endswith(", by kim. The watch takes it up within seconds.\n")
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    assert [row[1] for row in kept_events(folder)] == ["restart"]
    assert StoreReader(folder / "watch.sqlite").events()[0].source == "note by kim"


def test_a_note_that_meets_a_store_that_waits_is_not_lost(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    assert pbm("note", "maintenance", "--analyser", "line-2", "--lab", folder).returncode == 0
    asked, earlier = [0], Store.earlier

    def waits_first(self: Store, *given: Any) -> Any:
        asked[0] += 1
        if asked[0] == 1:
            raise StoreWaits("The disk is full.")
        return earlier(self, *given)

    monkeypatch.setattr(Store, "earlier", waits_first)
    done = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED[:30]))
    assert "The store takes results again; nothing was lost." in done.stderr
    assert [row[1] for row in kept_events(folder)] == ["maintenance"]


def wait_for_events(folder: Path, count: int) -> None:
    for _ in range(600):
        if len(kept_events(folder)) >= count:
            return
        time.sleep(0.05)
    pytest.fail(f"{count} events were not taken up in time")


def test_a_note_without_a_watch_waits_for_the_next_one(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED[:300]))
    pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    noted = pbm(
        "note", "reagent-lot", "--analyser", "line-1", "--analyte", "NA", "--at", iso(FEED[310].time), "--lab", folder
    )
    assert noted.returncode == 2 and "more than a day ahead" in noted.stderr, "the tests' results lie in the future"
    noted = pbm("note", "Control_Accepted", "--analyser", "line-1", "--analyte", "NA", "--lab", folder)
    assert noted.stdout.startswith("Noted: control accepted of sodium@line-1 at ")
    assert "No watch is alive: the next one takes it up when it is started." in noted.stdout
    (folder / "live.csv").write_text(csv(FEED[:301]))
    pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert [row[1:4] for row in kept_events(folder)] == [("control accepted", "sodium", "line-1")]


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (("lunch", "--analyser", "line-1"), "KIND is one of calibration, reagent lot"),
        (("calibration", "--analyser", "line-9"), '"line-9" is not in plan.toml. Its analysers: line-1, line-2'),
        (("calibration",), "--analyser says what the event is about"),
        (("calibration", "--analyser", "line-1", "--analyte", "XYZ"), "--analyte is none of the analytes"),
        (("calibration", "--analyser", "line-1", "--at", "noon"), "--at takes a time such as 10:30"),
        (("note", "--analyser", "line-1", "--detail", "x" * 201), "at most 200 are kept"),
    ],
)
def test_a_note_that_is_not_understood_is_refused_with_words(
    folder: Path, arguments: tuple[str, ...], told: str
) -> None:
    done = pbm("note", *arguments, "--lab", folder)
    assert done.returncode == 2
    assert told in done.stderr and "Nothing was noted" in done.stderr
    assert not (folder / "bench.sqlite").exists()


def test_events_that_cannot_be_read_are_set_aside_with_their_reason(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED[:30]))
    (folder / "events.csv").write_text(events_csv() + "2031-03-01T00:00:00Z,lunch,,line-1,\n,calibration,,line-1,\n")
    done = pbm("watch", "--from", folder / "live.csv", "--events", folder / "events.csv", "--lab", folder, "--once")
    assert f"{folder / 'events.csv'}, line 5: unknown event (lunch). Set aside" in done.stderr
    assert "1 unknown event, 1 no time" in done.stderr
    assert len(kept_events(folder)) == 3


def test_an_event_file_that_grows_is_followed_with_the_feed(folder: Path) -> None:
    live, events = folder / "live.csv", folder / "events.csv"
    live.write_text(csv(FEED[:300]))
    events.write_text(events_csv(EVENTS[:1]))
    with running(folder, "--from", live, "--events", events) as process:
        wait_for_results(folder, 300)
        wait_for_events(folder, 1)
        events.write_text(events_csv())
        wait_for_events(folder, 3)
        stopped(process)


KILLS = 6


@pytest.mark.slow
def test_killed_at_random_points_events_notices_and_alarms_out_are_those_of_an_undisturbed_run(tmp_path: Path) -> None:
    """Results and events grow while the watch is killed; each alarm goes out at least once, everything else exactly once."""
    chance, feed = random.Random(4), with_pauses(two_lines(5, 24_000))
    lots = [
        (n, "reagent lot" if n % 2 else "control accepted", "sodium", f"line-{1 + n // 700 % 2}", f"n {n}")
        for n in range(700, 24_000, 1401)
    ]
    folders = [write_folder(tmp_path / name, with_rhythms(every_line())) for name in ("killed", "whole")]
    killed, whole = folders
    for one in folders:
        with (one / "lab.toml").open("a") as file:
            file.write('\n[alarms]\nfile = "alarms.ndjson"\n')
    (whole / "live.csv").write_text(csv(feed))
    (whole / "events.csv").write_text(events_csv(lots, feed))
    arguments = [("--from", one / "live.csv", "--events", one / "events.csv") for one in folders]
    assert pbm("watch", *arguments[1], "--lab", whole, "--once").returncode == 0
    inside = 0
    for kill in range(KILLS):
        until = len(feed) * (kill + 4) // (KILLS + 4)  # more than is read before the kill
        # An event stands in its file before the results of its time do.
        (killed / "events.csv").write_text(events_csv([lot for lot in lots if lot[0] <= until], feed))
        (killed / "live.csv").write_text(csv(feed[:until]))
        begun = results_kept(killed)
        with running(killed, *arguments[0], "--once"):
            wait_for_results(killed, begun + chance.randint(1, 1500))
        inside += results_kept(killed) < until
    assert inside > KILLS // 2, "the test must kill in the middle of the work"
    (killed / "events.csv").write_text(events_csv(lots, feed))
    (killed / "live.csv").write_text(csv(feed))
    assert pbm("watch", *arguments[0], "--lab", killed, "--once").returncode == 0
    assert kept(killed) == kept(whole)
    assert kept_events(killed) == kept_events(whole)
    readers = [StoreReader(one / "watch.sqlite") for one in folders]
    notices = [sorted(reader.notices(10_000), key=str) for reader in readers]
    assert notices[0] == notices[1] and {"quiet", "centre learned again"} <= {one.kind for one in notices[0]}
    out = [[json.loads(line)["id"] for line in (one / "alarms.ndjson").read_text().splitlines()] for one in folders]
    assert out[1] == sorted(set(out[0])) == list(range(1, len(kept(whole)["alarms"]) + 1))


def with_pauses(feed: Sequence[Result]) -> list[Result]:
    """Every thousand results nothing comes for an hour."""
    return [replace(one, time=one.time + place // 1000 * 60 * MINUTE) for place, one in enumerate(feed)]
