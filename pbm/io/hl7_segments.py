"""An HL7 v2 message as segments of fields: delimiters from MSH-1 and MSH-2, any line ends, escapes decoded only after splitting.

Source: HL7 version 2.8.2, chapter 2 (message delimiters; escape sequences in text fields).
"""

import re
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

Fields = list[str]
_BEFORE = "\ufeff\r\n"  # what may stand before a header: a byte order mark, blank lines
# An answer repeats parts of a header, and a stray end of a frame in one would cut it.
_CONTROLS = dict.fromkeys([*range(32), 127])
_LINE_FEEDS = {"\r", "\n", "\t"}
_HEX = re.compile(r"X((?:[0-9A-Fa-f]{2})+)")


class Delimiters(NamedTuple):
    """The signs that part a message; "" where MSH-2 gives none.

    Attributes
    ----------
    parts
        Between fields.
    component, repetition, escape, subcomponent, truncation
        As MSH-2 gives them.
    """

    parts: str = "|"
    component: str = "^"
    repetition: str = "~"
    escape: str = "\\"
    subcomponent: str = "&"
    truncation: str = ""

    @classmethod
    @lru_cache(64)
    def of(cls, parts: str, encoding: str) -> "Delimiters | None":
        """Those of a message by its MSH-1 and MSH-2; None where they cannot be told apart from text or from each other."""
        signs = parts + encoding
        usable = all(sign.isprintable() and not sign.isalnum() and sign not in ' "' for sign in signs)
        if not parts or not 1 <= len(encoding) <= 5 or not usable or len(set(signs)) < len(signs):
            return None
        return cls(parts, *encoding, *[""] * (5 - len(encoding)))

    def unescape(self, text: str) -> str:
        """Text with its escape sequences decoded; one that is not known, or not paired, stays as it was sent."""
        return _unescaping(self)(text) if self.escape and self.escape in text else text

    def components(self, text: str) -> list[str]:
        """The components of the first repetition of a field, not yet unescaped."""
        if self.repetition and self.repetition in text:
            text = text.split(self.repetition, 1)[0]
        return text.split(self.component)

    def first(self, text: str) -> str:
        """The first component of the first repetition of a field, unescaped; "" for the null value `""`."""
        _, component, repetition, escape, subcomponent, _ = self
        if repetition and repetition in text:
            text = text.split(repetition, 1)[0]
        if component in text:
            text = text.split(component, 1)[0]
        if subcomponent and subcomponent in text:
            text = text.split(subcomponent, 1)[0]
        if escape and escape in text:
            text = self.unescape(text)
        return "" if text == '""' else text


@lru_cache(64)
def _unescaping(signs: Delimiters) -> Callable[[str], str]:
    mark = re.escape(signs.escape)
    pattern = re.compile(f"{mark}([^{mark}]*){mark}")
    stands = {
        "F": signs.parts,
        "S": signs.component,
        "T": signs.subcomponent,
        "R": signs.repetition,
        "E": signs.escape,
        "P": signs.truncation,
    }
    # Highlighting begins and ends without a sign.
    meant = {name: sign for name, sign in stands.items() if sign} | {".br": "\n", "H": "", "N": ""}

    def decoded(found: re.Match[str]) -> str:
        if (known := meant.get(found[1])) is not None:
            return known
        return _hexadecimal(found[1]) or found[0]

    return lambda text: pattern.sub(decoded, text)


def _hexadecimal(text: str) -> str:
    """What an escape such as X0D0A stands for; "" where it is none, or no text."""
    given = _HEX.fullmatch(text)
    if not given:
        return ""
    try:
        decoded = bytes.fromhex(given[1]).decode()
    except UnicodeDecodeError:
        return ""
    return decoded if all(sign.isprintable() or sign in _LINE_FEEDS for sign in decoded) else ""


@dataclass(frozen=True, slots=True)
class Header:
    """The first segment, MSH.

    Attributes
    ----------
    delimiters
        Of the whole message.
    fields
        As sent; `fields[n]` is MSH-n.
    """

    delimiters: Delimiters
    fields: Fields

    @classmethod
    def of(cls, text: str) -> "Header | None":
        """The header of a message that begins with this text; None if it is no message."""
        line = text.lstrip(_BEFORE).split("\r", 1)[0].split("\n", 1)[0].translate(_CONTROLS)
        if not line.startswith("MSH") or len(line) < 4:
            return None
        parts = line[3]
        fields = ["MSH", parts, *line.split(parts)[1:]]
        signs = Delimiters.of(parts, fields[2])
        return None if signs is None else cls(signs, fields + [""] * (26 - len(fields)))

    def first(self, number: int) -> str:
        """The first component of MSH-number, unescaped."""
        return self.delimiters.first(self.fields[number])

    def component(self, number: int, place: int) -> str:
        """A component of MSH-number, counted from 1; "" where not given."""
        given = self.delimiters.components(self.fields[number])
        return self.delimiters.first(given[place - 1]) if len(given) >= place else ""


def segments(text: str, signs: Delimiters) -> list[Fields]:
    """The segments of a message after its header, as fields not yet unescaped; `fields[n]` is field n of its segment."""
    text = text.lstrip(_BEFORE)
    if "\n" in text:
        text = text.replace("\r\n", "\r").replace("\n", "\r")
    return [line.split(signs.parts) for line in text.split("\r")[1:] if line]
