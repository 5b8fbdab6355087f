"""The HL7 messages read by an independent parser carry exactly the live results."""

import csv
from collections import Counter

import hl7
import numpy as np
import pytest

from synthetic_streams import Laboratory
from synthetic_streams.analytes import BY_KEY, STREAMS
from synthetic_streams.clock import local_text
from synthetic_streams.messages import MOST_OBX, messages
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


def test_no_message_holds_a_name_or_a_date_of_birth(texts: list[str]) -> None:
    for text in texts[:50]:
        pid = hl7.parse(text).segment("PID")
        assert (str(pid[5]), str(pid[7])) == ("^^^^^^S", "")


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
