"""The work of `pbm note`: what was typed is checked against lab.toml and plan.toml and kept in bench.sqlite, where the watch finds it."""

import getpass
import re
from datetime import datetime
from zoneinfo import ZoneInfo

from pbm.commands.clock import now
from pbm.commands.folder import LabFolder
from pbm.commands.watch_health import health_of
from pbm.errors import InputError
from pbm.io.bench_store import Note, add_note
from pbm.io.lab_file import read_lab
from pbm.io.plan_file import read_plan
from pbm.records.event import EVENT_KINDS, LabEvent
from pbm.records.laboratory import Lab
from pbm.records.reading import EventReading, SetAside
from pbm.records.stream import StreamName
from pbm.stages.event_reading import LONGEST_DETAIL, read_event

_CLOCK = re.compile(r"([01]?\d|2[0-3]):[0-5]\d(:[0-5]\d)?")
_AHEAD = 24 * 3_600_000_000


def keep_note(folder: LabFolder, kind: str, analyser: str, analyte: str, detail: str, at: str, by: str) -> str:
    """Keep a note; what was kept, in words.

    Raises
    ------
    InputError
        If something is not known, or the note cannot be kept. Nothing is noted then.
    """
    lab, clock = read_lab(folder.lab), now()
    known = _analysers(folder)
    if not analyser and len(known) == 1:
        analyser = known[0]
    if known and analyser and analyser not in known:
        raise InputError(
            f'--analyser "{analyser}" is not in plan.toml. Its analysers: {", ".join(known)}. Nothing was noted.'
        )
    event = _event(lab, EventReading(0, _time(at, clock, lab.laboratory.zone), kind, analyte, analyser, detail), clock)
    if len(detail) > LONGEST_DETAIL:
        raise InputError(
            f"--detail has {len(detail)} characters, and at most {LONGEST_DETAIL} are kept. Nothing was noted."
        )
    author = by or _user()
    add_note(folder.bench, Note(event.time, event.kind, event.analyte, event.analyser, event.detail, author, clock))
    return f"Noted: {_in_words(event, lab.laboratory.zone)}, by {author}. {_taken_up(folder, clock)}"


def _event(lab: Lab, reading: EventReading, clock: int) -> LabEvent:
    read = read_event(reading, lab, "", clock)
    if isinstance(read, LabEvent):
        if read.time > clock + _AHEAD:
            raise InputError("--at lies more than a day ahead. Nothing was noted.")
        return read
    raise InputError(f"{_MISTAKES.get(read.reason, read.reason)}{_found(read)}. Nothing was noted.")


_MISTAKES = {
    "unknown event": f"KIND is one of {', '.join(EVENT_KINDS)}",
    "not a time": "--at takes a time such as 10:30, or a date and time such as 2031-03-02T10:30",
    "unknown test": "--analyte is none of the analytes of lab.toml, nor another spelling of one",
    "no analyser given": "--analyser says what the event is about",
}


def _found(read: SetAside) -> str:
    return f'; found "{read.found}"' if read.found else ""


def _time(at: str, clock: int, zone: ZoneInfo) -> str:
    """The time in ISO 8601: now, a time of today, or as it is given."""
    local = datetime.fromtimestamp(clock / 1e6, zone)
    if not at:
        return local.isoformat()
    return f"{local:%Y-%m-%d}T{at:0>5}" if _CLOCK.fullmatch(at) else at


def _analysers(folder: LabFolder) -> list[str]:
    """Those of the plan; none where there is no plan yet."""
    if not folder.plan.is_file():
        return []
    return sorted({StreamName.parse(text).analyser for text in read_plan(folder.plan).streams})


def _user() -> str:
    try:
        return getpass.getuser()
    except (KeyError, OSError):
        return "unknown"


def _in_words(event: LabEvent, zone: ZoneInfo) -> str:
    about = f"{event.analyte}@{event.analyser}" if event.analyte else event.analyser
    at = datetime.fromtimestamp(event.time / 1e6, zone)
    detail = f" ({event.detail})" if event.detail else ""
    return f"{event.kind} of {about} at {at:%Y-%m-%d %H:%M}{detail}"


def _taken_up(folder: LabFolder, clock: int) -> str:
    if health_of(folder, clock).healthy:
        return "The watch takes it up within seconds."
    return "No watch is alive: the next one takes it up when it is started."
