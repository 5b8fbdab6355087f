"""How the report writes numbers, shares, intervals, errors and days: three significant digits, the same everywhere."""

import math
import re

from pbm.records.figures import Figure, Until
from pbm.records.judged import FaultAppraisal

_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_NARROW = "\u202f"  # narrow no-break space: groups digits and stands before the per cent sign
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
    """An expected count, in which nothing below a thousandth matters."""
    return "<0.001" if 0 < value < 0.001 else number(value)


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
    return f"{text}{_NARROW}%"


def interval(figure: Figure) -> str:
    """The interval of an expected count."""
    return f"{expected(figure.low)} to {expected(figure.high)}"


def share_interval(figure: Figure) -> str:
    """The interval of a share."""
    return f"{percent(figure.low)} to {percent(figure.high)}"


def saved(alone: float, beside: float) -> str:
    """What share of a count the monitor saves; below 0 where there are more with it."""
    return percent(1 - beside / alone) if alone else NONE


def fewer(alone: float, beside: float) -> str:
    """How many per cent fewer with the monitor than without it."""
    if alone == 0:
        return NONE
    return f"{percent(abs(1 - beside / alone))} {'more' if beside > alone else 'fewer'}"


def level(value: float, low: float, high: float) -> str:
    """A centre or limit with as many decimals as show three digits of the distance between the limits."""
    width = high - low if math.isfinite(high - low) else abs(value) or 1.0
    if not math.isfinite(value):
        return NONE
    power = int(f"{width:.2e}".split("e")[1])
    return fixed(value, max(0, 2 - power)) if -7 < power < 6 else number(value)


def size_in_words(size: float) -> str:
    """A signed error size: "+0.5", "−1"."""
    return _signed(f"{size:+.3g}")


def unit_in_words(unit: str, analyte_unit: str) -> str:
    """What an error's size is measured in."""
    return {"SD": "analytic SD", "unit": analyte_unit, "percent": "%", "": "times the analytic SD"}.get(unit, unit)


def kind_in_words(kind: str) -> str:
    """A kind of error as people call it."""
    return "sporadic error" if kind == "sporadic" else kind


def size_of(fault: FaultAppraisal) -> str:
    """An error's size with its sign; noise has none."""
    return f"{fault.size:.3g}" if fault.unit == "" else size_in_words(fault.sign * fault.size)


def fault_in_words(fault: FaultAppraisal, analyte_unit: str) -> str:
    """An error in the trade's words: "shift +0.5 TEa"."""
    return f"{kind_in_words(fault.kind)} {size_of(fault)} {unit_in_words(fault.unit, analyte_unit)}"


def shift_in_words(fault: FaultAppraisal, analyte_unit: str) -> str:
    """An error's size in the unit of the analyte, at the median result; nothing where it has none or is given in it anyway."""
    if fault.shift is None:
        return ""
    return f"{'+' if fault.shift > 0 else ''}{number(fault.shift)} {analyte_unit}"


def results_until(count: float | None, horizon_days: float) -> str:
    """Affected results until detection; "over 7 days" where more are never found within the horizon."""
    return number(count) if count is not None else f"over {days(horizon_days)}"


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
