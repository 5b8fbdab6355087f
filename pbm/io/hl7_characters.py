"""Bytes of an HL7 message -> text: the character set that MSH-18 declares, else UTF-8, else the one that lab.toml names; never guessed.

Nothing is replaced: bytes that are not of the set are read by the next one, and that is told. Names are those of HL7 table 0211. Sets in
which a byte of a segment's end or of a delimiter can stand for something else at the begin of a message do not travel over MLLP.
"""

import codecs

# ASCII is a part of UTF-8, by which it is read.
_DECLARED = {
    "": "utf-8",
    "ASCII": "utf-8",
    "UNICODE": "utf-8",
    "UNICODE UTF-8": "utf-8",
    **{f"8859/{part}": f"iso8859-{part}" for part in (1, 2, 3, 4, 5, 6, 7, 8, 9, 15)},
    "GB 18030-2000": "gb18030",
    "KS X 1001": "euc_kr",
    "BIG-5": "big5",
}


def decode(content: bytes, declared: str, fall_back: str) -> tuple[str, str]:
    """Read the bytes of a message.

    Parameters
    ----------
    content
        The message.
    declared
        MSH-18, its first repetition; "" where not given.
    fall_back
        Encoding of senders that declare none, or another one than they use.

    Returns
    -------
    tuple
        The text; and how it was read where that is neither as declared nor UTF-8 unannounced, else "".

    Raises
    ------
    UnicodeDecodeError
        If the bytes are of none of the three.
    """
    said = _DECLARED.get(declared.strip().upper())
    for encoding in dict.fromkeys((said or "utf-8", "utf-8")):
        try:
            text = content.decode(encoding)
        except UnicodeDecodeError:
            continue
        return text.removeprefix("\ufeff"), "" if encoding == said else _told(declared, encoding)
    return content.decode(fall_back), _told(declared, fall_back)


def _told(declared: str, encoding: str) -> str:
    name = codecs.lookup(encoding).name
    return f"MSH-18 says {declared[:40]}, read as {name}" if declared else f"not UTF-8, read as {name}"
