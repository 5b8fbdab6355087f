"""What an HL7 message holds: which field each part of a reading comes from, what is set aside at the door, and what is never looked at."""

from typing import Any

import pytest

from pbm.records.laboratory import Lab
from pbm.records.reading import Correction, Reading, Remark, SetAside
from pbm.records.result import Result
from pbm.stages.reading import Reader
from tests.io.hl7_text import MSH, OBR, PID, PV1, SPM, message, obx, oru, readings, reasons, received
from tests.live_laboratory import laboratory

LAB = laboratory()


def lab_with(feed: dict[str, Any] | None = None, **loinc: str) -> Lab:
    """The laboratory with other settings of the feed, and with LOINC codes."""
    written = LAB.model_dump(mode="json", exclude_unset=True)
    written["feed"] = feed or {}
    for key, code in loinc.items():
        written["analytes"][key]["loinc"] = code
    return Lab.model_validate(written)


def test_a_reading_has_its_parts_from_their_fields() -> None:
    assert readings(LAB, oru()) == [
        Reading(
            place=7,
            time="20310302T071405+0000",
            analyte="NA",
            analyser="line-2",
            value="138",
            unit="mmol/L",
            specimen="31-000123",
            ward="ED",
            kind="P",
            patient="a1b2c3",
            sex="F",
            age="70",
        )
    ]


def test_the_reading_is_a_result_by_the_same_law_as_every_feed() -> None:
    [reading] = readings(LAB, oru())
    result = Reader(LAB, patient_kinds=("P",)).read(reading)
    assert isinstance(result, Result)
    assert (str(result.stream), result.value, result.specimen, result.sex, result.age) == (
        "sodium@line-2",
        138.0,
        "31-000123",
        "F",
        "60-74",
    )


# Which test


@pytest.mark.parametrize(
    "code", ["NA", "NA^Sodium^L", "2951-2^Sodium^LN^NA^Sodium^L", "NA^Sodium^L^2951-2^Sodium^LN", "sodium^^L"]
)
def test_a_local_code_is_known_in_either_triplet(code: str) -> None:
    [reading] = readings(LAB, oru(obx(test=code)))
    assert reading.analyte in ("NA", "sodium")


@pytest.mark.parametrize("code", ["2951-2^Sodium^LN", "XX^^L^2951-2^^LN"])
def test_a_loinc_code_is_known_in_either_triplet(code: str) -> None:
    [reading] = readings(lab_with(sodium="2951-2"), oru(obx(test=code)))
    assert reading.analyte == "sodium"


def test_a_loinc_code_counts_only_where_it_is_said_to_be_one() -> None:
    [reading] = readings(lab_with(sodium="2951-2"), oru(obx(test="2951-2^Sodium^L")))
    assert reading.analyte == "2951-2"


def test_a_loinc_code_of_two_analytes_is_none() -> None:
    [reading] = readings(lab_with(sodium="2951-2", tsh="2951-2"), oru(obx(test="2951-2^^LN")))
    assert reading.analyte == "2951-2"


def test_a_name_is_no_code() -> None:
    [reading] = readings(LAB, oru(obx(test="X1^NA^L")))
    assert reading.analyte == "X1"


# Which value


@pytest.mark.parametrize(
    ("kind", "value", "read"),
    [
        ("NM", "138", "138"),
        ("NM", "<5", "<5"),
        ("ST", "< 5", "< 5"),
        ("ST", "138.0", "138.0"),
        ("SN", "^138", "138"),
        ("SN", "<^5", "<5"),
        ("SN", ">=^400", ">=400"),
        ("SN", "=^138", "138"),
        ("SN", "^138^^", "138"),
        ("", "138", "138"),
        ("NM", '""', ""),
        ("NM", "", ""),
    ],
)
def test_values_of_the_three_kinds_are_read(kind: str, value: str, read: str) -> None:
    [reading] = readings(LAB, oru(obx(value, kind)))
    assert reading.value == read


@pytest.mark.parametrize(
    ("kind", "value", "reason"),
    [
        ("SN", "^1^-^2", ("not a kind of value that is a number", "range or ratio")),
        ("SN", "^1^:^128", ("not a kind of value that is a number", "range or ratio")),
        ("NM", "138~139", ("several values in one observation", "")),
        ("CE", "POS^positive^L", ("not a kind of value that is a number", "CE")),
        ("TX", "JANE DOE CALLED", ("not a kind of value that is a number", "TX")),
        ("ST", "see JANE DOE", ("not a number", "")),
        ("NM", "1,234", ("not a number", "")),
        ("SN", "<>^5", ("not a number", "")),
    ],
)
def test_what_is_no_single_number_is_set_aside_without_repeating_it(
    kind: str, value: str, reason: tuple[str, str]
) -> None:
    items = received(LAB, oru(obx(value, kind), obx())).items
    assert reasons(items) == [reason]
    assert [one.stream for one in items if isinstance(one, SetAside)] == ["sodium@line-2"]
    assert sum(isinstance(one, Reading) for one in items) == 1, "the other observation is taken"


@pytest.mark.parametrize(
    ("value", "flags", "read"),
    [("5", "<", "<5"), ("400", ">", ">400"), ("<5", "<", "<5"), ("138", "H~A", "138"), ("138", "HH^^HL70078", "138")],
)
def test_a_flag_off_the_scale_makes_a_value_a_limit(value: str, flags: str, read: str) -> None:
    [reading] = readings(LAB, oru(obx(value, flags=flags)))
    assert reading.value == read


@pytest.mark.parametrize(("value", "flags"), [("<5", ">"), ("5", "<~>")])
def test_a_flag_against_its_value_is_set_aside(value: str, flags: str) -> None:
    assert reasons(received(LAB, oru(obx(value, flags=flags))).items) == [
        ("value and flag (OBX-8) contradict each other", "")
    ]


def test_a_result_whose_control_failed_is_left_out() -> None:
    assert reasons(received(LAB, oru(obx(flags="N~QCF"))).items) == [("its control failed (OBX-8 QCF)", "")]


@pytest.mark.parametrize(
    ("unit", "read"),
    [
        ("mmol/L", "mmol/L"),
        ("mmol/L^millimole per litre^UCUM", "mmol/L"),
        ("10*9/L", "10*9/L"),
        ("10\\S\\9/L", "10^9/L"),
        ("10^9/L", "10^9/L"),
        ("", ""),
    ],
)
def test_the_unit_is_its_code(unit: str, read: str) -> None:
    [reading] = readings(LAB, oru(obx(unit=unit)))
    assert reading.unit == read


# When


@pytest.mark.parametrize(
    ("written", "read"),
    [
        ("20310302071405", "20310302T071405+0000"),
        ("20310302071405-0100", "20310302T071405-0100"),
        ("20310302071405.1234", "20310302T071405.1234+0000"),
        ("203103020714", "20310302T0714+0000"),
    ],
)
def test_a_time_without_a_zone_has_that_of_the_message(written: str, read: str) -> None:
    [reading] = readings(LAB, oru(obx(time=written)))
    assert reading.time == read
    assert isinstance(Reader(LAB).read(reading._replace(kind="P")), Result)


def test_without_any_zone_a_time_is_of_the_laboratorys_clocks() -> None:
    [reading] = readings(LAB, oru(obx(time="20310302071405"), msh=MSH.replace("+0000", "")))
    assert reading.time == "20310302T071405"


@pytest.mark.parametrize("missing", ["", "20310302", '""'])
def test_without_a_time_of_analysis_that_of_the_order_is_taken_and_told(missing: str) -> None:
    items = received(LAB, oru(obx(time=missing))).items
    assert [one.time for one in items if isinstance(one, Reading)] == ["20310302T071000+0000"]
    assert [one.text for one in items if isinstance(one, Remark)] == [
        "no time of analysis in OBX-19; that of OBR-22 is taken"
    ]


def test_without_that_of_the_order_the_time_of_the_message_is_taken() -> None:
    items = received(LAB, message(PID, "OBR|1", obx(time=""), SPM)).items
    assert [one.time for one in items if isinstance(one, Reading)] == ["20310302T071500+0000"]
    assert [one.text for one in items if isinstance(one, Remark)] == [
        "no time of analysis in OBX-19; that of MSH-7 is taken"
    ]


def test_what_is_no_time_is_not_replaced_by_another() -> None:
    [reading] = readings(LAB, oru(obx(time="yesterday at noon")))
    assert reading.time == "yesterday at noon"


# Which analyser


@pytest.mark.parametrize(("level", "analyser"), [(1, "ISE-2"), (2, "line-2"), (3, "")])
def test_the_analyser_is_named_at_the_level_that_is_asked_for(level: int, analyser: str) -> None:
    [reading] = readings(lab_with({"analyser_level": level}), oru(obx(analyser="ISE-2^TBDL~line-2^TBDL")))
    assert reading.analyser == analyser


def test_a_participation_behind_the_observation_names_the_analyser() -> None:
    prt = "PRT|||||||||" + "|line-1^TBDL"
    read = readings(LAB, oru(obx(analyser=""), prt, obx()))
    assert [one.analyser for one in read] == ["line-1", "line-2"]


def test_a_device_at_the_end_names_the_analyser_of_all_that_have_none() -> None:
    read = readings(LAB, oru(obx(analyser=""), obx(), spm=SPM + "\rDEV||line-9"))
    assert [one.analyser for one in read] == ["line-9", "line-2"]


def test_a_laboratory_without_analysers_in_its_extract_has_none_here() -> None:
    written = LAB.model_dump(mode="json", exclude_unset=True)
    del written["extract"]["analyser"]
    [reading] = readings(Lab.model_validate(written), oru())
    assert reading.analyser == ""


# Whose specimen


@pytest.mark.parametrize(
    ("spm", "specimen"),
    [
        (SPM, "31-000123"),
        ("SPM|1|31-000123&LIS^F-9&TBDL||SER", "31-000123"),
        ("SPM|1|^F-9&TBDL||SER", "F-9"),
        ("SPM|1|||SER", "F-78"),
    ],
)
def test_a_specimen_has_one_of_its_numbers(spm: str, specimen: str) -> None:
    [reading] = readings(LAB, oru(spm=spm))
    assert reading.specimen == specimen


def test_without_a_segment_for_the_specimen_it_is_the_fillers_order() -> None:
    [reading] = readings(LAB, message(PID, OBR, obx()))
    assert (reading.specimen, reading.kind) == ("F-78", "P")


def test_in_oru_a_specimen_stands_behind_its_observations() -> None:
    read = readings(
        LAB, message(PID, OBR, obx(), SPM, OBR.replace("F-78", "F-79"), obx(), SPM.replace("000123", "000124"))
    )
    assert [one.specimen for one in read] == ["31-000123", "31-000124"]


def test_in_oru_a_specimen_in_front_is_read_too() -> None:
    read = readings(LAB, message(PID, OBR, SPM, obx(), obx()))
    assert [one.specimen for one in read] == ["31-000123", "31-000123"]


def test_one_specimen_of_a_patient_is_that_of_all_its_orders() -> None:
    read = readings(LAB, message(PID, OBR, obx(), OBR, obx(), SPM, PID, OBR, obx()))
    assert [one.specimen for one in read] == ["31-000123", "31-000123", "F-78"]


OUL = MSH.replace("ORU^R01^ORU_R01", "OUL^R22^OUL_R22")


def test_in_oul_a_specimen_stands_before_its_orders() -> None:
    read = readings(
        LAB, message(PID, SPM, OBR, obx(), OBR, obx(), SPM.replace("000123", "000124"), OBR, obx(), msh=OUL)
    )
    assert [one.specimen for one in read] == ["31-000123", "31-000123", "31-000124"]


def test_a_container_gives_the_number_that_a_specimen_has_not() -> None:
    read = readings(LAB, message("SPM|1|||SER|||||||P", "SAC|||C-55", OBR, obx(), msh=OUL))
    assert [one.specimen for one in read] == ["C-55"]


@pytest.mark.parametrize(
    "content",
    [
        message(PID, SPM, obx("12", test=("NA")), OBR, obx(), msh=OUL),
        message(PID, OBR, obx(), SPM, obx("12", test="NA")),
    ],
    ids=["before the orders of OUL", "behind the specimen of ORU"],
)
def test_an_observation_of_the_specimen_itself_is_no_result(content: bytes) -> None:
    items = received(LAB, content).items
    assert reasons(items) == [("an observation of the specimen itself", "")]
    assert sum(isinstance(one, Reading) for one in items) == 1


@pytest.mark.parametrize("role", ["Q", "C", "V", "F", "O", "E", "R", "B", "G", "L", "H"])
def test_what_is_no_patients_is_left_to_the_law_that_counts_it(role: str) -> None:
    [reading] = readings(LAB, oru(obx("HEM", "TX"), spm=SPM.replace("|P", f"|{role}^x^HL70369")))
    aside = Reader(LAB, patient_kinds=("P",)).read(reading)
    assert aside == SetAside(7, "not a patient result", role, "sodium@line-2")


@pytest.mark.parametrize("role", ["|P", "|P^Patient^HL70369", "|", ""])
def test_a_patients_specimen_says_so_or_nothing(role: str) -> None:
    [reading] = readings(LAB, oru(spm=SPM.replace("|P", role)))
    assert isinstance(Reader(LAB, patient_kinds=("P",)).read(reading), Result)


# Whose result it is


@pytest.mark.parametrize(
    ("birth", "age"),
    [
        ("19601231", "70"),
        ("19610302", "70"),
        ("19610303", "69"),
        ("1961", "70"),
        ("20310301", "0"),
        ("20310401", ""),
        ("", ""),
        ('""', ""),
        ("unknown", ""),
        ("19²01231", ""),
        ("196103020715+0000", "70"),
    ],
)
def test_age_is_in_whole_years_at_the_time_of_the_result(birth: str, age: str) -> None:
    [reading] = readings(LAB, oru(pid=PID.replace("19601231", birth)))
    assert reading.age == age


def test_nothing_else_of_a_patient_is_read() -> None:
    [reading] = readings(LAB, oru(obx(), "NTE|1||JANE DOE", pid=PID + "\rNK1|1|DOE^JOHN"))
    assert not {"DOE", "JANE", "19601231", "STREET"} & set(" ".join(map(str, reading)).replace("^", " ").split())


# Which word it is


@pytest.mark.parametrize("status", ["F", "P", "R", "S", "A", "B", "V", "U", ""])
def test_a_result_may_be_final_or_not(status: str) -> None:
    assert len(readings(LAB, oru(obx(status=status)))) == 1


@pytest.mark.parametrize("status", ["P", "R", "S"])
def test_only_final_results_are_taken_where_a_laboratory_says_so(status: str) -> None:
    items = received(lab_with({"preliminary": False}), oru(obx(status=status), obx())).items
    assert reasons(items) == [("not final yet", status)]


def test_a_preliminary_result_without_any_number_of_its_specimen_is_not_taken() -> None:
    items = received(LAB, message(PID, "OBR|1", obx(status="P"))).items
    assert reasons(items) == [
        ("not final yet, and without a specimen by which its final could be known", "P"),
    ]


@pytest.mark.parametrize("status", ["X", "I", "N", "O"])
def test_an_observation_without_a_result_is_set_aside(status: str) -> None:
    assert reasons(received(LAB, oru(obx("", status=status))).items) == [("no result yet, or none to come", status)]


def test_an_unknown_status_is_set_aside() -> None:
    assert reasons(received(LAB, oru(obx(status="Z"))).items) == [("not a status of a result", "Z")]


@pytest.mark.parametrize(("status", "value", "kept"), [("C", "141", "141"), ("D", '""', ""), ("W", "see JANE DOE", "")])
def test_a_later_word_is_no_reading(status: str, value: str, kept: str) -> None:
    [item] = received(LAB, oru(obx(value, "ST", status=status)), at=99).items
    assert isinstance(item, Correction)
    assert (item.status, item.at, item.reading.value, item.reading.specimen) == (status, 99, kept, "31-000123")


def test_a_later_word_is_known_by_stream_specimen_and_time() -> None:
    [item] = received(LAB, oru(obx("141", status="C")), at=99).items
    assert isinstance(item, Correction)
    word = Reader(LAB, patient_kinds=("P",)).annotation(item, "mllp://x")
    result = Reader(LAB, patient_kinds=("P",)).read(item.reading)
    assert not isinstance(word, SetAside) and isinstance(result, Result)
    assert (word.stream, word.specimen, word.time) == (result.stream, result.specimen, result.time)
    assert (word.status, word.value, word.at, word.source, word.place) == ("C", "141", 99, "mllp://x", 7)


def test_a_later_word_on_an_unknown_test_is_set_aside() -> None:
    [item] = received(LAB, oru(obx(test="LI", status="C"))).items
    assert isinstance(item, Reading), "what nobody asks for is not looked at"
    aside = Reader(LAB, patient_kinds=("P",)).read(item)
    assert isinstance(aside, SetAside) and (aside.reason, aside.found) == ("unknown test", "LI")


def test_the_versions_before_2_5_have_no_segment_for_a_specimen() -> None:
    old = MSH.replace("ORU^R01^ORU_R01", "ORU^R01").replace("2.5.1", "2.3")
    [reading] = readings(LAB, message(PID, PV1, OBR, obx(), msh=old))
    assert (reading.specimen, reading.value) == ("F-78", "138")


def test_a_message_without_a_patient_is_read() -> None:
    [reading] = readings(LAB, message(OBR, obx(), SPM))
    assert (reading.patient, reading.sex, reading.age, reading.ward) == ("", "", "", "")


def test_a_number_of_a_specimen_that_is_no_number_is_set_aside() -> None:
    items = received(LAB, oru(spm=SPM.replace("31-000123", "9" * 200))).items
    assert reasons(items) == [("not a specimen number", "")]
