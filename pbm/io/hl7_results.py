"""One HL7 message of results -> readings as they are written, and what is set aside at the door; units, numbers and times are judged later.

    test        OBX-3: a local code that lab.toml lists, else a LOINC code; either triplet
    value       OBX-5 of NM, ST and SN; OBX-8 "<" or ">" makes it the limit of the method
    unit        OBX-6
    time        OBX-19, else OBR-22, else MSH-7; a zone is that of MSH-7 where the time has none
    analyser    OBX-18 at the level that lab.toml says, else PRT-10, else DEV-2
    specimen    SPM-2, else SAC-3, OBR-3, OBR-2
    kind        SPM-11: P or empty is a patient's
    ward        PV1-3; patient PID-3, sex PID-8, age from PID-7 at the time of the result

No other field of PID is looked at, nor any comment. Source: HL7 version 2.8.2, chapters 3, 7 and 22, tables 0078, 0085, 0369.
"""

from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Literal

from pbm.io.hl7_check import LONGEST_NAME
from pbm.io.hl7_groups import Observation, Order, orders
from pbm.io.hl7_segments import Delimiters, Fields, Header
from pbm.records.as_written import read_value
from pbm.records.laboratory import Lab
from pbm.records.reading import Correction, Reading, Remark, SetAside

Read = Reading | SetAside | Remark | Correction
PATIENT = "P"
_CORRECTED: dict[str, Literal["C", "D", "W"]] = {"C": "C", "D": "D", "W": "W"}
_NOT_FINAL, _FINAL, _WITHOUT_RESULT = ("P", "R", "S"), ("", "A", "B", "F", "U", "V"), ("I", "N", "O", "X")
_NUMBERS = ("NM", "ST", "")
_OFF_SCALE = {"<": -1, ">": 1}
_KNOWN_TEXTS = 16_384
_TO_THE_MINUTE = 12  # digits of a time
_LONGEST_CORRECTED = 40
_LONGEST_FIELD = 500  # characters; what is remembered of texts must stay small, whatever is sent


class _AtTheDoorError(Exception):
    """Why an observation is no reading: reason and what was found."""

    def __init__(self, reason: str, found: str = "") -> None:
        super().__init__(reason)
        self.reason, self.found = reason, found


@dataclass(frozen=True, slots=True)
class _Common:
    """What all observations of an order share; times and birth date as HL7 writes them."""

    specimen: str
    kind: str
    ward: str
    patient: str
    sex: str
    birth: str
    time: str
    time_is_of: str
    zone: str
    ages: dict[str, str] = field(default_factory=dict)

    def age(self, time: str) -> str:
        """The patient's age at a time; worked out once a day."""
        day = time[:8]
        if day not in self.ages:
            self.ages[day] = _age(self.birth, day)
        return self.ages[day]


class ResultReader:
    """Reads messages as `lab.toml` says."""

    def __init__(self, lab: Lab) -> None:
        self._keys = lab.spellings()
        self._loinc = _unambiguous(lab)
        self._settings, self._pooled = lab.feed, lab.extract.analyser is None
        self._test = lru_cache(_KNOWN_TEXTS)(self._find_test)
        self._number = lru_cache(_KNOWN_TEXTS)(read_value)
        # Few different ones, each met again and again.
        self._unit, self._name = lru_cache(_KNOWN_TEXTS)(_unit), lru_cache(_KNOWN_TEXTS)(Delimiters.first)

    def read(self, header: Header, segments: Iterable[Fields], place: int, at: int) -> list[Read]:
        """What a message holds, in its order.

        Parameters
        ----------
        header, segments
            The message.
        place
            Its number in the feed.
        at
            When it came, by the clock of the computer, UTC microseconds.
        """
        found: list[Read] = []
        for order in orders(segments, specimen_first=header.component(9, 1) == "OUL"):
            common = _common(header, order)
            found += [self._read(header.delimiters, one, common, place, at) for one in order.observations]
            if any(len(one.fields[19]) < _TO_THE_MINUTE for one in order.observations):
                found.append(Remark(place, f"no time of analysis in OBX-19; that of {common.time_is_of} is taken"))
        return found

    def _read(self, signs: Delimiters, one: Observation, common: _Common, place: int, at: int) -> Read:
        fields = one.fields
        if len("".join(fields)) > _LONGEST_FIELD and max(map(len, fields)) > _LONGEST_FIELD:
            return SetAside(place, "a field too long for a result")
        test, analyser = self._test(fields[3], signs), self._analyser(signs, one)
        time = _in_iso(signs.first(fields[19]), common.zone) or _in_iso(common.time, common.zone)
        try:
            status, value = "", ""
            # Of a control, or a test that nobody asks for, the value is not looked at: it may be a text about a person.
            if test in self._keys and common.kind == PATIENT:
                status = self._status(signs, one, common)
                value = self._value(signs, fields, status)
        except _AtTheDoorError as error:
            name = f"{self._keys[test]}@{analyser}" if test in self._keys else ""
            return SetAside(place, error.reason, error.found, name)
        reading = Reading(
            place,
            time,
            test,
            analyser,
            value,
            self._unit(signs, fields[6]),
            common.specimen,
            common.ward,
            common.kind,
            common.patient,
            common.sex,
            common.age(time),
        )
        corrected = _CORRECTED.get(status)
        return Correction(corrected, at, reading) if corrected else reading

    def _find_test(self, text: str, signs: Delimiters) -> str:
        """The name under which the laboratory knows a test, else its code as sent."""
        parts = [signs.first(part) for part in signs.components(text)] + [""] * 6
        triplets = [(code, system) for code, system in ((parts[0], parts[2]), (parts[3], parts[5])) if code]
        local = [code for code, _ in triplets if code in self._keys]
        loinc = [self._loinc[code] for code, system in triplets if system == "LN" and code in self._loinc]
        return next(iter([*local, *loinc, *(code for code, _ in triplets)]), "")

    def _analyser(self, signs: Delimiters, one: Observation) -> str:
        if self._pooled:
            return ""
        level, text = self._settings.analyser_level, one.fields[18] or one.device
        levels = text.split(signs.repetition) if signs.repetition else [text]
        return self._name(signs, levels[level - 1]) if len(levels) >= level else ""

    def _status(self, signs: Delimiters, one: Observation, common: _Common) -> str:
        """OBX-11 of an observation that is a result or a later word on one."""
        status = self._name(signs, one.fields[11])
        if one.of_specimen:
            raise _AtTheDoorError("an observation of the specimen itself")
        if len(common.specimen) > LONGEST_NAME:
            raise _AtTheDoorError("not a specimen number")
        if status in _WITHOUT_RESULT:
            raise _AtTheDoorError("no result yet, or none to come", status)
        if status in _NOT_FINAL and not self._settings.preliminary:
            raise _AtTheDoorError("not final yet", status)
        if status in _NOT_FINAL and not common.specimen:
            raise _AtTheDoorError("not final yet, and without a specimen by which its final could be known", status)
        if status not in (*_FINAL, *_NOT_FINAL, *_CORRECTED):
            raise _AtTheDoorError("not a status of a result", status[:1])
        return status

    def _value(self, signs: Delimiters, fields: Fields, status: str) -> str:
        """The value as other feeds write it; what is no number is not repeated: it may be a text about a person."""
        value = _as_sent(signs, fields)
        flags = {signs.first(one) for one in fields[8].split(signs.repetition or None)} if fields[8] else set()
        if status in _CORRECTED:
            return value if len(value) <= _LONGEST_CORRECTED and self._number(value) else ""
        if "QCF" in flags:
            raise _AtTheDoorError("its control failed (OBX-8 QCF)")
        number = self._number(value)
        if number is None:
            if value:
                raise _AtTheDoorError("not a number")
            return ""
        off_scale = {side for sign, side in _OFF_SCALE.items() if sign in flags}
        if off_scale and not number[1]:
            value = f"{'<' if off_scale == {-1} else '>'}{value}"
        if len(off_scale) > 1 or (number[1] and off_scale - {number[1]}):
            raise _AtTheDoorError("value and flag (OBX-8) contradict each other")
        return value


def _unambiguous(lab: Lab) -> dict[str, str]:
    """LOINC code -> analyte, but for codes that several analytes have."""
    codes = [one.loinc for one in lab.analytes.values()]
    return {one.loinc: key for key, one in lab.analytes.items() if one.loinc and codes.count(one.loinc) == 1}


def _as_sent(signs: Delimiters, fields: Fields) -> str:
    """OBX-5 as one text.

    Raises
    ------
    _AtTheDoorError
        If it is of a kind that is no number, or more than one value.
    """
    kind, text = fields[2], fields[5]
    if kind != "SN" and kind not in _NUMBERS:
        raise _AtTheDoorError("not a kind of value that is a number", kind[:3])
    if signs.repetition and signs.repetition in text:
        raise _AtTheDoorError("several values in one observation")
    if kind == "SN":
        comparator, number, *more = [*text.split(signs.component), ""]
        if any(more):
            raise _AtTheDoorError("not a kind of value that is a number", "range or ratio")
        text = number if comparator == "=" else comparator + number
    text = signs.unescape(text)
    return "" if text == '""' else text


def _unit(signs: Delimiters, text: str) -> str:
    """OBX-6: its code; the whole of a unit such as 10^9/L whose sign was not escaped."""
    code = signs.first(text)
    return signs.unescape(text) if code.isdecimal() else code


def _common(header: Header, order: Order) -> _Common:
    signs, none = header.delimiters, [""] * 20
    specimen = order.specimen or none
    status_time, sent = signs.first(order.fields[22]), header.first(7)
    whole = len(status_time) >= _TO_THE_MINUTE
    return _Common(
        specimen=_specimen(signs, specimen, order),
        kind=signs.first(specimen[11]) or PATIENT,
        ward=_short(signs.first(order.visit[3])),
        patient=_short(signs.first(order.patient[3])),
        sex=_short(signs.first(order.patient[8])),
        birth=signs.first(order.patient[7]),
        time=status_time if whole else sent,
        time_is_of="OBR-22" if whole else "MSH-7",
        zone=sent[-5:] if sent[-5:-4] in ("+", "-") else "",
    )


def _short(text: str) -> str:
    """The text, unless it is longer than any name or number."""
    return text if len(text) <= LONGEST_NAME else ""


def _specimen(signs: Delimiters, specimen: Fields, order: Order) -> str:
    """SPM-2 holds two numbers, the placer's and the filler's."""
    pair = signs.components(specimen[2])
    given = (*pair, order.container[3], order.fields[3], order.fields[2])
    return next((number for text in given if (number := signs.first(text))), "")


def _in_iso(text: str, zone: str) -> str:
    """A time of HL7 (YYYYMMDDHHMM[SS[.S]][+/-ZZZZ]) in the basic form of ISO 8601; "" if it does not tell the minute."""
    if len(text) < _TO_THE_MINUTE or not text[:_TO_THE_MINUTE].isdecimal():
        return "" if text.isdecimal() else text
    own = "" if text[-5:-4] in ("+", "-") else zone
    return f"{text[:8]}T{text[8:]}{own}"


def _age(birth: str, at: str) -> str:
    """Whole years from a birth date to a day (YYYYMMDD); of the date nothing else is kept."""
    day = birth[:8]
    if len(day) < 4 or len(at) < 8 or not (day + at).isdecimal():
        return ""
    years = int(at[:4]) - int(day[:4]) - (at[4:] < day[4:])
    return str(years) if years >= 0 else ""
