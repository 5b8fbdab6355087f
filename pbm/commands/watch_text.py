"""What `pbm watch` tells a person on stderr: what is watched at the start, what was new on the way, the counts at the end."""

from collections import Counter
from collections.abc import Iterable, Iterator

from pbm.commands.tables import table
from pbm.records.laboratory import Lab
from pbm.records.plan import Plan, StreamPlan
from pbm.records.snapshot import CORRECTION, DUPLICATE, SENT_AGAIN, Batch
from pbm.records.stream import StreamName
from pbm.stages.live import Live
from pbm.stages.monitor import StreamMonitor
from pbm.stages.words import monitor_in_words

_ORDINARY = (DUPLICATE, SENT_AGAIN)  # counted, not told one by one
CAUTION = (
    "The monitors supplement control materials and never replace them; limits and actions are the laboratory director's decision. "
    "No alarm does not prove that there is no error."
)


def what_is_watched(lab: Lab, plan: Plan, live: Live, source: str) -> str:
    """Every stream of the plan with its monitors and their state, or why it has none."""
    rows = [row for name, stream in plan.streams.items() for row in _rows(name, stream, live)]
    planned = {StreamName.parse(name).analyte for name in plan.streams}
    rows += [
        [key, "no monitor", "not in plan.toml; `pbm tune` chooses one"] for key in lab.analytes if key not in planned
    ]
    head = f"{lab.laboratory.name}: {len(live.streams)} of {len(plan.streams)} streams of plan.toml are watched, from {source}."
    return "\n\n".join([head, table(["stream", "state", "monitor"], rows), CAUTION])


def _rows(name: str, stream: StreamPlan, live: Live) -> Iterator[list[str]]:
    if not stream.monitors:
        yield [name, "no monitor", f"{stream.verdict}: {stream.reason}"]
        return
    for monitor in live.streams[StreamName.parse(name)].monitors:
        yield [name, state_in_words(monitor), monitor_in_words(monitor.plan, stream.unit)]


def state_in_words(monitor: StreamMonitor) -> str:
    """Armed, warming up, or in an open alarm."""
    if monitor.admitted < monitor.needed:
        return f"warming up: {monitor.admitted} of {monitor.needed} results"
    return {0: "armed", 1: "ALARM OPEN, HIGH", -1: "ALARM OPEN, LOW"}[monitor.episode]


class Account:
    """What one run of the watch met."""

    def __init__(self, live: Live) -> None:
        self._live = live
        self._taken = self._unwatched = self._alarms = 0
        self._left: Counter[str] = Counter()
        self._remarked: set[str] = set()

    def add(self, batch: Batch) -> list[str]:
        """Count a batch that was kept; a line for each reason that was not met before."""
        counted = [one.result.stream for one in batch.results if not one.left_out]
        self._taken += len(counted)
        self._unwatched += sum(stream not in self._live.streams for stream in counted)
        self._alarms += len(batch.alarms)
        new = [reason for reason in batch.tallies if reason not in self._left and reason not in _ORDINARY]
        self._left.update(batch.tallies)
        return [*(_first_of(reason, batch) for reason in new), *self._remarks(batch)]

    def _remarks(self, batch: Batch) -> Iterator[str]:
        """Each text of a remark when it is first met."""
        for source, remark in batch.remarks:
            if remark.text not in self._remarked:
                self._remarked.add(remark.text)
                found = f" ({_plain(remark.found)})" if remark.found else ""
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
            found = f" ({_plain(item.found)})" if item.found else ""
            return f"{source}, {_piece(source)} {item.place}: {reason}{found}. Set aside; more of the kind are counted."
    for word in batch.annotations:
        if reason == CORRECTION:
            return (
                f"{word.stream}, specimen {_plain(word.specimen) or 'not given'}: a later word on a result (OBX-11 {word.status}). The "
                "result stays as it was taken; the word is kept beside it. More of the kind are counted."
            )
    result = next(one.result for one in batch.results if one.left_out == reason)
    specimen = _plain(result.specimen) or "not given"
    return f"{result.stream}, specimen {specimen}: {reason}. No monitor takes it; more of the kind are counted."


def _piece(source: str) -> str:
    """What a place counts in a feed."""
    return "message" if source.startswith("mllp") else "line"


def _plain(text: str) -> str:
    """Text of a feed as it may go to a terminal: without signs that steer it."""
    return "".join(sign if sign.isprintable() else "?" for sign in text)


def opening(live: Live, going_on: Iterable[StreamMonitor], *, changed: bool) -> str:
    """What the audit says when a watch begins: which monitors go on and which begin afresh."""
    kept = set(going_on)
    fresh = [f"{one.stream} monitor {one.index}" for one in live.monitors if one not in kept]
    under = " under the new plan" if changed else ""
    return f"{len(kept)} monitors go on{under}" + (f"; begun afresh: {', '.join(fresh)}" if fresh else "")
