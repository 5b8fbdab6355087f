"""An alarm as one line of text: what it is, how large, since when, how many unreliable results are expected, and the last control.

    07:41:12  sodium line-2  HIGH  EWMA 141.6 > 141.3  about +2.1 mmol/L (0.5 TEa)  since ~07:05 (41 results)  expect 3 unreliable
    last control 06:00 passed

One line with two spaces between its parts. Times are those of the laboratory's clocks; the day of the alarm is written out unless it is
today, other days unless they are the alarm's. What became of a control event is told where it was recorded. Values carry one digit
more than results are reported with, or as many as it takes to tell the statistic from its limit.
"""

from datetime import date, datetime
from math import ceil, log10
from zoneinfo import ZoneInfo

from pbm.methods.statistics import STATISTICS
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.laboratory import Analyte
from pbm.stages.estimate import WINDOW

_MOST_DECIMALS = 12


def alarm_line(alarm: Alarm, analyte: Analyte, zone: ZoneInfo, today: date | None = None) -> str:
    """The line for the bench.

    Parameters
    ----------
    alarm
        The alarm.
    analyte
        Its analyte: unit and the step in which results are reported.
    zone
        Time zone of the laboratory.
    today
        The day on which the line is read; without it the line is one of a log, which may be read on any day.
    """
    raised = datetime.fromtimestamp(alarm.time / 1e6, zone)
    decimals = max(0, ceil(-log10(analyte.step))) + 1
    parts = [
        f"{raised:%H:%M:%S}" if raised.date() == today else f"{raised:%Y-%m-%d %H:%M:%S}",
        f"{alarm.stream.analyte} {alarm.stream.analyser}",
        alarm.side,
        f"{STATISTICS[alarm.statistic].title} {_crossing(alarm, decimals)}",
    ]
    if alarm.estimate is not None:
        parts += _estimated(alarm.estimate, decimals, analyte.unit, raised.date(), zone)
    if alarm.last_control is not None:
        outcome = {True: " passed", False: " failed", None: ""}[alarm.last_control_passed]
        parts.append(f"last control {_clock(alarm.last_control, raised.date(), zone)}{outcome}")
    return "  ".join(parts)


def _crossing(alarm: Alarm, decimals: int) -> str:
    sign = ">" if alarm.side == "HIGH" else "<"
    while f"{alarm.shown:.{decimals}f}" == f"{alarm.shown_limit:.{decimals}f}" and decimals < _MOST_DECIMALS:
        decimals += 1
    return f"{alarm.shown:.{decimals}f} {sign} {alarm.shown_limit:.{decimals}f}"


def _estimated(estimate: OnsetEstimate, decimals: int, unit: str, today: date, zone: ZoneInfo) -> list[str]:
    expected = f"{estimate.expected_unreliable:.0f}"
    return [
        f"about {estimate.size:+.{decimals}f} {unit} ({abs(estimate.size_in_tea):.1f} TEa)",
        f"since ~{_clock(estimate.onset, today, zone)} ({_counted(estimate.results)})",
        f"expect {expected if expected != '0' else '<1'} unreliable",
    ]


def _counted(results: int) -> str:
    if results >= WINDOW:
        return f"{results} results or more"
    return f"{results} result{'s' * (results != 1)}"


def _clock(time: int, today: date, zone: ZoneInfo) -> str:
    at = datetime.fromtimestamp(time / 1e6, zone)
    return f"{at:%H:%M}" if at.date() == today else f"{at:%Y-%m-%d %H:%M}"
