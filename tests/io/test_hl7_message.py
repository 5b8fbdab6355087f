"""Which messages are taken, how each is answered in both modes, and that an independent parser understands the answers."""

import hl7
import pytest

from pbm.io.hl7_message import MessageReader
from pbm.records.reading import Reading, Remark, SetAside
from tests.io.hl7_text import MSH, SODIUM, message, obx, oru, reasons, received
from tests.live_laboratory import laboratory

LAB = laboratory()


def answers(msh: str = MSH) -> list[hl7.Message]:
    return [hl7.parse(one.decode()) for one in received(LAB, oru(msh=msh)).answers]


def code_and_error(answer: hl7.Message) -> tuple[str, str]:
    """The code of an answer, and the number of its error."""
    return str(answer.segment("MSA")[1]), str(answer.segment("ERR")[3][0][0]) if len(answer) > 2 else ""


def test_an_answer_goes_back_to_the_sender_and_names_the_message() -> None:
    [answer] = answers(MSH.replace("PBM|TBDL", "WATCH|BAY"))
    msh, msa = answer.segment("MSH"), answer.segment("MSA")
    assert [str(msh[n]) for n in (3, 4, 5, 6)] == ["WATCH", "BAY", "LIS", "TBDL"]
    assert [str(msa[n]) for n in (1, 2)] == ["AA", "000001"]
    assert (str(msh[9]), str(msh[11]), str(msh[12])) == ("ACK^R01^ACK", "P", "2.5.1")
    assert len(answer) == 2


def test_every_answer_has_a_number_of_its_own() -> None:
    reader = MessageReader(LAB)
    numbers = [hl7.parse(reader.read(oru(), place, 5).answers[0].decode()).segment("MSH")[10] for place in range(50)]
    assert len(set(map(str, numbers))) == 50


@pytest.mark.parametrize("version", ["2.3", "2.3.1", "2.4", "2.5", "2.5.1", "2.6", "2.7", "2.8", "2.8.2", "2.9", ""])
def test_every_version_2_is_taken(version: str) -> None:
    assert [code_and_error(one) for one in answers(MSH.replace("2.5.1", version))] == [("AA", "")]


@pytest.mark.parametrize("kind", ["ORU^R01", "ORU^R01^ORU_R01", "ORU", "OUL^R22^OUL_R22", "OUL^R23"])
def test_results_are_taken(kind: str) -> None:
    assert [code_and_error(one) for one in answers(MSH.replace("ORU^R01^ORU_R01", kind))] == [("AA", "")]


@pytest.mark.parametrize(
    ("msh", "refused"),
    [
        (MSH.replace("ORU^R01^ORU_R01", "ADT^A01"), ("AR", "200")),
        (MSH.replace("ORU^R01^ORU_R01", ""), ("AR", "200")),
        (MSH.replace("ORU^R01^ORU_R01", "ORU^R30"), ("AR", "201")),
        (MSH.replace("ORU^R01^ORU_R01", "OUL^R21"), ("AR", "201")),
        (MSH.replace("|P|", "|T|"), ("AR", "202")),
        (MSH.replace("|P|", "|D|"), ("AR", "202")),
        (MSH.replace("|P|", "|N|"), ("AR", "202")),
        (MSH.replace("|P|", "||"), ("AR", "202")),
        (MSH.replace("2.5.1", "3.0"), ("AR", "203")),
        (MSH.replace("000001", ""), ("AE", "101")),
        (MSH.replace("000001", "9" * 200), ("AE", "102")),
    ],
)
def test_what_is_not_taken_is_refused_by_the_standard(msh: str, refused: tuple[str, str]) -> None:
    assert [code_and_error(one) for one in answers(msh)] == [refused]
    found = received(LAB, oru(msh=msh))
    assert found.message is None
    assert [one.reason[:17] for one in found.items if isinstance(one, SetAside)] == ["message refused: "]
    assert not any(isinstance(one, Reading) for one in found.items)


def test_an_old_version_is_told_why_without_a_segment_that_it_does_not_know() -> None:
    [answer] = answers(MSH.replace("|P|2.5.1", "|T|2.3"))
    assert len(answer) == 2
    assert str(answer.segment("MSA")[1]) == "AR"
    assert "MSH-11" in str(answer.segment("MSA")[3])


@pytest.mark.parametrize("content", [b"", b"nonsense", b"PID|1\r", b"FHS|^~\\&\r", b"MSH", b"\xff\xfe\x00"])
def test_what_has_no_header_is_rejected_without_a_number(content: bytes) -> None:
    found = received(LAB, content)
    [answer] = [hl7.parse(one.decode()) for one in found.answers]
    assert (code_and_error(answer), str(answer.segment("MSA")[2])) == (("AR", "100"), "")


@pytest.mark.parametrize(
    ("accept", "application", "taken", "refused"),
    [
        ("", "", ["AA"], ["AR"]),
        ("AL", "AL", ["CA", "AA"], ["CR"]),
        ("AL", "NE", ["CA"], ["CR"]),
        ("NE", "AL", ["AA"], ["AR"]),
        ("NE", "NE", [], []),
        ("ER", "ER", [], ["CR"]),
        ("SU", "SU", ["CA", "AA"], []),
        ("AL", "", ["CA"], ["CR"]),
        ("", "AL", ["AA"], ["AR"]),
        ("ER", "SU", ["AA"], ["CR"]),
        ("NE", "ER", [], ["AR"]),
    ],
)
def test_in_enhanced_mode_the_sender_gets_the_answers_that_it_asked_for(
    accept: str, application: str, taken: list[str], refused: list[str]
) -> None:
    asked = f"{MSH}|||{accept}|{application}"
    assert [code_and_error(one)[0] for one in answers(asked)] == taken
    assert [code_and_error(one)[0] for one in answers(asked.replace("|P|2.5.1", "|T|2.5.1"))] == refused


def test_an_error_in_enhanced_mode_is_a_commit_error() -> None:
    assert [code_and_error(one) for one in answers(f"{MSH}|||AL|AL".replace("000001", ""))] == [("CE", "101")]


@pytest.mark.parametrize("kind", ["ACK^R01^ACK", "ACK", "MCF"])
def test_an_acknowledgement_is_never_answered(kind: str) -> None:
    found = received(LAB, message("MSA|AA|1", msh=MSH.replace("ORU^R01^ORU_R01", kind)))
    assert (found.answers, found.message) == ([], None)
    assert [type(one) for one in found.items] == [Remark]


def test_an_answer_is_by_the_signs_of_the_message() -> None:
    msh = MSH.replace("|", "$").replace("^~\\&", "%*!@").replace("^", "%").replace("$P$", "$T$")
    [answer] = received(LAB, message(msh=msh)).answers
    parsed = hl7.parse(answer.decode())
    assert code_and_error(parsed)[0] == "AR"
    assert str(parsed.segment("MSA")[2]) == "000001"


@pytest.mark.parametrize(("encoding", "declared"), [("utf-8", "UNICODE UTF-8"), ("latin-1", "8859/1")])
def test_what_an_answer_repeats_is_repeated_byte_for_byte(encoding: str, declared: str) -> None:
    msh = MSH.replace("LIS", "LÆGE").replace("000001", "Ø1") + f"||||||{declared}"
    [answer] = received(LAB, f"{msh}\r".encode(encoding)).answers
    parsed = hl7.parse(answer.decode(encoding))
    assert (str(parsed.segment("MSH")[5]), str(parsed.segment("MSA")[2])) == ("LÆGE", "Ø1")
    assert str(parsed.segment("MSH")[18]) == declared


def test_a_stray_end_in_a_header_does_not_cut_the_answer() -> None:
    [answer] = received(LAB, oru(msh=MSH.replace("000001", "00\x1c1"))).answers
    assert b"\x1c" not in answer and b"MSA|AA|001\r" in answer


def test_characters_that_are_not_as_declared_are_told_and_the_message_taken() -> None:
    content = oru(obx(unit="mmol/L"), "NTE|1||für", msh=MSH + "||||||UNICODE UTF-8").decode().encode("latin-1")
    found = received(LAB, content)
    assert found.message is not None
    assert [one.found for one in found.items if isinstance(one, Remark)] == [
        "MSH-18 says UNICODE UTF-8, read as iso8859-1"
    ]


def test_characters_of_no_known_set_are_an_error() -> None:
    lab = LAB.model_copy(update={"feed": LAB.feed.model_copy(update={"encoding": "cp1252"})})
    found = received(lab, oru(obx(), "NTE|1||x").replace(b"|x", b"|\x81"))
    assert code_and_error(hl7.parse(found.answers[0].decode())) == ("AE", "102")


def test_a_zero_byte_is_an_error() -> None:
    assert reasons(received(LAB, oru(obx("138\0"))).items) == [("message refused: it holds a zero byte", "000001")]


def test_one_bad_observation_does_not_spoil_the_others() -> None:
    found = received(LAB, oru(obx(), obx("HEM", "TX"), obx("139~140"), obx("141")))
    assert found.message is not None and found.message.items == 4
    assert [one.value for one in found.items if isinstance(one, Reading)] == ["138", "141"]
    assert len(reasons(found.items)) == 2
    assert code_and_error(hl7.parse(found.answers[0].decode()))[0] == "AA"


def test_a_message_is_known_by_sender_number_and_content() -> None:
    one, again, other = received(LAB, oru()), received(LAB, oru(), place=8), received(LAB, oru(obx("139")))
    assert one.message and again.message and other.message
    assert one.message.key == again.message.key
    assert one.message.key[:2] == other.message.key[:2] == ("LIS^TBDL", "000001")
    assert one.message.key != other.message.key


def test_a_message_without_results_is_taken() -> None:
    assert code_and_error(hl7.parse(received(LAB, message("PID|1")).answers[0].decode()))[0] == "AA"
    assert received(LAB, oru(obx(test=SODIUM))).message is not None


@pytest.mark.parametrize("before", [b"\r\r\r\r\r\r", b"\xef\xbb\xbf", b"\r\n\r\n"])
def test_blank_lines_and_a_byte_order_mark_before_a_message_do_no_harm(before: bytes) -> None:
    found = received(LAB, before + oru())
    assert [one.value for one in found.items if isinstance(one, Reading)] == ["138"]
    assert b"MSA|AA|000001" in found.answers[0]
