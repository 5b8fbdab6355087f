"""The work of `pbm watch`: feed -> reader -> monitors -> store, and only then the alarm lines; in this order for every batch."""

import time
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass, fields, replace
from pathlib import Path

from pbm.commands.clock import now
from pbm.commands.folder import LabFolder
from pbm.commands.lab import read_checked_lab
from pbm.commands.watch_alarms_out import AlarmsOut
from pbm.commands.watch_heart import Heart
from pbm.commands.watch_plan import InForce, PlanFile
from pbm.commands.watch_removal import Removal
from pbm.commands.watch_screen import Screen
from pbm.commands.watch_sources import Opener, Source, check_sources
from pbm.commands.watch_text import Account, notice_line, what_is_watched
from pbm.commands.watch_trial import OPENING as ON_TRIAL
from pbm.commands.watch_trial import OnTrial, end_trial
from pbm.errors import FeedError, PbmError, StoreWaits
from pbm.io.bench_store import NOTES, BenchNotes
from pbm.io.event_file import EventFile
from pbm.io.feeds import FileFeed, PacedFeed, run
from pbm.io.ndjson import alarm_text
from pbm.io.store import Store
from pbm.io.store_place import store_place
from pbm.records.alarm import Alarm
from pbm.records.laboratory import Alarms, Lab
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.snapshot import Batch, Earlier
from pbm.stages.alarm_line import alarm_line
from pbm.stages.live import read_chunk
from pbm.stages.reading import Reader

_REMIND = 60.0  # seconds until it is told again that the store cannot take anything


@dataclass(frozen=True)
class Options:
    """How `pbm watch` is called.

    Attributes
    ----------
    sources
        As given by --from.
    json, once, shadow
        Flags.
    speed, keep, events
        None where not given.
    """

    sources: Sequence[str]
    json: bool = False
    once: bool = False
    shadow: bool = False
    speed: float | None = None
    keep: str | None = None
    events: Path | None = None


def watch_feed(folder: LabFolder, options: Options) -> None:
    """Watch feeds until they end or are stopped.

    Raises
    ------
    InputError
        If a file of the laboratory or a source cannot be used.
    FeedError
        If the store or a source cannot go on.
    """
    check_sources(options.sources, speed=options.speed)
    lab = read_checked_lab(folder.lab)
    plan_file, removal = PlanFile(folder, lab, shadow=options.shadow), Removal(options.keep, lab)
    plan_file.read()
    with Store(store_place(lab.store, folder.store)) as store:
        screen = Screen()
        sources = _opened(folder, lab, store, screen, options)
        work = _Work(folder, lab, plan_file, plan_file.begin(store), store, sources, screen, removal, options)
        work.begin()
        plan_file.listen()
        try:
            if options.events:
                work.read_to_its_end(sources[0])
            run([one.feed for one in sources], work.read, work.take)
        finally:
            work.end()


def _opened(folder: LabFolder, lab: Lab, store: Store, screen: Screen, options: Options) -> list[Source]:
    """The sources; the events, if there is a file of them, first."""
    opener = Opener(folder, lab, store, screen.say)
    opened = [opener.open(one, once=options.once, speed=options.speed) for one in options.sources]
    events = _events(options.events, lab, store, once=all(map(_ends, opened))) if options.events else None
    return [events, *opened] if events else opened


def _events(path: Path, lab: Lab, store: Store, *, once: bool) -> Source:
    file = EventFile(path, store.position(str(path.absolute())))
    return Source(file.source, FileFeed(file, once=once), Reader(lab), file)


def _ends(source: Source) -> bool:
    """Whether a source ends by itself: then its results' own times are the clock, not the computer's."""
    return isinstance(source.feed, PacedFeed) or (isinstance(source.feed, FileFeed) and source.feed.once)


@dataclass
class _Work:
    """One run: takes what the feeds bring, and tells what came of it."""

    folder: LabFolder
    lab: Lab
    plan_file: PlanFile
    plan: InForce
    store: Store
    sources: Sequence[Source]
    screen: Screen
    removal: Removal
    options: Options
    _in_hand: tuple[Sequence[Chunk], Sequence[Chunk], Batch] | None = None
    _noted: Chunk | None = None
    _waits_since: float | None = None

    def __post_init__(self) -> None:
        store, shadow = self.store, self.options.shadow
        self.account = Account(self.plan.live)
        self.trial = OnTrial(self.plan.plan, store) if shadow else None
        self.alarms_out = AlarmsOut(Alarms() if shadow else self.lab.alarms, self.folder.root, store)
        self.notes, self.heart = BenchNotes(self.folder.bench, store.position(NOTES)), Heart(store, shadow=shadow)
        self._readers = {one.name: one.reader for one in self.sources}
        self._replayed = {one.name for one in self.sources if _ends(one)}
        self._to_keep = {} if shadow else end_trial(store)

    def begin(self) -> None:
        """What is watched, and what is open."""
        told = what_is_watched(self.lab, self.plan.plan, self.plan.live, ", ".join(self.options.sources))
        self.screen.say(told, *filter(None, [self.plan.opening]))
        if self.trial:
            self.screen.say(ON_TRIAL)
            return
        for one in self.store.open_alarms():
            self.screen.say(f"Open: {self.line(one)}{'  raised on trial' * one.shadow}")
        zone = self.lab.laboratory.zone
        self.screen.say(*(f"Open: {notice_line(one, zone)}" for one in self.store.open_notices()))

    def read(self, chunk: Chunk) -> Chunk:
        """A chunk as it comes: when it arrived, and its readings made into results and events."""
        stamped = chunk if chunk.source in self._replayed else replace(chunk, arrived=now())
        return read_chunk(stamped, self._readers[chunk.source])

    def read_to_its_end(self, source: Source) -> None:
        """Take what a file holds now, before anything else: events should be known before the results that follow them."""
        while source.file and (chunk := source.file.read()):
            self.take([self.read(chunk)])

    def take(self, chunks: Sequence[Chunk]) -> None:
        """Take a batch: what is printed is kept. Called again with the same, it only has it kept; with nothing, it sees to the clock."""
        try:
            self._reread_plan()
            given, batch = self._taken(chunks)
            if any(getattr(batch, one.name) for one in fields(batch)):
                self.store.keep(batch)
        except StoreWaits as error:
            self._wait(error)
            raise
        self._in_hand = None
        self._go_on()
        self._tell(batch)
        if batch.alarms:
            self.alarms_out.send_new()
        self.removal.step(self.store)
        self.heart.met(given, batch)
        self.heart.beat()
        self.screen.tick(self.account.brief)

    def _reread_plan(self) -> None:
        """Put a new plan in force, where that was asked for and no batch of the old one waits to be kept."""
        if self._in_hand is not None:
            return
        try:
            plan = self.plan_file.reread(self.store, self.plan)
        except StoreWaits:
            raise
        except PbmError as error:
            self.screen.say(f"The plan of before stays in force: {error}")
            return
        if plan:
            self.plan, self.account.live = plan, plan.live
            self.trial = OnTrial(plan.plan, self.store) if self.trial else None
            self.screen.say(f"New plan in force: {plan.opening}")

    def _taken(self, chunks: Sequence[Chunk]) -> tuple[Sequence[Chunk], Batch]:
        """All that is taken now, and the batch that it makes; the monitors have moved once it is made, so it is made once."""
        if self._in_hand is None or self._in_hand[0] is not chunks:
            given = [*chunks, *self._notes()]
            self._in_hand, self._noted = (chunks, given, self._made(given)), None
        return self._in_hand[1:]

    def _notes(self) -> list[Chunk]:
        """What people have noted, if anything is new; the same again until it is in a batch."""
        self._noted = self._noted or self.notes.new()
        return [self._noted if self._is_replay else replace(self._noted, arrived=now())] if self._noted else []

    @property
    def _is_replay(self) -> bool:
        """Whether all sources are replayed, so that the clock of the computer means nothing to them."""
        return len(self._replayed) == len(self.sources)

    def _made(self, given: Sequence[Chunk]) -> Batch:
        """The batch that chunks make, with what else is to be kept."""
        live, at = self.plan.live, now()
        asked = [item for chunk in given for item in chunk.items if isinstance(item, Result)]
        waited = [] if self._is_replay else live.waited(given, at)
        keys = [one.key for chunk in given for one in chunk.messages]
        earlier = self.store.earlier([*asked, *waited], keys) if given or waited else Earlier()
        batch = live.take(given, earlier) if given else Batch() if self._is_replay else live.tick(at, earlier)
        more = self.alarms_out.position() | (self.trial.add(batch) if self.trial else {}) | self._to_keep
        self._to_keep = {}
        return replace(batch, positions={**batch.positions, **more})

    def _tell(self, batch: Batch) -> None:
        said = [said for one in self.sources for said in one.notices()]
        self.screen.say(*said, *self.alarms_out.failures(), *self.account.add(batch))
        self.screen.say(*(notice_line(one, self.lab.laboratory.zone) for one in batch.notices))
        if not self.trial:
            for _, alarm in batch.alarms:
                self.screen.alarm(alarm_text(alarm) if self.options.json else self.line(alarm))

    def _wait(self, error: StoreWaits) -> None:
        """Tell that the store cannot take a batch; whoever reads a file to its end should not wait for that."""
        if self.options.once:
            raise FeedError(str(error)) from error
        if self._waits_since is None or time.monotonic() - self._waits_since >= _REMIND:
            self._waits_since = time.monotonic()
            self.screen.say(f"{error} Until then nothing is taken, and no message is answered.")

    def _go_on(self) -> None:
        if self._waits_since is not None:
            self._waits_since = None
            self.screen.say("The store takes results again; nothing was lost.")

    def line(self, alarm: Alarm) -> str:
        """An alarm for people."""
        return alarm_line(alarm, self.lab.analytes[alarm.stream.analyte], self.lab.laboratory.zone)

    def end(self) -> None:
        """Wait for alarms on their way; the counts."""
        self.alarms_out.close()
        with suppress(FeedError):  # what is not known to be out goes out again
            if out := self.alarms_out.position():
                self.store.keep(Batch(positions=out))
        self.heart.end()
        for source in self.sources:
            self.screen.say(*source.notices())
            if (file := source.file) and file.unread:
                self.screen.say(
                    f"{file.unread} bytes at the end of {file.source} are no whole line yet; they wait for the next run."
                )
        if waiting := len(self.plan.live.reorder):
            self.screen.say(f"{waiting} results still wait for their order; the next run takes them.")
        self.screen.say(*self.alarms_out.failures(), str(self.account), *[str(self.trial)] * (self.trial is not None))
        for source in self.sources:
            if source.file:
                source.file.close()
