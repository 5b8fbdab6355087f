"""The work of `pbm watch`: feed -> reader -> monitors -> store, and only then the alarm lines; in this order for every batch."""

import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path

import typer

from pbm.commands.folder import LabFolder
from pbm.commands.lab import read_checked_lab
from pbm.commands.watch_text import Account, opening, what_is_watched
from pbm.errors import InputError, PlanError
from pbm.io.feeds import Feed, FileFeed, LineFeed, PacedFeed, run
from pbm.io.follow import FollowedFile
from pbm.io.ndjson import alarm_text
from pbm.io.patient_key import patient_key
from pbm.io.plan_file import plan_fingerprint, read_plan
from pbm.io.store import Store
from pbm.io.store_place import store_place
from pbm.records.alarm import Alarm
from pbm.records.laboratory import Lab
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.stages.alarm_line import alarm_line
from pbm.stages.live import Live, read_chunk
from pbm.stages.reading import Reader

STDIN = "standard input"
_TICK = 0.25  # seconds between two looks of the counter on a terminal


def watch_feed(folder: LabFolder, source: str, *, json: bool, once: bool, speed: float | None) -> None:
    """Watch a feed until it ends or is stopped.

    Raises
    ------
    InputError
        If a file of the laboratory or the source cannot be used.
    FeedError
        If the store or the source cannot go on.
    """
    if speed is not None and source != "history":
        raise InputError(
            "--speed paces the replay of a history: pbm watch --from history --speed 60. Other feeds have their own pace."
        )
    if not folder.plan.is_file():
        raise PlanError(f"There is no {folder.plan}, so nothing can be watched. `pbm tune` makes it from the history.")
    lab, plan, fingerprint = read_checked_lab(folder.lab), read_plan(folder.plan), plan_fingerprint(folder.plan)
    live = Live(lab, plan, fingerprint)
    with Store(store_place(lab.store, folder.store)) as store:
        opened = _open(source, folder, lab, store, once=once, speed=speed)
        going_on = live.go_on(store.snapshots(), store.newest_times(), store.recent_results)
        changed = store.plan_in_force() not in ("", fingerprint)
        begun, monitors = opening(live, going_on, changed=changed), [one.snapshot() for one in live.monitors]
        store.begin(time.time_ns() // 1_000, "watch begun", fingerprint, begun, monitors)
        work = _Work(lab, live, store, opened, json)
        work.say(what_is_watched(lab, plan, live, source), *[begun] * changed)
        work.say(*(f"Open: {work.line(one)}" for one in store.open_alarms()))
        try:
            run([opened.feed], partial(read_chunk, reader=opened.reader), work.take)
        finally:
            work.end()


@dataclass(frozen=True)
class _Opened:
    """A feed, how its readings are read, and the file behind it."""

    feed: Feed
    reader: Reader
    file: FollowedFile | None = None

    def notices(self) -> list[str]:
        """What the file has to say since it was last asked."""
        said = self.file.notices[:] if self.file else []
        if self.file:
            del self.file.notices[: len(said)]
        return said


def _open(source: str, folder: LabFolder, lab: Lab, store: Store, *, once: bool, speed: float | None) -> _Opened:
    if source == "history":
        return _replay(folder.history, lab, store, speed)
    if "://" in source:
        raise InputError(
            f'"{source}" is no feed that this version reads. Give a CSV file, - for NDJSON on standard input, or history.'
        )
    key = patient_key(folder.patient_key) if any(one.repeat_hours for one in lab.analytes.values()) else b""
    if source == "-":
        return _Opened(LineFeed(STDIN, sys.stdin.fileno(), store.position(STDIN)), Reader(lab, patient_key=key))
    columns, path = lab.extract, Path(source)
    file = FollowedFile(path, columns, store.position(str(path.absolute())))
    reader = Reader(
        lab,
        columns.decimal,
        columns.time_format,
        units_given=columns.unit is not None,
        kinds_given=columns.kind is not None,
        patient_key=key,
    )
    return _Opened(FileFeed(file, once=once), reader, file)


def _replay(history: Path, lab: Lab, store: Store, speed: float | None) -> _Opened:
    from pbm.io.replay import Replay  # Parquet takes time to load, and only a replay needs it

    replay = Replay(history, store.position(Replay.name(history)))
    return _Opened(PacedFeed(replay.chunks(1) if speed else replay.chunks(), speed), Reader(lab))


@dataclass
class _Work:
    """One run: takes what the feed brings, and tells what came of it."""

    lab: Lab
    live: Live
    store: Store
    opened: _Opened
    json: bool
    account: Account = field(init=False)
    _next_tick: float = 0.0
    _ticked: int = 0

    def __post_init__(self) -> None:
        self.account = Account(self.live)

    def take(self, chunks: Sequence[Chunk]) -> None:
        """Take a batch: what is printed is kept."""
        earlier = self.store.earlier(item for chunk in chunks for item in chunk.items if isinstance(item, Result))
        batch = self.live.take(chunks, earlier)
        self.store.keep(batch)
        self.say(*self.opened.notices(), *self.account.add(batch))
        for _, alarm in batch.alarms:
            self._clear_tick()
            typer.echo(alarm_text(alarm) if self.json else self.line(alarm))
        self._tick()

    def line(self, alarm: Alarm) -> str:
        """An alarm for people."""
        return alarm_line(alarm, self.lab.analytes[alarm.stream.analyte], self.lab.laboratory.zone)

    def say(self, *texts: str) -> None:
        """Tell a person, on stderr."""
        for text in texts:
            self._clear_tick()
            typer.echo(text, err=True)

    def end(self) -> None:
        """The counts."""
        file = self.opened.file
        self.say(*self.opened.notices())
        if file and file.unread:
            self.say(
                f"{file.unread} bytes at the end of {file.source} are no whole line yet; they wait for the next run."
            )
        self.say(str(self.account))
        if file:
            file.close()

    def _tick(self) -> None:
        """On a terminal, show that results come in."""
        if sys.stderr.isatty() and time.monotonic() >= self._next_tick:
            self._next_tick = time.monotonic() + _TICK
            self._ticked = len(self.account.brief)
            typer.echo(f"\r{self.account.brief}", err=True, nl=False)

    def _clear_tick(self) -> None:
        if self._ticked:
            # Written over with blanks: not every terminal knows how to erase a line.
            typer.echo(f"\r{' ' * self._ticked}\r", err=True, nl=False)
            self._ticked = 0
