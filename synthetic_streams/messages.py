"""The live feed as HL7 v2.5.1 messages ORU^R01 (MSH PID PV1 OBR OBX SPM), one for each specimen on each analyser; invented people only.

PID-7 is an invented date of birth, PID-8 the sex. OBX-18 names the analyser and OBX-19 the time of analysis; OBX-14 is the time of
collection. '<5' is sent as SN `<^5`.
"""

from collections.abc import Iterator, Sequence
from datetime import date, datetime

from synthetic_streams.analytes import CHEMISTRY, HAEMATOLOGY, IMMUNOASSAY, Analyte
from synthetic_streams.clock import SECOND, ZONE
from synthetic_streams.draws import Draws
from synthetic_streams.laboratory import StreamSample
from synthetic_streams.patients import born
from synthetic_streams.wards import WARDS

MOST_OBX = 10
COLLECTED_BEFORE = 45 * 60 * SECOND
SENT_AFTER = 2 * SECOND

_SERUM, _BLOOD = "SER^Serum^HL70487", "BLD^Whole blood^HL70487"
_ORDERS = {
    **dict.fromkeys(CHEMISTRY, ("CHEM^Chemistry panel^L", _SERUM)),
    **dict.fromkeys(HAEMATOLOGY, ("FBC^Full blood count^L", _BLOOD)),
    **dict.fromkeys(IMMUNOASSAY, ("TFT^Thyroid function^L", _SERUM)),
}

_Found = tuple[int, Analyte, str, str]


def messages(draws: Draws, samples: Sequence[StreamSample]) -> list[bytes]:
    """Messages in order of sending; at most ten OBX in each.

    Parameters
    ----------
    draws
        The specimens.
    samples
        Results of all streams to be sent, one list element a stream.
    """
    groups: dict[tuple[int, str], list[_Found]] = {}
    for sample in samples:
        columns = zip(sample.draw.tolist(), sample.time.tolist(), sample.text.tolist(), strict=True)
        for draw, time, text in columns:
            groups.setdefault((draw, sample.line), []).append((time, sample.analyte, sample.line, text))
    parts = [(draw, part) for (draw, _), found in groups.items() for part in _parts(found)]
    parts.sort(key=lambda part: (part[1][-1][0], part[0], part[1][0][2]))
    last_day = datetime.fromtimestamp(int(draws.time[-1]) / SECOND, ZONE).date()
    return [_message(draws, draw, found, number, last_day) for number, (draw, found) in enumerate(parts, start=1)]


def _parts(found: list[_Found]) -> Iterator[list[_Found]]:
    found.sort(key=lambda result: result[0])
    for first in range(0, len(found), MOST_OBX):
        yield found[first : first + MOST_OBX]


def _message(draws: Draws, draw: int, found: list[_Found], number: int, last_day: date) -> bytes:
    line = found[0][2]
    collected = _stamp(int(draws.time[draw]) - COLLECTED_BEFORE)
    who, ward = int(draws.patient[draw]), WARDS[int(draws.ward[draw])]
    people, specimen = draws.patients, draws.specimen[draw]
    sent = _stamp(found[-1][0] + SENT_AFTER)
    battery, material = _ORDERS[line]
    birth, sex = born(int(people.age[who]), who, last_day), "M" if people.male[who] else "F"
    segments = [
        f"MSH|^~\\&|TBDL-LIS|TBDL|PBM|TBDL|{sent}||ORU^R01^ORU_R01|{number:08d}|P|2.5.1||||||UNICODE UTF-8",
        f"PID|1||{people.token[who]}^^^TBDL^PI||^^^^^^S||{birth:%Y%m%d}|{sex}",
        f"PV1|1|{ward.patient_class}|{ward.code}",
        f"OBR|1||{specimen}-{line}^TBDL|{battery}|||{collected}|||||||||||||||{sent}|||F",
        *(_obx(place, result, collected) for place, result in enumerate(found, start=1)),
        f"SPM|1|{specimen}||{material}|||||||P^Patient^HL70369||||||{collected}",
    ]
    return ("\r".join(segments) + "\r").encode()


def _obx(place: int, result: _Found, collected: str) -> str:
    time, analyte, line, text = result
    kind, value = ("SN", f"{text[0]}^{text[1:]}") if text[0] in "<>" else ("NM", text)
    code = f"{analyte.loinc}^{analyte.title}^LN^{analyte.code}^{analyte.title}^L"
    return f"OBX|{place}|{kind}|{code}||{value}|{analyte.unit}|||||F|||{collected}||||{line}^TBDL|{_stamp(time)}"


def _stamp(time: int) -> str:
    """HL7 time with zone: YYYYMMDDHHMMSS+ZZZZ."""
    return datetime.fromtimestamp(time / SECOND, ZONE).strftime("%Y%m%d%H%M%S%z")
