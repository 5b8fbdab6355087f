"""What `pbm watch` tells a person on stderr: what is watched at the start, what was new on the way, the counts at the end."""

from collections import Counter
from collections.abc import Iterable, Iterator
from datetime import datetime
from zoneinfo import ZoneInfo

from pbm.commands.tables import table
from pbm.records.laboratory import Lab
from pbm.records.notice import Notice
from pbm.records.plan import Plan, StreamPlan
from pbm.records.snapshot import CORRECTION, DUPLICATE, KNOWN_EVENT, SENT_AGAIN, Batch
from pbm.records.stream import StreamName
from pbm.stages.live import Live
from pbm.stages.monitor import StreamMonitor
from pbm.stages.states import state_of
from pbm.stages.words import monitor_in_words

_ORDINARY = (DUPLICATE, SENT_AGAIN, KNOWN_EVENT)  # counted, not told one by one
CAUTION = (
    "The monitors supplement control materials and never replace them; limits and actions are the laboratory director's decision. "
    "No alarm does not prove that there is no error."
)


def what_is_watched(lab: Lab, plan: Plan, live: Live, source: str) -> str:
    """Every stream of the plan with its monitors and their state, or why it has none; and whose silence is told."""
    rows = [row for name, stream in plan.streams.items() for row in _rows(name, stream, live)]
    planned = {StreamName.parse(name).analyte for name in plan.streams}
    rows += [
        [key, "no monitor", "not in plan.toml; `pbm tune` chooses one"] for key in lab.analytes if key not in planned
    ]
    head = f"{lab.laboratory.name}: {len(live.streams)} of {len(plan.streams)} streams of plan.toml are watched, from {source}."
    return "\n\n".join([head, table(["stream", "state", "monitor"], rows), silence_in_words(lab, plan), CAUTION])


def silence_in_words(lab: Lab, plan: Plan) -> str:
    """Whose silence is told, and how often it will be although all is well."""
    streams = sum(one.rhythm is not None for one in plan.streams.values())
    if not streams and not plan.analysers:
        return "Silence is not told: plan.toml does not say when results are to be expected. `pbm tune` learns it from the history."
    return (
        f"Silence is told of {_counted(len(plan.analysers), 'analyser')} and {_counted(streams, 'stream')}; of each about "
        f"{lab.quiet.budget} although all is well."
    )


def _counted(number: int, name: str) -> str:
    return f"{number} {name}{'s' * (number != 1)}"


def _rows(name: str, stream: StreamPlan, live: Live) -> Iterator[list[str]]:
    if not stream.monitors:
        yield [name, "no monitor", f"{stream.verdict}: {stream.reason}"]
        return
    for monitor in live.streams[StreamName.parse(name)].monitors:
        quiet = live.liveness.is_quiet(monitor.stream)
        yield [name, state_in_words(monitor, quiet=quiet), monitor_in_words(monitor.plan, stream.unit)]


def state_in_words(monitor: StreamMonitor, *, quiet: bool) -> str:
    """Armed, warming up, quiet, or in an open alarm."""
    state = state_of(monitor.admitted, monitor.needed, monitor.episode, quiet=quiet)
    if state == "warming":
        return f"warming up: {monitor.admitted} of {monitor.needed} results"
    return f"ALARM OPEN, {'HIGH' if monitor.episode > 0 else 'LOW'}" if state == "open alarm" else state


def notice_line(notice: Notice, zone: ZoneInfo) -> str:
    """A notice as one line: when it began or ended, and what it says."""
    ended = notice.closed_at is not None and notice.closed_at != notice.time
    at = datetime.fromtimestamp((notice.closed_at if ended and notice.closed_at else notice.time) / 1e6, zone)
    return f"{at:%Y-%m-%d %H:%M:%S}  {'NOTICE ENDED' if ended else 'NOTICE'}  {plain(notice.text)}"


class Account:
    """What one run of the watch met."""

    def __init__(self, live: Live) -> None:
        self.live = live
        self._taken = self._unwatched = self._alarms = 0
        self._left: Counter[str] = Counter()
        self._remarked: set[str] = set()

    def add(self, batch: Batch) -> list[str]:
        """Count a batch that was kept; a line for each reason that was not met before."""
        counted = [one.result.stream for one in batch.results if not one.left_out]
        self._taken += len(counted)
        self._unwatched += sum(stream not in self.live.streams for stream in counted)
        self._alarms += len(batch.alarms)
        new = [reason for reason in batch.tallies if reason not in self._left and reason not in _ORDINARY]
        self._left.update(batch.tallies)
        return [*(_first_of(reason, batch) for reason in new), *self._remarks(batch)]

    def _remarks(self, batch: Batch) -> Iterator[str]:
        """Each text of a remark when it is first met."""
        for source, remark in batch.remarks:
            if remark.text not in self._remarked:
                self._remarked.add(remark.text)
                found = f" ({plain(remark.found)})" if remark.found else ""
                yield f"{source}, {_piece(source)} {remark.place}: {remark.text}{found}. More of the kind are not told."

    @property
    def brief(self) -> str:
        """The counts so far, for a terminal."""
        return f"{self._taken:,} results, {sum(self._left.values()):,} left out, {self._alarms} alarms"

    def __str__(self) -> str:
        unwatched = f" ({self._unwatched:,} of streams without a monitor)" if self._unwatched else ""
        left = ", ".join(f"{count:,} {reason}" for reason, count in self._left.most_common()) or "nothing"
        return f"Taken: {self._taken:,} results{unwatched}. Left out: {left}. Alarms: {self._alarms}."


def _first_of(reason: str, batch: Batch) -> str:
    for source, item in batch.set_aside:
        if item.reason == reason:
            found = f" ({plain(item.found)})" if item.found else ""
            return f"{source}, {_piece(source)} {item.place}: {reason}{found}. Set aside; more of the kind are counted."
    for word in batch.annotations:
        if reason == CORRECTION:
            return (
                f"{word.stream}, specimen {plain(word.specimen) or 'not given'}: a later word on a result (OBX-11 {word.status}). The "
                "result stays as it was taken; the word is kept beside it. More of the kind are counted."
            )
    result = next(one.result for one in batch.results if one.left_out == reason)
    specimen = plain(result.specimen) or "not given"
    return f"{result.stream}, specimen {specimen}: {reason}. No monitor takes it; more of the kind are counted."


def _piece(source: str) -> str:
    """What a place counts in a feed."""
    return "message" if source.startswith("mllp") else "line"


def plain(text: str) -> str:
    """Text of a feed as it may go to a terminal: without signs that steer it."""
    return "".join(sign if sign.isprintable() else "?" for sign in text)


def opening(live: Live, going_on: Iterable[StreamMonitor], *, changed: bool) -> str:
    """What the audit says when a watch begins: which monitors go on and which begin afresh."""
    kept = set(going_on)
    fresh = [f"{one.stream} monitor {one.index}" for one in live.monitors if one not in kept]
    under = " under the new plan" if changed else ""
    return f"{len(kept)} monitors go on{under}" + (f"; begun afresh: {', '.join(fresh)}" if fresh else "")
