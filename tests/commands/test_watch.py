"""`pbm watch`: what it prints and keeps, how it goes on after a stop, and what it says when it cannot."""

import io
import json
import random
import shlex
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest
from sqlalchemy import text
from sqlalchemy.exc import DBAPIError

from pbm.commands.main import main
from pbm.io.lab_file import read_lab
from pbm.io.plan_file import plan_fingerprint, write_plan
from pbm.io.store import Store
from pbm.io.store_engine import reading_engine
from pbm.io.store_place import Place, store_place
from pbm.io.store_reader import StoreReader
from pbm.records.plan import StreamPlan
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.snapshot import Earlier
from pbm.stages.alarm_line import alarm_line
from pbm.stages.live import Live
from tests.live_laboratory import (
    CSV_HEADER,
    SODIUM,
    TSH,
    csv_lines,
    every_line,
    ewma,
    laboratory,
    plan,
    results,
    shifted_values,
    two_lines,
    write_folder,
)

LAB = laboratory()
FEED = two_lines(3, 900)


RUN = [sys.executable, "-c", "from pbm.commands.main import main; main()"]


@dataclass(frozen=True)
class Done:
    """What a command printed, and its exit code."""

    returncode: int
    stdout: str
    stderr: str


def pbm(*arguments: str | Path, stdin: str = "") -> Done:
    """Run a command in this process; standard input is a real file, as in a shell."""
    out, err = io.StringIO(), io.StringIO()
    with tempfile.TemporaryFile("w+") as given, pytest.MonkeyPatch.context() as patch:
        given.write(stdin)
        given.seek(0)
        patch.setattr(sys, "stdin", given)
        patch.setattr(sys, "argv", ["pbm", *map(str, arguments)])
        with redirect_stdout(out), redirect_stderr(err), pytest.raises(SystemExit) as left:
            main()
    return Done(int(left.value.code or 0), out.getvalue(), err.getvalue())


def ndjson(some: Sequence[Result]) -> str:
    return "".join(
        json.dumps(
            {
                "time": line.split(",")[0],
                "analyte": one.stream.analyte,
                "analyser": one.stream.analyser,
                "value": one.value,
                "unit": line.split(",")[4],
                "specimen": one.specimen,
                "ward": one.ward,
            }
        )
        + "\n"
        for one, line in zip(some, csv_lines(some), strict=True)
    )


def csv(some: Sequence[Result]) -> str:
    return "".join(f"{line}\n" for line in [CSV_HEADER, *csv_lines(some)])


def expected_alarms(some: Sequence[Result], fingerprint: str = "") -> list[Any]:
    """The alarms of one undisturbed run in this process."""
    batch = Live(LAB, every_line(), fingerprint).take([Chunk("", 1, list(some), "")], Earlier())
    return [alarm for _, alarm in batch.alarms]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return write_folder(tmp_path / "laboratory", every_line())


def kept(folder: Path) -> dict[str, list[tuple[Any, ...]]]:
    """All that was kept, but for when, from where and in how many runs."""
    questions = {
        "results": "select seq, stream, specimen, time, value, censor, ward, left_out from results order by seq",
        "alarms": "select * from alarms order by id",
        "monitors": "select * from monitors order by stream, monitor",
        "streams": "select * from streams order by id",
        "set_aside": "select place, reason, found, stream from set_aside order by id",
        "tallies": "select * from tallies order by reason",
    }
    return {name: asked(folder, question) for name, question in questions.items()}


def place_of(folder: Path) -> Place:
    """The store of a laboratory's folder."""
    return store_place(read_lab(folder / "lab.toml").store, folder / "watch.sqlite")


def asked(folder: Path, question: str) -> list[tuple[Any, ...]]:
    """What its store answers."""
    with reading_engine(place_of(folder)).connect() as connection:
        return [tuple(row) for row in connection.execute(text(question))]


# What it prints


def test_alarm_lines_go_to_stdout_and_all_else_to_stderr(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED))
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert done.returncode == 0
    alarms = expected_alarms(FEED)
    assert len(alarms) >= 4
    assert done.stdout.splitlines() == [
        alarm_line(one, LAB.analytes[one.stream.analyte], LAB.laboratory.zone) for one in alarms
    ]
    assert "3 of 3 streams of plan.toml are watched" in done.stderr
    assert "supplement control materials and never replace them" in done.stderr
    assert f"Taken: 900 results. Left out: nothing. Alarms: {len(alarms)}." in done.stderr


def test_json_prints_one_object_for_each_alarm(folder: Path) -> None:
    done = pbm("watch", "--from", "-", "--lab", folder, "--json", stdin=ndjson(FEED))
    told = [json.loads(line) for line in done.stdout.splitlines()]
    expected = expected_alarms(FEED)
    assert [(one["stream"], one["value"], one["results"]) for one in told] == [
        (str(one.stream), one.value, one.estimate.results) for one in expected
    ]
    assert {one["plan_sha256"] for one in told} == {plan_fingerprint(folder / "plan.toml")}


def test_csv_ndjson_and_a_replayed_history_give_the_same(folder: Path, tmp_path: Path) -> None:
    from pbm.io.history import stream_folder

    (folder / "live.csv").write_text(csv(FEED))
    assert pbm("intake", folder / "live.csv", "--lab", folder).returncode == 0
    assert (folder / "history" / stream_folder(SODIUM)).is_dir()
    whole = {}
    for source in (folder / "live.csv", "-", "history"):
        for file in folder.glob("watch.sqlite*"):
            file.unlink()
        done = pbm("watch", "--from", source, "--lab", folder, "--once", stdin=ndjson(FEED))
        assert done.returncode == 0, done.stderr
        # A history brings results of the same time in order of their streams' names; each stream's own order is the same.
        results_kept = sorted(row[1:] for row in kept(folder)["results"])
        states = [row[3:] for row in sorted(kept(folder)["monitors"], key=lambda row: (row[2], row[1]))]
        whole[str(source)] = (done.stdout.splitlines(), len(results_kept), states)
    assert whole["history"] == whole["-"] == whole[str(folder / "live.csv")]


def test_what_is_not_watched_is_told_with_the_reason_and_kept(folder: Path) -> None:
    chosen = plan(sodium_line_1=[ewma(statistic="mean", weight=None, window=50)])
    none = StreamPlan(
        unit="mIU/L", verdict="not useful here", reason="77 results a day are too few", results_per_day=77
    )
    write_plan(folder / "plan.toml", chosen.model_copy(update={"streams": chosen.streams | {"tsh@line-1": none}}))
    (folder / "live.csv").write_text(csv(FEED[:90]))
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert "not useful here: 77 results a day are too few" in done.stderr
    assert "warming up: 0 of 50 results" in done.stderr
    assert "Taken: 90 results (60 of streams without a monitor)." in done.stderr
    assert len(kept(folder)["results"]) == 90
    again = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert "warming up: 30 of 50 results" in again.stderr


def test_what_cannot_be_taken_is_set_aside_counted_and_does_not_stop_the_feed(folder: Path) -> None:
    lines = ndjson(FEED[:6]).splitlines()
    bad = ["not json", lines[0].replace('"sodium"', '"XYZ"'), lines[1].replace("mmol/L", "mg/dL"), "", lines[0]]
    done = pbm("watch", "--from", "-", "--lab", folder, stdin="\n".join([*lines[:3], *bad, *lines[3:]]))
    assert done.returncode == 0
    assert (
        "Taken: 6 results. Left out: 1 not JSON, 1 unknown test, 1 unit is not mmol/L, 1 blank line, 1 duplicate."
        in done.stderr
    )
    assert "standard input, line 5: unknown test (XYZ). Set aside" in done.stderr
    assert [row[0] for row in kept(folder)["set_aside"]] == [4, 5, 6, 7]
    assert ("duplicate", 1) in kept(folder)["tallies"]


def test_no_sign_of_a_feed_steers_the_terminal(folder: Path) -> None:
    line = ndjson(FEED[:1]).replace('"sodium"', '"\\u001b[2Jboo"')
    done = pbm("watch", "--from", "-", "--lab", folder, stdin=line)
    assert "\x1b" not in done.stderr and "unknown test (?[2Jboo)" in done.stderr


def test_repeats_of_a_patient_are_left_out_and_nobody_can_be_found_in_what_is_kept(folder: Path) -> None:
    some = [replace(one, patient=f"name-of-{n % 3}") for n, one in enumerate(results([1.5] * 9, TSH))]
    (folder / "live.csv").write_text(csv(some[:6]))
    pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    (folder / "live.csv").write_text(csv(some))
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert "Taken: 0 results. Left out: 3 same patient again." in done.stderr
    assert [row[-1] for row in kept(folder)["results"]] == [""] * 3 + ["same patient again"] * 6
    assert all(b"name-of" not in file.read_bytes() for file in folder.glob("watch.*"))
    assert (folder / "watch.key").stat().st_mode & 0o077 == 0


def test_an_open_alarm_is_told_again_at_the_next_start(folder: Path) -> None:
    write_plan(folder / "plan.toml", plan(sodium_line_1=[ewma()]))
    (folder / "live.csv").write_text(csv(results(shifted_values(1, 200, {150: 6.0}))))
    first = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    second = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert not second.stdout
    assert f"Open: {first.stdout.splitlines()[-1]}" in second.stderr
    assert "ALARM OPEN, HIGH" in second.stderr


# Going on


@pytest.mark.parametrize("cut", [1, 250, 449, 450, 451, 899])
def test_stopped_and_started_again_it_goes_on_as_if_it_never_stopped(folder: Path, tmp_path: Path, cut: int) -> None:
    whole = write_folder(tmp_path / "whole", every_line())
    (whole / "live.csv").write_text(csv(FEED))
    undisturbed = pbm("watch", "--from", whole / "live.csv", "--lab", whole, "--once")
    (folder / "live.csv").write_text(csv(FEED[:cut]))
    first = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    (folder / "live.csv").write_text(csv(FEED))
    second = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert first.stdout + second.stdout == undisturbed.stdout
    assert kept(folder) == kept(whole)


def test_standard_input_given_again_counts_once(folder: Path, tmp_path: Path) -> None:
    whole = write_folder(tmp_path / "whole", every_line())
    pbm("watch", "--from", "-", "--lab", whole, stdin=ndjson(FEED))
    pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED[:500]))
    again = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED))
    assert "Taken: 400 results. Left out: 500 duplicate." in again.stderr
    del (first := kept(folder))["tallies"], (other := kept(whole))["tallies"]
    assert first == other


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_file_is_followed_until_a_signal_which_leaves_a_whole_store(folder: Path, number: signal.Signals) -> None:
    live = folder / "live.csv"
    live.write_text(csv(FEED[:300]))
    with following(live, folder) as process:
        wait_for_results(folder, 300)
        with live.open("a") as file:
            file.write("".join(f"{line}\n" for line in csv_lines(FEED[300:])))
        wait_for_results(folder, 900)
        process.send_signal(number)
        out, err = process.communicate(timeout=20)
    assert process.returncode == 0, err
    assert "Taken: 900 results" in err
    assert "Traceback" not in err
    assert len(out.splitlines()) == len(expected_alarms(FEED))


def following(live: Path, folder: Path, *, quiet: bool = False) -> "subprocess.Popen[str]":
    told = subprocess.DEVNULL if quiet else subprocess.PIPE
    command = [*RUN, "watch", "--from", str(live), "--lab", str(folder)]
    return subprocess.Popen(command, stdout=told, stderr=told, text=True)


def wait_for_results(folder: Path, count: int) -> None:
    for _ in range(1500):
        if results_kept(folder) >= count:
            return
        time.sleep(0.02)
    pytest.fail(f"{count} results were not kept in time")


def results_kept(folder: Path) -> int:
    try:
        return int(asked(folder, "select count(*) from results")[0][0])
    except DBAPIError:  # not made yet
        return 0


KILLS = 20


@pytest.mark.slow
def test_killed_at_random_points_of_a_growing_file_it_loses_nothing_and_counts_nothing_twice(
    folder: Path, tmp_path: Path
) -> None:
    chance, feed = random.Random(1), two_lines(5, 45_000)
    text = csv(feed)
    whole = write_folder(tmp_path / "whole", every_line())
    (whole / "live.csv").write_text(text)
    undisturbed = pbm("watch", "--from", whole / "live.csv", "--lab", whole, "--once")
    assert len(undisturbed.stdout.splitlines()) > 20
    live, written, inside = folder / "live.csv", 0, 0
    live.write_text("")
    for kill in range(KILLS):
        # More than is read before the kill, and not to a line end: whoever writes the file may be anywhere in a line.
        until = len(text) * (kill + 4) // (KILLS + 4) + chance.randint(-200, 200)
        with live.open("a") as file:
            file.write(text[written:until])
        written = until
        with following(live, folder, quiet=True) as process:
            wait_for_results(folder, results_kept(folder) + chance.randint(1, 1500))
            process.kill()
        inside += results_kept(folder) < text.count("\n", 0, until) - 1
    assert inside > KILLS // 2, "the test must kill in the middle of the work"
    live.write_text(text)
    assert pbm("watch", "--from", live, "--lab", folder, "--once").returncode == 0
    assert kept(folder) == kept(whole)


# A plan that changes


def test_a_new_plan_restarts_only_the_monitors_that_changed_and_leaves_a_mark(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED))
    pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    before, states = plan_fingerprint(folder / "plan.toml"), StoreReader(place_of(folder)).snapshots()
    chosen = every_line()
    changed = chosen.streams["sodium@line-1"].model_copy(update={"monitors": (ewma(half_width=1.5),)})
    write_plan(folder / "plan.toml", chosen.model_copy(update={"streams": chosen.streams | {"sodium@line-1": changed}}))
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert "3 monitors go on under the new plan; begun afresh: sodium@line-1 monitor 0" in done.stderr
    after = StoreReader(place_of(folder)).snapshots()
    assert [one.taken for one in after] == [0 if one.stream == SODIUM else one.taken for one in states]
    assert [one.state for one in after if one.stream != SODIUM] == [one.state for one in states if one.stream != SODIUM]
    marks = asked(folder, "select plan_before, plan_after, detail from audit order by id")
    assert [mark[:2] for mark in marks] == [("", before), (before, plan_fingerprint(folder / "plan.toml"))]
    assert "begun afresh: sodium@line-1 monitor 0" in marks[1][2]


# What goes wrong


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (("--from", "nowhere.csv"), "nowhere.csv cannot be read: No such file"),
        (("--from", "http://127.0.0.1:2575"), "is no feed that this version reads"),
        (("--from", "live.csv", "--speed", "60"), "--speed paces the replay of a history"),
        (("--from", "history"), "There is no history"),
    ],
)
def test_a_source_that_cannot_be_used_is_told_in_one_paragraph(
    folder: Path, arguments: tuple[str, ...], told: str
) -> None:
    done = pbm("watch", *arguments, "--lab", folder)
    assert done.returncode == 2
    assert told in done.stderr and "Traceback" not in done.stderr


def test_without_a_plan_it_says_how_to_make_one(folder: Path) -> None:
    (folder / "plan.toml").unlink()
    done = pbm("watch", "--from", "-", "--lab", folder)
    assert done.returncode == 2
    assert "pbm tune" in done.stderr and "Traceback" not in done.stderr


def test_a_second_watch_on_the_same_store_is_refused(folder: Path) -> None:
    with Store(place_of(folder)):
        done = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED))
    assert done.returncode == 2
    assert "Another `pbm watch`" in done.stderr and not done.stdout


def test_when_the_store_cannot_go_on_it_says_so_and_the_feed_goes_on_from_there(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED))
    (folder / "watch.sqlite").write_bytes(b"no database " * 500)
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert done.returncode == 2 and "is not a store of pbm" in done.stderr and "Traceback" not in done.stderr
    (folder / "watch.sqlite").unlink()
    done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
    assert len(done.stdout.splitlines()) == len(expected_alarms(FEED))


def test_a_reader_of_the_alarms_that_goes_away_ends_the_watch_quietly(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED))
    command = [
        *map(shlex.quote, RUN),
        "watch",
        "--from",
        f"{folder}/live.csv",
        "--lab",
        f"{folder}",
        "--once",
        "|",
        "head -c 1",
    ]
    done = subprocess.run(" ".join(command), shell=True, capture_output=True, text=True, check=False)
    assert "Traceback" not in done.stderr


# Start-up


def test_it_loads_neither_compiler_nor_statistics_nor_plots(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED))
    code = (
        "import sys\n"
        "from pathlib import Path\n"
        "from pbm.commands.watch import watch\n"
        f"watch(from_=[{str(folder / 'live.csv')!r}], lab=Path({str(folder)!r}), once=True)\n"
        "print(sorted(sys.modules), file=sys.stderr)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert len(done.stdout.splitlines()) == len(expected_alarms(FEED))
    loaded = done.stderr.splitlines()[-1]
    for heavy in ("numba", "statsmodels", "matplotlib", "river", "pandas", "textual"):
        assert f"'{heavy}'" not in loaded
