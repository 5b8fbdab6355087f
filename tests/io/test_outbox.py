"""Alarms on their way out: a file, a command without a shell; what fails is told, and nothing waits for it."""

import json
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.io.outbox import Exits, Outbox, run_command
from tests.stages.test_alarm_line import ALARM

PYTHON = sys.executable
COPY = "import sys; open('got', 'a').write(sys.stdin.read() + '|' + '|'.join(sys.argv[1:]) + '\\n')"


def sent(exits: Exits, count: int = 3, out: int = 0) -> tuple[Outbox, list[str]]:
    """An outbox that was given alarms and closed, and what failed."""
    outbox = Outbox(exits, out)
    outbox.send([(out + n, replace(ALARM, specimen=f"31-{n}")) for n in range(1, count + 1)])
    outbox.close()
    return outbox, outbox.failures()


def test_each_alarm_is_a_line_in_the_file_and_an_input_of_the_command(tmp_path: Path) -> None:
    exits = Exits(tmp_path, tmp_path / "alarms.ndjson", [PYTHON, "-c", COPY, "$HOME; ls", "a b"], 20.0)
    outbox, failed = sent(exits)
    assert not failed and outbox.out == 3
    lines = [json.loads(line) for line in (tmp_path / "alarms.ndjson").read_text().splitlines()]
    assert [(line["id"], line["specimen"], line["side"]) for line in lines] == [
        (n, f"31-{n}", "HIGH") for n in (1, 2, 3)
    ]
    got = [line.partition("|") for line in (tmp_path / "got").read_text().splitlines()]
    assert [json.loads(text) for text, _, _ in got] == lines
    assert {arguments for _, _, arguments in got} == {"$HOME; ls|a b"}, "arguments are data, no shell reads them"


@pytest.mark.parametrize(
    ("code", "told"),
    [
        ("import sys; sys.exit('pager is off')", "failed with exit code 1 (pager is off)"),
        ("import time; time.sleep(60)", "took longer than 0.5 s and was ended"),
        ("import os; os.kill(os.getpid(), 9)", "failed with exit code -9"),
    ],
)
def test_a_command_that_fails_is_told_and_the_next_alarm_goes_out_all_the_same(
    tmp_path: Path, code: str, told: str
) -> None:
    outbox, failed = sent(
        Exits(tmp_path, tmp_path / "alarms", [PYTHON, "-c", code], 0.5 if "sleep" in code else 20.0), 2
    )
    assert len(failed) == 2 and all(told in one and "the alarm is in the store" in one for one in failed)
    assert failed[0].startswith("Alarm 1 (sodium@line-2, HIGH): the command")
    assert outbox.out == 2 and len((tmp_path / "alarms").read_text().splitlines()) == 2


def test_a_command_that_does_not_exist_and_a_file_that_cannot_be_written_are_told(tmp_path: Path) -> None:
    _, failed = sent(Exits(tmp_path, tmp_path / "no" / "folder", [str(tmp_path / "no-such")], 5.0), 1)
    assert len(failed) == 2
    assert "cannot be written (No such file or directory)" in failed[0] and "cannot be run" in failed[1]


def test_what_a_command_started_is_ended_with_it(tmp_path: Path) -> None:
    child = "import subprocess, sys; subprocess.run([sys.executable, '-c', 'import time; time.sleep(60); open(\"late\", \"w\")'])"
    assert "was ended" in run_command([PYTHON, "-c", child], "{}", 0.5, tmp_path)
    assert not (tmp_path / "late").exists()


def test_closing_does_not_wait_for_more_than_one_slow_alarm(tmp_path: Path) -> None:
    slow = Exits(tmp_path, None, [PYTHON, "-c", "import time; time.sleep(60)"], 1.0)
    outbox, failed = sent(slow, 50)
    assert 1 <= outbox.out < 50 and len(failed) == outbox.out
