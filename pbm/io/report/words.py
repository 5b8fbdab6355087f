"""How the report writes numbers, shares, intervals, limits and days: three significant digits, the same everywhere."""

import math
import re

from pbm.records.figures import AloneAndWith, Figure, Percentile, Until

_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_NARROW = "\u202f"  # narrow no-break space: groups digits and stands before the per cent sign
_PER_CENT = f"{_NARROW}%"
_NOT_PRINTABLE = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f\ud800-\udfff]")
NONE = "–"
_LONGEST = 24


def number(value: float) -> str:
    """Three significant digits: "9.84", "136", "12 300", "1.25 × 10⁷"."""
    mantissa, exponent = f"{value:.2e}".split("e")
    power = int(exponent)
    if float(mantissa) == 0:
        return "0"
    if not -4 < power < 6:
        return _signed(f"{mantissa}{_NARROW}×{_NARROW}10{str(power).translate(_RAISED)}")
    return fixed(float(f"{value:.2e}"), max(0, 2 - power))


def fixed(value: float, decimals: int) -> str:
    """A given number of decimals, digits in groups of three."""
    return _signed(f"{value:,.{decimals}f}".replace(",", _NARROW))


def whole(count: int) -> str:
    """A count, exact."""
    return fixed(count, 0)


def expected(value: float) -> str:
    """An expected count, in which nothing below a hundredth matters: two decimals below ten, else three significant digits."""
    if value == 0 or abs(value) >= 9.995:
        return number(value)
    return "<0.01" if 0 < value < 0.005 else fixed(value, 2)


def percent(share: float) -> str:
    """A share as a percentage with one decimal; 0 % and 100 % only where it is exactly so."""
    if share in (0, 1):
        text = f"{share * 100:.0f}"
    elif 0 < share < 0.0005:
        text = "<0.1"
    elif 0.9995 <= share < 1:
        text = ">99.9"
    else:
        text = _signed(f"{share * 100:.1f}")
    return text + _PER_CENT


def interval(figure: Figure) -> str:
    """The interval of an expected count."""
    return f"{expected(figure.low)} to {expected(figure.high)}"


def share_interval(figure: Figure) -> str:
    """The interval of a share: "72.7 to 78.8 %"."""
    return f"{percent(figure.low).removesuffix(_PER_CENT)} to {percent(figure.high)}"


def fewer(found: AloneAndWith) -> str:
    """How many per cent fewer with the monitor, or more."""
    if found.alone.value == 0:
        return NONE
    share = found.share_fewer.value
    return f"{percent(abs(share))} {'more' if share < 0 else 'fewer'}"


def share_fewer(found: AloneAndWith) -> str:
    """The same under a heading that says "fewer"."""
    return fewer(found).removesuffix(" fewer")


def fewer_interval(found: AloneAndWith) -> str:
    """The interval of that, in the same direction."""
    if found.alone.value == 0:
        return NONE
    share = found.share_fewer
    low, high = (-share.high, -share.low) if share.value < 0 else (share.low, share.high)
    return share_interval(Figure(value=abs(share.value), low=low, high=high))


def level(value: float, low: float, high: float) -> str:
    """A centre or limit with as many decimals as show three digits of the distance between the limits."""
    width = high - low if math.isfinite(high - low) else abs(value) or 1.0
    if not math.isfinite(value):
        return NONE
    power = int(f"{width:.2e}".split("e")[1])
    return fixed(value, max(0, 2 - power)) if -7 < power < 6 else number(value)


def signed(value: float) -> str:
    """A signed size: "+0.5", "−1"."""
    return _signed(f"{value:+.3g}")


def until(found: Percentile, horizon_days: float) -> str:
    """Affected results until detection; "over 7 days" where more are never found within the horizon."""
    if found.value is None:
        return f"over {days(horizon_days)}"
    return whole(int(found.value)) if found.value.is_integer() else number(found.value)


def mean_in_words(until: Until, never: float) -> str:
    """The mean, said to be a lower bound where some errors are never found."""
    return f"{'at least ' if never > 0 else ''}{number(until.mean.value)}"


def days(count: float) -> str:
    """A number of days."""
    text = f"{count:.3g}"
    return f"{text} day{'' if text == '1' else 's'}"


def sentence(text: str) -> str:
    """Text that starts with a capital letter and ends with a full stop; nothing stays nothing."""
    told = text.strip()
    return told and f"{told[0].upper()}{told[1:]}{'' if told.endswith(('.', '!', '?')) else '.'}"


def printable(text: str) -> str:
    """Text without control characters, which neither HTML nor SVG may hold."""
    return _NOT_PRINTABLE.sub("\ufffd", text)


def in_a_plot(text: str) -> str:
    """Text as there is room for beside an axis."""
    shown = printable(text)
    return shown if len(shown) <= _LONGEST else f"{shown[: _LONGEST - 1]}…"


def _signed(text: str) -> str:
    return text.replace("-", "−")
