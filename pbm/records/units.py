"""Spellings of one unit: litre as L and l, micro as u and either of the two signs for it, ten as 10* and 10^, the international unit.

They mean the same in the Unified Code for Units of Measure (2.1, 2017: table 1; litre, ten and the international unit), or are never
written for anything else. Nothing here converts: U and IU, mEq and mmol stay different units unless a laboratory says that they are one.
"""

import re
from itertools import product

MICRO_SIGN, GREEK_MU = "\u00b5", "\u03bc"
_MICRO = f"u{MICRO_SIGN}{GREEK_MU}"
_NO_LETTER_BEFORE, _NO_LETTER_AFTER = f"(?<![A-Za-z{MICRO_SIGN}{GREEK_MU}])", r"(?![A-Za-z])"
# What stands in a unit, and how it may be written.
_KINDS = (
    (
        re.compile(rf"{_NO_LETTER_BEFORE}()[{_MICRO}](?=(?:mol|g|[lL]|U|IU|\[[Ii]U\]|kat|m){_NO_LETTER_AFTER})"),
        tuple(_MICRO),
    ),
    (re.compile(rf"{_NO_LETTER_BEFORE}([dcmnfp{_MICRO}]?)[lL]{_NO_LETTER_AFTER}"), ("L", "l")),
    (re.compile(r"(?<![0-9])(10)[*^](?=[0-9])"), ("*", "^")),
    (re.compile(rf"{_NO_LETTER_BEFORE}([mkn{_MICRO}]?)(?:\[[Ii]U\]|IU){_NO_LETTER_AFTER}"), ("[IU]", "[iU]", "IU")),
)


def spellings(unit: str) -> tuple[str, ...]:
    """Every spelling of a unit that is known, itself first."""
    ways = [signs if pattern.search(unit) else ("",) for pattern, signs in _KINDS]
    found = [unit]
    for chosen in product(*ways):
        text = unit
        for (pattern, _), sign in zip(_KINDS, chosen, strict=True):
            text = pattern.sub(rf"\g<1>{sign}", text) if sign else text
        found.append(text)
    return tuple(dict.fromkeys(found))
