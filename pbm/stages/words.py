"""Monitors and control schedules as people read them."""

from pbm.records.laboratory import Controls
from pbm.records.plan import Admit, MonitorPlan

TITLES = {"mean": "moving mean", "median": "moving median", "ewma": "EWMA"}
SCALES = {"none": "", "log": ", on the logarithm", "boxcox": ", Box-Cox transformed"}


def monitor_in_words(monitor: MonitorPlan, unit: str) -> str:
    """A monitor in one sentence part, such as "EWMA, weight 0.05, of results from 125 to 155 mmol/L"."""
    title = TITLES.get(monitor.statistic, monitor.statistic)
    parameter = f"weight {monitor.weight:g}" if monitor.weight is not None else f"of {monitor.window} results"
    mix = ", adjusted for patient mix" if monitor.baseline is not None else ""
    return f"{title}, {parameter}, {admitted_in_words(monitor.admit, unit)}{SCALES[monitor.transform]}{mix}"


def monitor_in_brief(monitor: MonitorPlan) -> str:
    """A monitor in as few words as a table bears, such as "EWMA 0.05, 125 to 155, log, mix"."""
    title = TITLES.get(monitor.statistic, monitor.statistic)
    parameter = monitor.weight if monitor.weight is not None else monitor.window
    low = "" if monitor.admit.low is None else f"{monitor.admit.low:g}"
    high = "" if monitor.admit.high is None else f"{monitor.admit.high:g}"
    parts = [f"{title} {parameter:g}" if parameter is not None else title]
    parts += [f"{low} to {high}".strip()] * bool(low or high)
    parts += [{"none": "", "log": "log", "boxcox": "Box-Cox"}[monitor.transform]] * (monitor.transform != "none")
    return ", ".join(parts + ["mix"] * (monitor.baseline is not None))


def admitted_in_words(admit: Admit, unit: str) -> str:
    """Which results a monitor takes."""
    if admit.low is None and admit.high is None:
        return "all results"
    beyond = "set to the limit" if admit.mode == "winsorize" else "left out"
    low = f"below {admit.low:g}" if admit.low is not None else ""
    high = f"above {admit.high:g}" if admit.high is not None else ""
    return f"results {' or '.join(filter(None, (low, high)))} {unit} {beyond}"


def controls_in_words(controls: Controls) -> str:
    """A control schedule, such as "at 06:00, 14:00, 22:00; rules 1-3s, 2-2s; 2 levels"."""
    if not controls.levels or not controls.rules:
        return "no control schedule given"
    when = f"every {controls.every} results" if controls.every is not None else f"at {', '.join(controls.times or ())}"
    when += f" on {', '.join(controls.weekdays)}" if controls.weekdays else ""
    return f"{when}; rules {', '.join(controls.rules)}; {len(controls.levels)} levels"
