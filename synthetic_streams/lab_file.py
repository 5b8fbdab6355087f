"""The laboratory's own description, `lab.toml`: extract columns, alarm budget, controls, and each analyte with TEa and analytic SD."""

from synthetic_streams.analytes import ANALYTES, Analyte
from synthetic_streams.clock import TIMEZONE
from synthetic_streams.controls import RULES, TIMES, control_sd
from synthetic_streams.laboratory import NAME

SHIFTS = '{ kind = "shift", sizes = [0.25, 0.5, 0.75, 1, 1.5, 2], unit = "TEa", signs = "both" }'
NOISE = '{ kind = "noise", sizes = [2, 3, 4] }'
WATCHED_FOR_NOISE = ("sodium",)  # patients spread little there, so that a growing imprecision shows


def lab_toml() -> str:
    """Text of `lab.toml`."""
    return "\n".join([_head(), *(_analyte(analyte) for analyte in ANALYTES)])


def _quoted(texts: tuple[str, ...]) -> str:
    return "[" + ", ".join(f'"{text}"' for text in texts) + "]"


def _head() -> str:
    return f"""\
# An invented laboratory: nobody's results are in here.

[laboratory]
name = "{NAME}"
timezone = "{TIMEZONE}"

[extract]                       # which column holds what; other columns are ignored
time = "reported_at"
analyte = "test"
analyser = "line"
value = "result"
unit = "unit"
specimen = "specimen"
ward = "location"
sex = "sex"
age = "age"
lot = "lot"                     # of the reagent
patient = "patient"
kind = "kind"
patient_kinds = ["P"]           # "Q" control and "F" proficiency rows are left out and counted

[alarms]
budget = "1 per 30 days"        # false alarms per stream
response_lag = "10 results"     # still reported between an alarm and the stop

[controls]                      # for every analyte
times = {_quoted(TIMES)}
rules = {_quoted(RULES)}
"""


def _analyte(analyte: Analyte) -> str:
    levels = ", ".join(f"{{ mean = {mean:g}, sd = {control_sd(analyte, mean):g} }}" for mean in analyte.levels)
    return f"""\
[analytes.{analyte.key}]
unit = "{analyte.unit}"
step = {analyte.step:g}
allowable_error = {{ {_parts(absolute=analyte.tea_absolute, percent=analyte.tea_percent)} }}
analytic_sd = {{ {_parts(absolute=analyte.sd_absolute, cv_percent=analyte.cv_percent)} }}
loinc = "{analyte.loinc}"
names = {_quoted((analyte.code, *analyte.spellings))}
reportable = {{ low = {analyte.low:g}, high = {analyte.high:g} }}
controls.levels = [{levels}]
faults = [{", ".join((SHIFTS, *(NOISE,) * (analyte.key in WATCHED_FOR_NOISE)))}]
"""


def _parts(**given: float) -> str:
    return ", ".join(f"{name} = {value:g}" for name, value in given.items() if value)
