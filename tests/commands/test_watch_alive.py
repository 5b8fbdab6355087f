"""`pbm watch` as a thing that lives: quiet notices, signs of life, health, changed clocks, a trial, alarms out, a plan read again."""

import json
import signal
import sqlite3
import sys
import time
from collections.abc import Callable
from dataclasses import replace
from datetime import datetime
from pathlib import Path
from typing import Any

import pytest

from pbm.commands import watch_health, watch_work
from pbm.io.plan_file import plan_fingerprint, write_plan
from pbm.io.store_reader import StoreReader
from pbm.records.plan import Plan
from pbm.records.result import Result
from pbm.records.rhythm import Rhythm
from pbm.stages.alarm_line import alarm_line
from tests.commands.test_watch import FEED, csv, expected_alarms, kept, ndjson, pbm, wait_for_results
from tests.commands.test_watch_events import running, stopped
from tests.live_laboratory import (
    MINUTE,
    SODIUM,
    SODIUM_2,
    START,
    TSH,
    every_line,
    ewma,
    laboratory,
    plan,
    results,
    shifted_values,
    write_folder,
)

ZONE = laboratory().laboratory.zone
STREAM = Rhythm(quiet_at=30.0, false_per_day=0.011, by_hour=(60.0,) * 168)
ANALYSER = Rhythm(quiet_at=20.0, false_per_day=0.011, by_hour=(120.0,) * 168)


def with_rhythms(given: Plan) -> Plan:
    streams = {name: one.model_copy(update={"rhythm": STREAM}) for name, one in given.streams.items()}
    return given.model_copy(update={"streams": streams, "analysers": {"line-1": ANALYSER, "line-2": ANALYSER}})


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return write_folder(tmp_path / "laboratory", with_rhythms(every_line()))


def once(folder: Path, some: list[Result] | None = None, *more: str | Path) -> Any:
    (folder / "live.csv").write_text(csv(FEED if some is None else some))
    return pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once", *more)


def wait_until(holds: Callable[[], bool], what: str) -> None:
    for _ in range(1200):
        if holds():
            return
        time.sleep(0.05)
    pytest.fail(f"{what} did not come about in time")


# Quiet


GAP = [one if n < 450 else replace(one, time=one.time + 45 * MINUTE) for n, one in enumerate(FEED)]


def test_a_silence_is_told_when_it_is_too_long_and_when_it_ends(folder: Path) -> None:
    done = once(folder, GAP)
    assert (
        "Silence is told of 2 analysers and 3 streams; of each about 1 per 90 days although all is well." in done.stderr
    )
    notices = [line for line in done.stderr.splitlines() if "NOTICE" in line]
    begun = [line for line in notices if "NOTICE  line-2 quiet for 10 min, 20 expected" in line]
    ended = [
        line
        for line in notices
        if "NOTICE ENDED  line-2 quiet for 10 min, 20 expected; results again after 46 min" in line
    ]
    assert len(begun) == len(ended) == 1
    assert not any("quiet" in line for line in done.stdout.splitlines())
    assert {one.closed_at is None for one in StoreReader(folder / "watch.sqlite").notices()} == {False}


@pytest.mark.parametrize("cut", [449, 450, 451, 452])
def test_stopped_in_a_silence_it_tells_the_same(folder: Path, tmp_path: Path, cut: int) -> None:
    whole = write_folder(tmp_path / "whole", with_rhythms(every_line()))
    once(whole, GAP)
    once(folder, GAP[:cut])
    once(folder, GAP)
    assert StoreReader(folder / "watch.sqlite").notices() == StoreReader(whole / "watch.sqlite").notices()
    assert kept(folder) == kept(whole)


def test_a_feed_that_falls_silent_is_told_by_the_clock_of_the_computer(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The clock is handed in: here it runs an hour for every look."""
    clock = [START]

    def now() -> int:
        clock[0] += 50_000_000
        return clock[0]

    monkeypatch.setattr(watch_work, "now", now)
    monkeypatch.setattr(watch_work, "run", _then_idle(40))
    done = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED[:60]))
    assert "NOTICE  line-1 quiet for 10 min, 20 expected" in done.stderr
    assert {one.analyser for one in StoreReader(folder / "watch.sqlite").open_notices()} == {"line-1", "line-2"}
    health = json.loads(pbm("watch", "--health", "--json", "--lab", folder).stdout)
    assert sorted(one["state"] for one in health["monitors"]) == ["open alarm", "quiet", "quiet", "quiet"]
    assert "line-2 quiet for 10 min, 20 expected" in [one["text"] for one in health["notices"]]


def _then_idle(looks: int) -> Callable[..., None]:
    """The feeds at work, and after them so many looks at the clock without any result."""
    from pbm.io.feeds import run

    def feeds(given: Any, prepare: Any, take: Any) -> None:
        run(given, prepare, take)
        for _ in range(looks):
            take([])

    return feeds


# The clocks


@pytest.mark.parametrize("offsets", [True, False], ids=["with offsets", "as the wall shows them"])
def test_a_night_in_which_clocks_are_changed_shuts_out_nothing(folder: Path, offsets: bool) -> None:
    """An hour that is skipped, and one that comes twice. Without offsets its second passage cannot be told from its first: to a replay,
    whose own times are the clock, it then looks like a silence, and that ends by itself."""
    for day in (datetime(2031, 3, 29, 20, tzinfo=ZONE), datetime(2031, 10, 25, 20, tzinfo=ZONE)):
        first = round(day.timestamp()) * 1_000_000
        streams = ((SODIUM, 140.0), (SODIUM_2, 141.0), (TSH, 1.5))
        some = [
            replace(one, specimen=f"{day.month}-{one.specimen}")
            for n in range(600)
            for name, value in streams
            for one in results([value], name, first + n * MINUTE, n)
        ]
        header, *lines = csv(some).splitlines()
        if not offsets:
            walls = (datetime.fromtimestamp(one.time / 1e6, ZONE).replace(tzinfo=None).isoformat() for one in some)
            lines = [f"{wall},{line.partition(',')[2]}" for wall, line in zip(walls, lines, strict=True)]
        (folder / "live.csv").write_text("\n".join([header, *lines, ""]))
        done = pbm("watch", "--from", folder / "live.csv", "--lab", folder, "--once")
        assert "Taken: 1,800 results. Left out: nothing." in done.stderr
        night = [line for line in done.stderr.splitlines() if "  NOTICE  " in line and f"2031-{day.month:02d}" in line]
        assert len(night) == (2 if not offsets and day.month == 10 else 0), night
    assert not StoreReader(folder / "watch.sqlite").open_notices()


def test_a_clock_of_the_computer_that_goes_back_is_told_and_nothing_stops(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    clock = [START + 1000 * MINUTE]

    def now() -> int:
        clock[0] += 1_000_000 if len(looks) != 5 else -3630_000_000
        looks.append(clock[0])
        return clock[0]

    looks: list[int] = []
    monkeypatch.setattr(watch_work, "now", now)
    monkeypatch.setattr(watch_work, "run", _then_idle(12))
    done = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(FEED))
    assert done.returncode == 0
    assert "the computer's clock went back by 60 min; silences are counted on from where they were" in done.stderr
    assert len(done.stdout.splitlines()) == len(expected_alarms(FEED))


# Signs of life


def test_a_watch_to_which_nothing_comes_leaves_signs_of_life(folder: Path) -> None:
    (folder / "live.csv").write_text(csv(FEED[:30]))
    with running(folder, "--from", folder / "live.csv") as process:
        wait_for_results(folder, 30)
        reader = StoreReader(folder / "watch.sqlite")
        wait_until(lambda: reader.heartbeat() is not None, "a sign of life")
        first = reader.heartbeat()
        assert first is not None and first.pid == process.pid
        wait_until(lambda: reader.heartbeat() != first, "the next sign of life")
        second = reader.heartbeat()
        assert second is not None
        assert (second.started, second.last_arrival) == (first.started, first.last_arrival)
        alive = pbm("watch", "--health", "--lab", folder)
        assert alive.returncode == 0 and alive.stdout.startswith("Healthy: alive ")
        stopped(process)


@pytest.mark.parametrize(
    ("later", "told"),
    [(10, "Healthy: alive "), (31, "left its last sign of life 3"), (-90, "the computer's clock went back")],
)
def test_health_is_judged_by_the_age_of_the_last_sign_of_life(
    folder: Path, monkeypatch: pytest.MonkeyPatch, later: int, told: str
) -> None:
    once(folder)
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        connection.execute("update heartbeat set state = '{}'")  # as if it had been killed
    beat = StoreReader(folder / "watch.sqlite").heartbeat()
    assert beat is not None
    monkeypatch.setattr(watch_health, "now", lambda: beat.at + later * 1_000_000)
    done = pbm("watch", "--health", "--lab", folder)
    assert told in done.stdout and done.returncode == (0 if later == 10 else 1)
    given = json.loads(pbm("watch", "--health", "--json", "--lab", folder).stdout)
    assert given["healthy"] is (later == 10) and given["pid"] == beat.pid
    assert {one["state"] for one in given["monitors"]} <= {"armed", "warming", "open alarm", "quiet"}


def test_a_stream_without_a_monitor_is_off(folder: Path) -> None:
    write_plan(folder / "plan.toml", plan(sodium_line_1=[ewma()], tsh_line_1=[]))
    once(folder)
    given = json.loads(pbm("watch", "--health", "--json", "--lab", folder).stdout)
    assert {one["stream"]: one["state"] for one in given["monitors"]}["tsh@line-1"] == "off"


def test_a_watch_that_was_ended_is_known_to_be(folder: Path) -> None:
    once(folder)
    done = pbm("watch", "--health", "--lab", folder)
    assert done.returncode == 1 and "was ended " in done.stdout


def test_where_no_watch_has_run_health_is_no(folder: Path) -> None:
    done = pbm("watch", "--health", "--lab", folder)
    assert done.returncode == 1 and done.stdout.startswith("Not healthy: There is no store")


def test_without_a_source_it_says_what_is_missing(folder: Path) -> None:
    done = pbm("watch", "--lab", folder)
    assert done.returncode == 2 and "--from says what to watch" in done.stderr


# On trial


def test_on_trial_alarms_are_kept_off_the_bench_and_told_against_the_plan(folder: Path) -> None:
    first = once(folder, FEED[:600], "--shadow")
    second = once(folder, FEED, "--shadow")
    alarms = expected_alarms(FEED)
    assert first.stdout == second.stdout == "", "no alarm is shown"
    assert [one.shadow for one in StoreReader(folder / "watch.sqlite").alarms()] == [True] * len(alarms)
    assert "On trial (--shadow)" in first.stderr and "Open:" not in second.stderr
    row = next(line for line in second.stderr.splitlines() if line.startswith("all streams"))
    # 4 monitors of 0.033 a day over 299 minutes; both runs of the trial together.
    days = 299 / 1440
    assert row.split()[2:5] == [f"{days:.1f}", f"{4 * 0.033 * days:.2f}", str(len(alarms))]
    assert row.endswith("YES"), "so many alarms the plan did not predict: there was a fault"


def test_after_the_trial_alarms_are_shown_and_a_later_trial_counts_from_its_begin(folder: Path) -> None:
    once(folder, FEED[:500], "--shadow")
    live = once(folder, FEED[:700])
    later = once(folder, FEED, "--shadow")
    assert live.stdout and "shadow" not in live.stdout
    kept_alarms = StoreReader(folder / "watch.sqlite").alarms()
    shown = [one for one in kept_alarms if not one.shadow]
    assert len(live.stdout.splitlines()) == len(shown) < len(kept_alarms)
    row = next(line for line in later.stderr.splitlines() if line.startswith("all streams"))
    in_second = sum(one.shadow and one.time > FEED[699].time for one in kept_alarms)
    assert row.split()[4] == str(in_second)


def test_an_alarm_that_a_trial_leaves_open_is_told_when_the_trial_is_over(folder: Path) -> None:
    some = results(shifted_values(1, 200, {150: 6.0}))
    once(folder, some, "--shadow")
    done = once(folder, some)
    opened = [line for line in done.stderr.splitlines() if line.startswith("Open:") and "NOTICE" not in line]
    assert len(opened) == 1 and opened[0].endswith("  raised on trial")


# Alarms out


def lab_with_alarms_out(folder: Path, code: str, seconds: float = 20.0) -> None:
    text = (folder / "lab.toml").read_text()
    command = json.dumps([sys.executable, "-c", code, "a b; $HOME"])
    (folder / "lab.toml").write_text(
        f'{text}\n[alarms]\nfile = "alarms.ndjson"\ncommand = {command}\ncommand_seconds = {seconds}\n'
    )


APPEND = "import sys; open('told', 'a').write(sys.stdin.read() + '\\n')"


def test_each_alarm_goes_to_the_file_and_the_command_once_over_restarts(folder: Path) -> None:
    lab_with_alarms_out(folder, APPEND)
    for cut in (500, 700, 900):
        assert once(folder, FEED[:cut]).returncode == 0
    numbers = list(range(1, len(expected_alarms(FEED)) + 1))
    for name in ("alarms.ndjson", "told"):
        assert [json.loads(line)["id"] for line in (folder / name).read_text().splitlines()] == numbers


def test_an_alarm_that_is_not_known_to_be_out_goes_out_at_the_next_start(folder: Path) -> None:
    lab_with_alarms_out(folder, APPEND)
    once(folder, FEED[:900])
    (folder / "alarms.ndjson").unlink()
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        connection.execute("update feeds set position = '2' where source = 'alarms out'")
    once(folder)
    sent = [json.loads(line)["id"] for line in (folder / "alarms.ndjson").read_text().splitlines()]
    assert sent == list(range(3, len(expected_alarms(FEED)) + 1))


def test_alarms_of_before_there_was_an_exit_and_alarms_on_trial_do_not_go_out(folder: Path) -> None:
    once(folder, FEED[:600])
    lab_with_alarms_out(folder, APPEND)
    once(folder, FEED[:750], "--shadow")
    assert not (folder / "told").exists() and not (folder / "alarms.ndjson").exists()
    once(folder, FEED)
    told = (
        [json.loads(line) for line in (folder / "told").read_text().splitlines()] if (folder / "told").exists() else []
    )
    assert all(one["time"] > "2031-02-28T03" and not one["shadow"] for one in told)


def test_a_command_that_fails_or_hangs_is_told_and_neither_stops_nor_delays_the_watch(folder: Path) -> None:
    lab_with_alarms_out(folder, "import sys, time; time.sleep(float('0' + '60'))", seconds=0.2)
    done = once(folder)
    assert done.returncode == 0 and f"Alarms: {len(expected_alarms(FEED))}." in done.stderr
    assert "took longer than 0.2 s and was ended; the alarm is in the store." in done.stderr


# A plan read again


def changed_plan() -> Plan:
    given = with_rhythms(every_line())
    stream = given.streams["sodium@line-1"].model_copy(update={"monitors": (ewma(half_width=1.5),)})
    return given.model_copy(update={"streams": given.streams | {"sodium@line-1": stream}})


def audit(folder: Path) -> list[tuple[str, str, str, str]]:
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        return connection.execute("select what, plan_before, plan_after, detail from audit order by id").fetchall()


def test_a_plan_read_again_on_hup_keeps_the_states_of_monitors_that_did_not_change(
    folder: Path, tmp_path: Path
) -> None:
    (folder / "live.csv").write_text(csv(FEED[:450]))
    before = plan_fingerprint(folder / "plan.toml")
    with running(folder, "--from", folder / "live.csv") as process:
        wait_for_results(folder, 450)
        good = (folder / "plan.toml").read_text()
        (folder / "plan.toml").write_text(good.replace("weight = 0.1", "weight = 7"))
        process.send_signal(signal.SIGHUP)
        time.sleep(3)
        write_plan(folder / "plan.toml", changed_plan())
        after = plan_fingerprint(folder / "plan.toml")
        process.send_signal(signal.SIGHUP)
        wait_until(lambda: any(row[0] == "plan changed" for row in audit(folder)), "the new plan")
        with (folder / "live.csv").open("a") as file:
            file.write(csv(FEED[450:]).partition("\n")[2])
        wait_for_results(folder, 900)
        _, err = stopped(process)
    assert "The plan of before stays in force: " in err and "weight" in err
    assert "New plan in force: 3 monitors go on under the new plan; begun afresh: sodium@line-1 monitor 0" in err
    (change,) = [row for row in audit(folder) if row[0] == "plan changed"]
    assert change[1:3] == (before, after)
    # The same by a restart between the same two results.
    restarted = write_folder(tmp_path / "restarted", with_rhythms(every_line()))
    once(restarted, FEED[:450])
    write_plan(restarted / "plan.toml", changed_plan())
    once(restarted)
    assert kept(folder)["monitors"] == kept(restarted)["monitors"]
    assert kept(folder)["alarms"] == kept(restarted)["alarms"]


@pytest.mark.parametrize(
    ("name", "told"),
    [
        ("ferritin@line-1", 'plan.toml watches ferritin@line-1, and lab.toml has no analyte "ferritin". Describe it'),
        ("sodium", '"sodium" is not the name of a stream: write analyte@analyser'),
    ],
)
def test_a_plan_with_an_unknown_stream_is_refused_with_words(folder: Path, name: str, told: str) -> None:
    given = plan(sodium_line_1=[ewma()])
    write_plan(folder / "plan.toml", given.model_copy(update={"streams": {name: given.streams["sodium@line-1"]}}))
    done = once(folder)
    assert done.returncode == 2 and told in done.stderr and "Traceback" not in done.stderr
    assert not (folder / "watch.sqlite").exists(), "nothing was begun"


# Results that wait for their order


def test_results_that_wait_are_kept_through_a_stop_and_the_account_adds_up(
    folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Two runs of a feed whose neighbours have changed places, against one in order that does not wait."""
    in_order = write_folder(tmp_path / "in-order", with_rhythms(every_line()))
    text = (folder / "lab.toml").read_text()
    (folder / "lab.toml").write_text(f"{text}\n[feed]\nreorder_seconds = 600\n")
    clock = [START]

    def now() -> int:
        clock[0] += 1_000_000
        return clock[0]

    monkeypatch.setattr(watch_work, "now", now)
    swapped = [one for n in range(0, 900, 6) for one in (*FEED[n + 3 : n + 6], *FEED[n : n + 3])]
    first = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(swapped[:450]))
    assert "450 results still wait for their order; the next run takes them." in first.stderr
    assert pbm("store", "check", "--lab", folder).returncode == 0
    clock[0] += 3_600_000_000
    monkeypatch.setattr(watch_work, "run", _then_idle(700))
    second = pbm("watch", "--from", "-", "--lab", folder, stdin=ndjson(swapped[450:]))
    assert "still wait" not in second.stderr
    pbm("watch", "--from", "-", "--lab", in_order, stdin=ndjson(FEED))
    assert kept(folder)["monitors"] == kept(in_order)["monitors"]
    assert sorted(first.stdout.splitlines() + second.stdout.splitlines()) == sorted(
        alarm_line(one, laboratory().analytes[one.stream.analyte], ZONE) for one in expected_alarms(FEED)
    )
    checked = pbm("store", "check", "--lab", folder)
    assert checked.returncode == 0, checked.stdout


# What one needs to see


def test_a_log_of_a_night_says_the_day_of_each_alarm(folder: Path) -> None:
    done = once(folder)
    assert done.stdout and all(line.startswith(("2031-02-27 ", "2031-02-28 ")) for line in done.stdout.splitlines())


def test_a_statistic_that_began_afresh_is_shown_as_warming_up(folder: Path) -> None:
    chosen = with_rhythms(
        plan(sodium_line_1=[ewma(statistic="mean", weight=None, window=50, limits={"low": 130.0, "high": 150.0})])
    )
    write_plan(folder / "plan.toml", chosen)
    some = results(shifted_values(1, 91, {}))
    event = f"time,event,analyte,analyser,detail\n{datetime.fromtimestamp(some[60].time / 1e6, ZONE).isoformat()},calibration,,line-1,\n"
    (folder / "events.csv").write_text(event)
    once(folder, some, "--events", folder / "events.csv")
    again = once(folder, some)
    assert "warming up: 31 of 50 results" in again.stderr
