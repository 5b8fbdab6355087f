"""Sex and age of a patient as a laboratory writes them: "F", "female", "W"; "67", "67 y", "3 m". What is kept is a letter and an age band.

A birth date is no age: it is not read, so that none is ever kept. The bands are those in which results differ by growth, by the years of
menstruation and by old age; they are fixed, so that a plan means the same from one version to the next.
"""

import re

SEXES = ("F", "M")
AGE_BANDS = ("under 1", "1-11", "12-17", "18-39", "40-59", "60-74", "75 and over")
_FROM_YEAR = (0, 1, 12, 18, 40, 60, 75)
OLDEST = 130  # years; beyond are placeholders such as 999

_SEXES = dict.fromkeys(("F", "FEMALE", "W", "WOMAN", "GIRL", "2"), "F") | dict.fromkeys(
    ("M", "MALE", "MAN", "BOY", "1"), "M"
)
# A date has more digits or other signs.
_AGE = re.compile(r"(\d{1,3}(?:[.,]\d+)?) ?([A-Za-z]{0,6})")
_UNITS_IN_A_YEAR = (
    dict.fromkeys(("", "y", "yr", "yrs", "year", "years", "yo", "a"), 1.0)
    | dict.fromkeys(("m", "mo", "mos", "mth", "mths", "month", "months"), 12.0)
    | dict.fromkeys(("w", "wk", "wks", "week", "weeks"), 52.2)
    | dict.fromkeys(("d", "day", "days"), 365.25)
    | dict.fromkeys(("h", "hr", "hrs", "hour", "hours"), 8766.0)
)


def read_sex(text: str) -> str:
    """Sex as it is written: "F", "M", or "" where it is neither or not known.

    Parameters
    ----------
    text
        A letter or an English word in any case, or a digit of ISO/IEC 5218 (1 male, 2 female).
    """
    return _SEXES.get(text.strip().upper(), "")


def read_age_band(text: str) -> str:
    """The band of an age as it is written; "" where it is none or not known.

    Parameters
    ----------
    text
        A number of at most three digits before the decimal sign, alone (years) or with a unit: y, m (months), w, d, h, their words, or the
        symbols of UCUM (a, mo, wk); or the name of a band, from a sender that tells no more.
    """
    text = text.strip()
    if text in AGE_BANDS:
        return text
    found = _AGE.fullmatch(text)
    in_a_year = _UNITS_IN_A_YEAR.get(found[2].lower()) if found else None
    return age_band(float(found[1].replace(",", ".")) / in_a_year) if found and in_a_year else ""


def age_band(years: float) -> str:
    """The band of an age in years; "" where nobody is so old."""
    if not 0 <= years <= OLDEST:
        return ""
    return next(band for band, begin in zip(AGE_BANDS[::-1], _FROM_YEAR[::-1], strict=True) if years >= begin)
