"""The answers to an HL7 message: one in original mode; in enhanced mode those that its sender asked for in MSH-15 and MSH-16.

    original mode    AA accepted, AE error, AR rejected
    enhanced mode    CA, CE, CR kept or not (MSH-15), then AA, AE, AR (MSH-16), each if the condition there says so

An accepted message is kept before either is sent, so CA and AA then say the same. A message that was not kept has no second answer, unless
its sender asked for the second one alone. Source: HL7 version 2.8.2, chapter 2 (acknowledgement), tables 0008, 0155, 0357.
"""

from pbm.io.hl7_check import RefusedMessageError
from pbm.io.hl7_segments import Delimiters, Header

_ASKED_WHEN_TAKEN, _ASKED_WHEN_REFUSED = ("AL", "SU"), ("AL", "ER")
_ERR_COLUMNS_SINCE = "2.5"


def codes(header: Header | None, refusal: RefusedMessageError | None) -> list[str]:
    """The codes to answer with, in order."""
    letter = refusal.kind if refusal else "A"
    accept, application = (header.first(15), header.first(16)) if header else ("", "")
    if not accept and not application:
        return ["A" + letter]
    wanted = _ASKED_WHEN_REFUSED if refusal else _ASKED_WHEN_TAKEN
    asked = [level + letter for level, when in (("C", accept), ("A", application)) if when in wanted]
    return asked[:1] if refusal else asked


def answer(header: Header | None, code: str, refusal: RefusedMessageError | None, at: str, own_id: str) -> str:
    """One answer.

    Parameters
    ----------
    header
        Of the message, its fields as sent; None where it has none that can be read.
    code
        From `codes`.
    refusal
        Why it is not taken.
    at
        Now, as HL7 writes it.
    own_id
        MSH-10 of the answer.

    Returns
    -------
    str
        The message, by the delimiters of the one that it answers; what it repeats of that one is repeated as it came.
    """
    signs = header.delimiters if header else Delimiters()
    lines = [_header(header, signs, at, own_id), ["MSA", code, header.fields[10] if header else ""]]
    if refusal:
        told = _escaped(refusal.text, signs)
        lines[1].append(told)
        if header is None or header.first(12)[:3] >= _ERR_COLUMNS_SINCE:
            number = signs.component.join((str(refusal.number), told, "HL70357"))
            lines.append(["ERR", "", "", number, "E", "", "", "", told])
    return "".join(signs.parts.join(line) + "\r" for line in lines)


def _header(header: Header | None, signs: Delimiters, at: str, own_id: str) -> list[str]:
    """MSH of an answer: sender and receiver change places."""
    encoding = signs.component + signs.repetition + signs.escape + signs.subcomponent + signs.truncation
    given = header.fields if header else [""] * 26
    event = header.fields[9].split(signs.component)[1:2] if header else []
    kind = signs.component.join(["ACK", *event, *["ACK"] * (len(event) and given[12][:3] >= "2.4")])
    version, processing = (given[12] or "2.5.1", given[11] or "P") if header else ("2.5.1", "P")
    fields = ["MSH", encoding, given[5], given[6], given[3], given[4], at, "", kind, own_id, processing, version]
    # Neither answer wants an answer; the characters are those of the message.
    enhanced = bool(given[15] or given[16])
    more = ["", "", *(["NE", "NE"] if enhanced else ["", ""]), "", given[18]]
    return fields + more if any(more) else fields


def _escaped(text: str, signs: Delimiters) -> str:
    """Text in which no sign of the message parts anything."""
    names = {
        signs.escape: "E",
        signs.parts: "F",
        signs.component: "S",
        signs.repetition: "R",
        signs.subcomponent: "T",
    }
    mark = signs.escape
    stands = {ord(sign): f"{mark}{name}{mark}" if mark else " " for sign, name in names.items() if sign}
    return text.translate(stands)
