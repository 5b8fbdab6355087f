"""The rhythms of streams and analysers, learned from the history and put into the plan for the live watch."""

from collections import defaultdict
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pbm.methods.jit import Integers
    from pbm.records.laboratory import Lab
    from pbm.records.plan import Plan
    from pbm.records.stream import StreamName


def with_rhythms(plan: "Plan", history: Path, lab: "Lab", tuned: Iterable[str]) -> "Plan":
    """The plan with the rhythms of the streams just tuned, and of their analysers with all their streams."""
    from pbm.io.history import stream_sizes
    from pbm.records.stream import StreamName
    from pbm.stages.rhythm import learn_rhythm, merged

    names = {text: StreamName.parse(text) for text in tuned}
    analysers = {name.analyser for name in names.values()}
    times = _times(history, [name for name in stream_sizes(history) if name.analyser in analysers])
    zone, rate = lab.laboratory.zone, lab.quiet.budget.per_day
    streams = dict(plan.streams)
    for text, name in names.items():
        learned = learn_rhythm(times[name.analyser][name], zone, rate)
        streams[text] = streams[text].model_copy(update={"rhythm": learned})
    rhythms = {one: learn_rhythm(merged(list(times[one].values())), zone, rate) for one in analysers}
    together = {**plan.analysers, **{name: one for name, one in rhythms.items() if one}}
    return plan.model_copy(update={"streams": streams, "analysers": dict(sorted(together.items()))})


def _times(history: Path, names: "Iterable[StreamName]") -> "dict[str, dict[StreamName, Integers]]":
    """When the results of each stream came, by analyser; nothing else of the history is read, which may be large."""
    from pbm.io.history import read_times

    found: dict[str, dict[StreamName, Integers]] = defaultdict(dict)
    for name in names:
        found[name.analyser][name] = read_times(history, name)
    return found
