"""One laboratory event of a feed, file or note, as it was written -> the event, or the one reason why it is none."""

from datetime import datetime, timedelta
from zoneinfo import ZoneInfo

from pbm.records.as_written import read_time
from pbm.records.event import EVENT_KINDS, EventKind, LabEvent
from pbm.records.laboratory import Lab
from pbm.records.reading import EventReading, SetAside
from pbm.records.stream import LONGEST_ANALYSER, POOLED

LONGEST_DETAIL = 200
_EPOCH = datetime(1970, 1, 1)
_KINDS: dict[str, EventKind] = {kind: kind for kind in EVENT_KINDS}


def event_kind(text: str) -> EventKind | None:
    """The kind of event that a text names: in any case, with blanks, "-" or "_" between its words; None if it names none."""
    return _KINDS.get(" ".join(text.replace("-", " ").replace("_", " ").lower().split()))


def read_event(reading: EventReading, lab: Lab, source: str, arrived: int | None) -> LabEvent | SetAside:
    """The event, or why it is none.

    Parameters
    ----------
    reading
        As it was written.
    lab
        The laboratory: its analytes by all their spellings, and the time zone of times without an offset.
    source
        The feed, or who entered it.
    arrived
        When it came, by the clock of the computer; None where a feed is replayed: then it came at its own time.
    """
    given = EventReading(reading.place, *(text.strip() for text in reading[1:]))
    kind, time = event_kind(given.event), _instant(given.time, lab.laboratory.zone)
    analyte = lab.spellings().get(given.analyte, "") if given.analyte else ""
    analyser = given.analyser or (POOLED if lab.extract.analyser is None else "")
    if kind is None:
        return SetAside(given.place, "unknown event", given.event[:40])
    if time is None:
        return SetAside(given.place, "not a time" if given.time else "no time", given.time[:40])
    if given.analyte and not analyte:
        return SetAside(given.place, "unknown test", given.analyte[:40])
    if not analyser or len(analyser) > LONGEST_ANALYSER:
        return SetAside(given.place, "no analyser given" if not analyser else "not the name of an analyser")
    return LabEvent(time, kind, analyte, analyser, given.detail[:LONGEST_DETAIL], source, arrived or time)


def _instant(text: str, zone: ZoneInfo) -> int | None:
    """UTC microseconds of a time as it was written; an hour that the clocks show twice is its first passage."""
    found = read_time(text) if text else None
    if found is None:
        return None
    local = found if found.tzinfo else found.replace(tzinfo=zone)
    return (found.replace(tzinfo=None) - _EPOCH - (local.utcoffset() or timedelta())) // timedelta(microseconds=1)
