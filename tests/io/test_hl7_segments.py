"""A message is parted by its own signs, and its text decoded only after that."""

import pytest

from pbm.io.hl7_characters import decode
from pbm.io.hl7_segments import Delimiters, Header, segments

USUAL = Delimiters()


@pytest.mark.parametrize(
    ("sent", "meant"),
    [
        ("10\\S\\9/L", "10^9/L"),
        ("\\F\\\\T\\\\R\\\\E\\", "|&~\\"),
        ("a\\.br\\b", "a\nb"),
        ("\\H\\high\\N\\", "high"),
        ("\\XC2B5\\mol/L", "µmol/L"),
        ("\\X0D0A\\", "\r\n"),
        ("no escape", "no escape"),
        ("one \\ alone", "one \\ alone"),
        ("\\Zlocal\\", "\\Zlocal\\"),
        ("\\XFF\\", "\\XFF\\"),
        ("\\X00\\", "\\X00\\"),
        ("\\XC2B\\", "\\XC2B\\"),
        ("\\C2842\\", "\\C2842\\"),
        ("\\\\", "\\\\"),
    ],
)
def test_an_escape_is_decoded_and_an_unknown_one_stays_as_sent(sent: str, meant: str) -> None:
    assert USUAL.unescape(sent) == meant


def test_an_escaped_sign_parts_nothing() -> None:
    assert USUAL.first("a\\S\\b^c~d") == "a^b"
    assert USUAL.first("a\\R\\b&c") == "a~b"


def test_the_null_value_is_nothing() -> None:
    assert USUAL.first('""') == ""
    assert USUAL.first('""^x') == ""


def test_delimiters_are_those_of_the_message() -> None:
    header = Header.of("MSH$%*!@$LIS$TBDL$PBM$TBDL$2031$$ORU%R01$1$P$2.5")
    assert header is not None
    assert header.delimiters == Delimiters("$", "%", "*", "!", "@")
    assert (header.first(3), header.component(9, 2), header.first(10)) == ("LIS", "R01", "1")
    assert header.delimiters.first("a!S!b%c") == "a%b"


def test_a_truncation_sign_may_follow() -> None:
    header = Header.of("MSH|^~\\&#|LIS")
    assert header is not None
    assert header.delimiters.truncation == "#"
    assert header.delimiters.unescape("\\P\\") == "#"


def test_signs_that_are_not_given_part_nothing() -> None:
    header = Header.of("MSH|^~|LIS")
    assert header is not None
    assert header.delimiters.first("a&b\\S\\c") == "a&b\\S\\c"


@pytest.mark.parametrize(
    "text",
    [
        "",
        "MSH",
        "MSH|",
        "MSH||LIS",
        "MSH|^^|LIS",
        "MSH|^~\\&#+|LIS",
        "MSHA^~|",
        "MSH|a~|",
        "PID|1",
        "FHS|^~\\&",
        "MSH |~",
        "\x0b",
    ],
)
def test_what_has_no_usable_delimiters_has_no_header(text: str) -> None:
    assert Header.of(text) is None


@pytest.mark.parametrize("end", ["\r", "\r\n", "\n", "\r\r", "\n\r\n"])
@pytest.mark.parametrize("begin", ["", "\ufeff", "\r\n"])
def test_line_ends_blank_lines_and_a_byte_order_mark_do_no_harm(begin: str, end: str) -> None:
    text = begin + end.join(["MSH|^~\\&|LIS", "PID|1", "OBX|1|NM"]) + end
    header = Header.of(text)
    assert header is not None and header.first(3) == "LIS"
    assert segments(text, USUAL) == [["PID", "1"], ["OBX", "1", "NM"]]


@pytest.mark.parametrize(
    ("content", "declared", "read", "told"),
    [
        ("µ ≤".encode(), "UNICODE UTF-8", "µ ≤", ""),
        ("µ ≤".encode(), "", "µ ≤", ""),
        ("µ".encode("latin-1"), "8859/1", "µ", ""),
        ("µ".encode("latin-1"), "", "µ", "not UTF-8, read as iso8859-1"),
        ("µ".encode("latin-1"), "UNICODE UTF-8", "µ", "MSH-18 says UNICODE UTF-8, read as iso8859-1"),
        ("µ".encode("latin-1"), "ASCII", "µ", "MSH-18 says ASCII, read as iso8859-1"),
        ("µ".encode(), "SOMETHING", "µ", "MSH-18 says SOMETHING, read as utf-8"),
        ("ш".encode("iso8859-5"), "8859/5", "ш", ""),
        ("检验".encode("gb18030"), "GB 18030-2000", "检验", ""),
        (b"plain", "SOMETHING", "plain", "MSH-18 says SOMETHING, read as utf-8"),
        ("\ufeffMSH".encode(), "", "MSH", ""),
    ],
)
def test_characters_are_those_declared_else_utf8_else_those_of_the_laboratory(
    content: bytes, declared: str, read: str, told: str
) -> None:
    assert decode(content, declared, "latin-1") == (read, told)


def test_bytes_of_no_known_set_are_not_guessed() -> None:
    with pytest.raises(UnicodeDecodeError):
        decode(b"\x81\xff", "UNICODE UTF-8", "cp1252")
