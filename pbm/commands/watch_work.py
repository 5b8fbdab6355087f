"""The work of `pbm watch`: feed -> reader -> monitors -> store, and only then the alarm lines; in this order for every batch."""

import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass, field

import typer

from pbm.commands.folder import LabFolder
from pbm.commands.lab import read_checked_lab
from pbm.commands.watch_removal import Removal
from pbm.commands.watch_sources import Opener, Source, check_sources
from pbm.commands.watch_text import Account, opening, what_is_watched
from pbm.errors import FeedError, PlanError, StoreWaits
from pbm.io.feeds import run
from pbm.io.ndjson import alarm_text
from pbm.io.plan_file import plan_fingerprint, read_plan
from pbm.io.store import Store
from pbm.io.store_place import store_place
from pbm.records.alarm import Alarm
from pbm.records.laboratory import Lab
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.snapshot import Batch
from pbm.stages.alarm_line import alarm_line
from pbm.stages.live import Live, read_chunk

_REMIND = 60.0  # seconds until it is told again that the store cannot take anything
_TICK = 0.25  # seconds between two looks of the counter on a terminal


def watch_feed(
    folder: LabFolder, sources: Sequence[str], *, json: bool, once: bool, speed: float | None, keep: str | None = None
) -> None:
    """Watch feeds until they end or are stopped.

    Raises
    ------
    InputError
        If a file of the laboratory or a source cannot be used.
    FeedError
        If the store or a source cannot go on.
    """
    check_sources(sources, speed=speed)
    if not folder.plan.is_file():
        raise PlanError(f"There is no {folder.plan}, so nothing can be watched. `pbm tune` makes it from the history.")
    lab, plan, fingerprint = read_checked_lab(folder.lab), read_plan(folder.plan), plan_fingerprint(folder.plan)
    live, removal = Live(lab, plan, fingerprint), Removal(keep, lab)
    with Store(store_place(lab.store, folder.store)) as store:
        work = _Work(lab, live, store, json, once, removal)
        opener = Opener(folder, lab, store, work.say)
        work.sources = [opener.open(one, once=once, speed=speed) for one in sources]
        going_on = live.go_on(store.snapshots(), store.newest_times(), store.recent_results)
        changed = store.plan_in_force() not in ("", fingerprint)
        begun, monitors = opening(live, going_on, changed=changed), [one.snapshot() for one in live.monitors]
        store.begin(time.time_ns() // 1_000, "watch begun", fingerprint, begun, monitors)
        work.say(what_is_watched(lab, plan, live, ", ".join(sources)), *[begun] * changed)
        work.say(*(f"Open: {work.line(one)}" for one in store.open_alarms()))
        readers = {one.name: one.reader for one in work.sources}
        try:
            run(
                [one.feed for one in work.sources],
                lambda chunk: read_chunk(chunk, readers[chunk.source]),
                work.take,
            )
        finally:
            work.end()


@dataclass
class _Work:
    """One run: takes what the feed brings, and tells what came of it."""

    lab: Lab
    live: Live
    store: Store
    json: bool
    once: bool
    removal: Removal
    sources: Sequence[Source] = ()
    account: Account = field(init=False)
    _in_hand: tuple[Sequence[Chunk], Batch] | None = None
    _waits_since: float | None = None
    _next_tick: float = 0.0
    _ticked: int = 0

    def __post_init__(self) -> None:
        self.account = Account(self.live)

    def take(self, chunks: Sequence[Chunk]) -> None:
        """Take a batch: what is printed is kept. Called again with the same one, it only has it kept."""
        try:
            batch = self._taken(chunks)
            self.store.keep(batch)
        except StoreWaits as error:
            self._wait(error)
            raise
        self._in_hand = None
        self._go_on()
        notices = [said for one in self.sources for said in one.notices()]
        self.say(*notices, *self.account.add(batch))
        for _, alarm in batch.alarms:
            self._clear_tick()
            typer.echo(alarm_text(alarm) if self.json else self.line(alarm))
        self.removal.step(self.store)
        self._tick()

    def _taken(self, chunks: Sequence[Chunk]) -> Batch:
        """The batch that chunks make; the monitors have moved once it is made, so it is made once."""
        if self._in_hand is None or self._in_hand[0] is not chunks:
            earlier = self.store.earlier(
                (item for chunk in chunks for item in chunk.items if isinstance(item, Result)),
                [message.key for chunk in chunks for message in chunk.messages],
            )
            self._in_hand = (chunks, self.live.take(chunks, earlier))
        return self._in_hand[1]

    def _wait(self, error: StoreWaits) -> None:
        """Tell that the store cannot take a batch; whoever reads a file to its end should not wait for that."""
        if self.once:
            raise FeedError(str(error)) from error
        if self._waits_since is None or time.monotonic() - self._waits_since >= _REMIND:
            self._waits_since = time.monotonic()
            self.say(f"{error} Until then nothing is taken, and no message is answered.")

    def _go_on(self) -> None:
        if self._waits_since is not None:
            self._waits_since = None
            self.say("The store takes results again; nothing was lost.")

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
        for source in self.sources:
            self.say(*source.notices())
            if (file := source.file) and file.unread:
                self.say(
                    f"{file.unread} bytes at the end of {file.source} are no whole line yet; they wait for the next run."
                )
        self.say(str(self.account))
        for source in self.sources:
            if source.file:
                source.file.close()

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
