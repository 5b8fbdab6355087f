"""The HL7 messages read by an independent parser carry exactly the live results."""

import csv
from collections import Counter
from datetime import date, timedelta

import hl7
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from synthetic_streams import Laboratory
from synthetic_streams.analytes import BY_KEY, STREAMS
from synthetic_streams.clock import local_text
from synthetic_streams.messages import MOST_OBX, messages
from synthetic_streams.patients import born
from tests.synthetic_streams.conftest import Written


@pytest.fixture(scope="module")
def texts(written: Written) -> list[str]:
    whole = (written.folder / "messages.hl7").read_bytes().decode("utf-8")
    return ["MSH|" + part for part in whole.split("MSH|")[1:]]


def test_messages_carry_every_live_result_once(written: Written, texts: list[str]) -> None:
    sent: Counter[tuple[str, ...]] = Counter()
    for text in texts:
        message = hl7.parse(text)
        specimen = str(message.segment("SPM")[2])
        for obx in message.segments("OBX"):
            value = str(obx[5]).replace("^", "")
            when = str(obx[19])
            at = f"{when[:4]}-{when[4:6]}-{when[6:8]}T{when[8:10]}:{when[10:12]}:{when[12:14]}{when[14:17]}:{when[17:]}"
            sent[(at, str(obx[3][0][3]), str(obx[18][0][0]), value, str(obx[6]), specimen)] += 1
    with (written.folder / "live.csv").open(encoding="utf-8", newline="") as file:
        live = Counter(tuple(row[:6]) for row in list(csv.reader(file))[1:])
    assert sent == live


def test_each_message_is_an_oru_of_version_2_5_1_with_its_segments_in_order(texts: list[str]) -> None:
    numbers = []
    for text in texts[:200]:
        message = hl7.parse(text)
        names = [str(segment[0]) for segment in message]
        inner = names[4:-1]
        assert names == ["MSH", "PID", "PV1", "OBR", *["OBX"] * len(inner), "SPM"]
        assert 1 <= len(inner) <= MOST_OBX
        msh = message.segment("MSH")
        assert (str(msh[9]), str(msh[11]), str(msh[12])) == ("ORU^R01^ORU_R01", "P", "2.5.1")
        assert str(message.segment("SPM")[11]) == "P^Patient^HL70369"
        assert all(str(obx[11]) == "F" for obx in message.segments("OBX"))
        numbers.append(str(msh[10]))
    assert len(set(numbers)) == len(numbers)


def test_no_message_holds_a_name(texts: list[str]) -> None:
    for text in texts[:50]:
        assert str(hl7.parse(text).segment("PID")[5]) == "^^^^^^S"


def test_sex_and_date_of_birth_agree_with_sex_and_age_in_the_live_table(written: Written, texts: list[str]) -> None:
    with (written.folder / "live.csv").open(encoding="utf-8", newline="") as file:
        known = {row["patient"]: (row["sex"], int(row["age"])) for row in csv.DictReader(file)}
    met = set()
    for text in texts:
        message = hl7.parse(text)
        pid, measured = message.segment("PID"), str(message.segment("OBX")[19])[:8]
        birth, patient = str(pid[7]), str(pid[3][0][0])
        years = int(measured[:4]) - int(birth[:4]) - (measured[4:] < birth[4:])
        assert (str(pid[8]), years) == known[patient]
        met.add(patient)
    assert met == set(known)


@given(st.integers(0, 101), st.integers(0, 10**6), st.dates(date(2031, 1, 6), date(2040, 12, 31)), st.integers(0, 14))
def test_a_patient_has_the_age_on_the_day_and_the_two_weeks_before(age: int, number: int, day: date, ago: int) -> None:
    birth, then = born(age, number, day), day - timedelta(ago)
    assert then.year - birth.year - ((then.month, then.day) < (birth.month, birth.day)) == age


def test_a_result_beyond_the_range_is_a_structured_number(laboratory: Laboratory) -> None:
    samples = [laboratory.sample(analyte, line) for analyte, line in STREAMS]
    low = [sample.rows(np.flatnonzero(sample.censor)) for sample in samples]
    sent = messages(laboratory.draws, low)
    obx = [segment for text in sent for segment in hl7.parse(text.decode()).segments("OBX")]
    assert {str(segment[2]) for segment in obx} == {"SN"}
    assert {str(segment[5])[:2] for segment in obx} <= {"<^", ">^"}
    assert "<^5" in {str(s[5]) for s in obx if str(s[3][0][0]) == BY_KEY["alt"].loinc}


def test_analysis_is_later_than_collection_and_earlier_than_sending(laboratory: Laboratory) -> None:
    sample = laboratory.sample(BY_KEY["tsh"], "immuno-1").rows(slice(0, 20))
    stamps = local_text(laboratory.hours, sample.time)
    for text, stamp in zip(messages(laboratory.draws, [sample]), stamps, strict=True):
        message = hl7.parse(text.decode())
        obx = message.segment("OBX")
        assert str(obx[14]) < str(obx[19]) < str(message.segment("MSH")[7])
        assert str(obx[19])[8:14] == stamp[11:19].replace(":", "")
