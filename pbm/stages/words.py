"""Monitors and control schedules as people read them."""

from pbm.methods.statistics import STATISTICS
from pbm.records.laboratory import Controls
from pbm.records.plan import Admit, MonitorPlan

SCALES = {"none": "", "log": ", on the logarithm", "boxcox": ", Box-Cox transformed"}


def monitor_in_words(monitor: MonitorPlan, unit: str) -> str:
    """A monitor in one sentence part, such as "EWMA, weight 0.05, of results from 125 to 155 mmol/L"."""
    title, parameter = STATISTICS[monitor.statistic].title, ", ".join(_parameters_in_words(monitor))
    mix = ", adjusted for patient mix" if monitor.baseline is not None else ""
    return f"{title}, {parameter}, {admitted_in_words(monitor.admit, unit)}{SCALES[monitor.transform]}{mix}"


def _parameters_in_words(monitor: MonitorPlan) -> list[str]:
    outside = monitor.outside
    return [
        parameter_in_words(monitor.statistic, getattr(monitor, STATISTICS[monitor.statistic].parameter)),
        *([f"exponent {monitor.exponent:g}"] if monitor.exponent is not None else []),
        *([_sides_in_words(outside.low, outside.high)] if outside is not None else []),
    ]


def parameter_in_words(statistic: str, value: float) -> str:
    """What is chosen of a statistic, such as "of 50 results" or "weight 0.05"."""
    window = "batches of {:g} results" if statistic == "batch" else "of {:g} results"
    forms = {"window": window, "weight": "weight {:g}", "reference": "reference {:g} SD"}
    return forms[STATISTICS[statistic].parameter].format(value)


def _sides_in_words(low: float | None, high: float | None) -> str:
    sides = ([f"below {low:g}"] if low is not None else []) + ([f"above {high:g}"] if high is not None else [])
    return " or ".join(sides)


def monitor_in_brief(monitor: MonitorPlan) -> str:
    """A monitor in as few words as a table bears, such as "EWMA 0.05, 125 to 155, log, mix"."""
    law = STATISTICS[monitor.statistic]
    low = "" if monitor.admit.low is None else f"{monitor.admit.low:g}"
    high = "" if monitor.admit.high is None else f"{monitor.admit.high:g}"
    parts = [f"{law.title} {getattr(monitor, law.parameter):g}"]
    parts += [f"{low} to {high}".strip()] * bool(low or high)
    parts += [{"none": "", "log": "log", "boxcox": "Box-Cox"}[monitor.transform]] * (monitor.transform != "none")
    return ", ".join(parts + ["mix"] * (monitor.baseline is not None))


def measured_in(monitor: MonitorPlan, unit: str) -> str:
    """What a monitor's centre and limits are told in, once a level is transformed back."""
    law = STATISTICS[monitor.statistic]
    if law.begins == "level" or (law.begins == "spread" and monitor.transform == "none"):
        return unit
    return {"share": "share of the values", "cusum": "SD of one value"}.get(law.name, "SD on the transformed scale")


def admitted_in_words(admit: Admit, unit: str) -> str:
    """Which results a monitor takes."""
    if admit.low is None and admit.high is None:
        return "all results"
    beyond = "set to the limit" if admit.mode == "winsorize" else "left out"
    return f"results {_sides_in_words(admit.low, admit.high)} {unit} {beyond}"


def controls_in_words(controls: Controls) -> str:
    """A control schedule, such as "at 06:00, 14:00, 22:00; rules 1-3s, 2-2s; 2 levels"."""
    if not controls.levels or not controls.rules:
        return "no control schedule given"
    return f"{events_in_words(controls)}; rules {', '.join(controls.rules)}; {len(controls.levels)} levels"


def events_in_words(controls: Controls) -> str:
    """When control events come, such as "at 06:00, 14:00, 22:00" or "every 100 results"."""
    if controls.every is not None:
        return f"every {controls.every} results"
    return f"at {', '.join(controls.times or ())}" + (
        f" on {', '.join(controls.weekdays)}" if controls.weekdays else ""
    )
