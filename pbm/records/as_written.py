"""Results and times as a laboratory writes them: "<5", "> 1000", "4,1", "2.0 *"; ISO 8601 with or without offset."""

import math
import re
from datetime import datetime
from typing import Literal

# Placeholders for "no date" (year 1, 1900, 9999) lie outside.
EARLIEST, LATEST = datetime(1950, 1, 1), datetime(2200, 1, 1)

_COMPARATORS = {
    "": 0,
    "<": -1,
    "<=": -1,
    "=<": -1,
    "≤": -1,
    "LESS THAN": -1,
    "LESS THAN OR EQUAL TO": -1,
    "BELOW": -1,
    ">": 1,
    ">=": 1,
    "=>": 1,
    "≥": 1,
    "GREATER THAN": 1,
    "GREATER THAN OR EQUAL TO": 1,
    "MORE THAN": 1,
    "ABOVE": 1,
}
# Typographic and full-width signs. No wider folding of characters: it would make 52 of "5²".
_SIGNS = str.maketrans("\N{MINUS SIGN}\N{FULLWIDTH LESS-THAN SIGN}\N{FULLWIDTH GREATER-THAN SIGN}", "-<>")
_NUMBER = r"[+-]?(?:[0-9]+(?:{point}[0-9]*)?|{point}[0-9]+)(?:[eE][+-]?[0-9]+)?"
_RESULT = {
    decimal: re.compile(
        rf"([<>=≤≥]{{0,2}}|[A-Z ]+)\s*({_NUMBER.format(point=re.escape(decimal))})\s*\**", re.IGNORECASE
    )
    for decimal in (".", ",")
}


def read_value(text: str, decimal: Literal[".", ","] = ".") -> tuple[float, int] | None:
    """A result as it is written.

    Parameters
    ----------
    text
        For example "138", "<5", "> 1000", "≤0.01", "GREATER THAN 500", "1.2e3", "2.0 *" (an asterisk marks a remark and does not change a
        number). Thousands separators are not read: "1,234" means different numbers in different places.
    decimal
        The decimal sign.

    Returns
    -------
    tuple
        Value and censor: -1 for "less than", +1 for "greater than", 0; the value of a censored result is the limit written. None if the
        text is not a finite number.
    """
    found = _RESULT[decimal].fullmatch(text.translate(_SIGNS).strip())
    if not found:
        return None
    censor = _COMPARATORS.get(" ".join(found[1].upper().split()))
    value = float(found[2].replace(",", "."))
    return (value, censor) if censor is not None and math.isfinite(value) else None


def read_time(text: str) -> datetime | None:
    """A time in ISO 8601; without an offset it is a time of the laboratory's clocks.

    None if it is not a time, or one outside the years in which results were measured (`EARLIEST` to `LATEST`).
    """
    try:
        found = datetime.fromisoformat(text)
    except ValueError:
        return None
    return found if EARLIEST <= found.replace(tzinfo=None) < LATEST else None
