"""NDJSON: one result or laboratory event a line in, one alarm a line out.

{"time":"2031-03-02T07:14:05Z","analyte":"sodium","analyser":"line-2","value":"138","unit":"mmol/L","specimen":"24-118233","ward":"ED"}

and where they are known `"sex":"F","age":"67"`, `kind` and `patient`. A line with the key `event` is a laboratory event:

{"time":"2031-03-02T10:00:00Z","event":"reagent lot","analyte":"sodium","analyser":"line-2","detail":"lot 4711"}
"""

import json
import math
from dataclasses import asdict
from datetime import UTC, datetime
from typing import Any

from pbm.records.alarm import Alarm
from pbm.records.reading import EventReading, Reading, SetAside

LONGEST_LINE = 2**16
_FIELDS = ("time", "analyte", "analyser", "value", "unit", "specimen", "ward", "kind", "patient", "sex", "age")
_EVENT_FIELDS = ("time", "event", "analyte", "analyser", "detail")
_TIMES = ("time", "onset", "onset_low", "onset_high", "last_control")
_WITHOUT_BOUND = (math.inf, -math.inf)


def read_line(place: int, line: bytes) -> Reading | EventReading | SetAside:
    """A line of a feed.

    Parameters
    ----------
    place
        Its number.
    line
        Its bytes, with or without the line end.

    Returns
    -------
    Reading, EventReading or SetAside
        Other keys than those of a result or event are ignored; `value` may be a number.
    """
    if not line.strip():
        return SetAside(place, "blank line")
    if len(line) > LONGEST_LINE:
        return SetAside(place, "line too long")
    try:
        # Numbers stay as they are written: 138.0 is not 138, and what is too long for a number is told as such later on.
        given = json.loads(line.decode("utf-8-sig"), parse_float=str, parse_int=str, parse_constant=str)
    except UnicodeDecodeError:
        return SetAside(place, "not UTF-8")
    except (ValueError, RecursionError):
        return SetAside(place, "not JSON")
    if not isinstance(given, dict):
        return SetAside(place, "not a JSON object")
    kind, fields = (EventReading, _EVENT_FIELDS) if "event" in given else (Reading, _FIELDS)
    texts = ["" if (text := given.get(name)) is None else text for name in fields]
    wrong = next((name for name, text in zip(fields, texts, strict=True) if not isinstance(text, str)), None)
    if wrong:
        return SetAside(place, "neither text nor a number", wrong)
    return kind(place, *texts) if _is_unicode(texts) else SetAside(place, "not Unicode text")


def _is_unicode(texts: list[str]) -> bool:
    """Whether the texts can be stored: JSON can escape halves of characters."""
    try:
        "".join(texts).encode()
    except UnicodeEncodeError:
        return False
    return True


def alarm_text(alarm: Alarm, number: int | None = None) -> str:
    """An alarm as one JSON object without line end: its number in the store as `id`, times in UTC, a number without bound as null."""
    given: dict[str, Any] = ({} if number is None else {"id": number}) | asdict(alarm)
    given |= {"analyte": alarm.stream.analyte, "analyser": alarm.stream.analyser, "stream": str(alarm.stream)}
    given |= given.pop("estimate") or {}
    for name in _TIMES:
        if given.get(name) is not None:
            given[name] = datetime.fromtimestamp(given[name] / 1e6, UTC).isoformat().replace("+00:00", "Z")
    return json.dumps(
        {name: None if value in _WITHOUT_BOUND else value for name, value in given.items()}, ensure_ascii=False
    )
