"""Alarms on their way out of the store: a line in a file, and a command of the laboratory, in a thread of their own.

An alarm goes out once it is kept, in the order of alarms. How far this has come is kept with a later batch; after a stop, alarms that are
not known to be out go out again. So each goes out at least once, and carries its number for whoever must not be told twice: that an alarm
is told twice does less harm than that it is told to nobody. A command that fails, or takes longer than it may, is told and not repeated.
"""

import contextlib
import os
import signal
import subprocess
import tempfile
import threading
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from queue import SimpleQueue

from pbm.io.ndjson import alarm_text
from pbm.records.alarm import Alarm

ALARMS_OUT = "alarms out"  # the feed under whose name the store keeps the number of the last alarm that is out
_LONGEST_SAID = 200


@dataclass(frozen=True)
class Exits:
    """Where alarms go.

    Attributes
    ----------
    folder
        The laboratory's; the command runs in it.
    file
        Each alarm is added to it as a line; None for no file.
    command, seconds
        Program and arguments, and how long it may take; None for no command.
    """

    folder: Path
    file: Path | None
    command: Sequence[str] | None
    seconds: float


class Outbox:
    """Hands out alarms.

    Parameters
    ----------
    exits
        Where they go.
    out
        Number of the last alarm that is known to be out.

    Attributes
    ----------
    out
        The same now.
    """

    def __init__(self, exits: Exits, out: int) -> None:
        self._exits, self.out, self._sent = exits, out, out
        self._queue: SimpleQueue[tuple[int, Alarm] | None] = SimpleQueue()
        self._failures: SimpleQueue[str] = SimpleQueue()
        self._stop_after_this = False
        self._thread = threading.Thread(target=self._work, daemon=True)
        self._thread.start()

    @property
    def sent(self) -> int:
        """Number of the last alarm that was handed in."""
        return self._sent

    def send(self, alarms: Iterable[tuple[int, Alarm]]) -> None:
        """Hand in alarms with their numbers, in order."""
        for number, alarm in alarms:
            self._queue.put((number, alarm))
            self._sent = number

    def failures(self) -> list[str]:
        """What went wrong since this was last asked."""
        said = []
        while not self._failures.empty():
            said.append(self._failures.get())
        return said

    def close(self) -> None:
        """Wait for the alarm on its way; those behind it go out at the next start, unless they are quick."""
        self._queue.put(None)
        self._thread.join(self._exits.seconds + 1)
        self._stop_after_this = True
        self._thread.join(self._exits.seconds + 1)

    def _work(self) -> None:
        while (given := self._queue.get()) is not None and not self._stop_after_this:
            number, alarm = given
            text = alarm_text(alarm, number)
            for failure in filter(None, (self._to_file(text), self._to_command(text))):
                self._failures.put(f"Alarm {number} ({alarm.stream}, {alarm.side}): {failure}")
            self.out = number

    def _to_file(self, text: str) -> str:
        if self._exits.file is None:
            return ""
        try:
            with self._exits.file.open("a", encoding="utf-8") as file:
                file.write(f"{text}\n")
                file.flush()
                os.fsync(file.fileno())
        except OSError as error:
            return f"{self._exits.file} cannot be written ({error.strerror}); the alarm is in the store."
        return ""

    def _to_command(self, text: str) -> str:
        if self._exits.command is None:
            return ""
        try:
            failure = run_command(self._exits.command, text, self._exits.seconds, self._exits.folder)
        except OSError as error:
            failure = f"cannot be run ({error.strerror or error})"
        return f"the command {self._exits.command[0]} {failure}; the alarm is in the store." if failure else ""


def run_command(command: Sequence[str], text: str, seconds: float, folder: Path) -> str:
    """Run a command without a shell, `text` on its standard input; why it failed, or "".

    Raises
    ------
    OSError
        If there is no such program, or it may not be run.
    """
    with tempfile.TemporaryFile() as given, tempfile.TemporaryFile() as said:
        given.write(text.encode("utf-8"))
        given.seek(0)
        process = subprocess.Popen(
            list(command), stdin=given, stdout=subprocess.DEVNULL, stderr=said, cwd=folder, start_new_session=True
        )
        try:
            code = process.wait(seconds)
        except subprocess.TimeoutExpired:
            with contextlib.suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)  # and whatever it started
            process.wait()
            return f"took longer than {seconds:g} s and was ended"
        said.seek(0)
        first = said.read(_LONGEST_SAID).decode("utf-8", "replace").strip().partition("\n")[0]
        return "" if code == 0 else f"failed with exit code {code}" + (f" ({first})" if first else "")
