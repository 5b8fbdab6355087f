"""A small laboratory for tests of the live watch: its description, plans for every statistic, results, and its files."""

import itertools
from collections.abc import Iterable, Sequence
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from pbm.io.plan_file import write_plan
from pbm.methods.alarm import Limits
from pbm.methods.chain import Preparation, Tracker
from pbm.methods.jit import Floats
from pbm.records.laboratory import Lab
from pbm.records.plan import (
    Admit,
    ControlLimits,
    HistoryMark,
    Made,
    MonitorPlan,
    Outside,
    Plan,
    StreamPlan,
)
from pbm.records.result import Result
from pbm.records.stream import StreamName
from pbm.stages.to_plan import baseline_in_plan

SODIUM = StreamName("sodium", "line-1")
SODIUM_2 = StreamName("sodium", "line-2")
TSH = StreamName("tsh", "line-1")
START = 1_930_000_000_000_000  # 2031-02-27 23:06:40 UTC
MINUTE = 60_000_000

LAB_TOML = """
[laboratory]
name = "Tern Bay District Laboratory"
timezone = "Atlantic/Azores"

[extract]
time = "reported_at"
analyte = "test"
analyser = "line"
value = "result"
unit = "unit"
specimen = "specimen"
ward = "location"
kind = "kind"
patient = "patient"

[controls]
times = ["06:00", "14:00", "22:00"]
rules = ["1-3s"]

[analytes.sodium]
unit = "mmol/L"
step = 1
names = ["NA"]
allowable_error = { absolute = 4.0 }
analytic_sd = { absolute = 0.9 }
plausible = { low = 80, high = 200 }
controls.levels = [ { mean = 118, sd = 1.0 }, { mean = 150, sd = 1.2 } ]

[analytes.tsh]
unit = "mIU/L"
unit_names = ["uIU/mL"]
step = 0.01
allowable_error = { percent = 20 }
analytic_sd = { cv_percent = 5 }
leave_out_wards = ["RESEARCH"]
repeat_hours = 12
"""

MADE = Made(
    by="a test",
    at=datetime(2031, 3, 1, tzinfo=UTC),
    history=HistoryMark(
        first=datetime(2031, 1, 1, tzinfo=UTC), last=datetime(2031, 2, 1, tzinfo=UTC), rows=1, sha256="0"
    ),
    seed=1,
    lab_sha256="0",
)


def laboratory() -> Lab:
    """The laboratory of `LAB_TOML`."""
    import tomllib

    return Lab.model_validate(tomllib.loads(LAB_TOML))


def ewma(centre: float = 140.0, half_width: float = 1.0, **more: object) -> MonitorPlan:
    """A monitor by EWMA."""
    given: dict[str, object] = {
        "statistic": "ewma",
        "weight": 0.1,
        "centre": centre,
        "limits": ControlLimits(low=centre - half_width, high=centre + half_width),
        "budget_per_day": 0.033,
        "spread": 3.0,
    }
    return MonitorPlan.model_validate(given | more)


def plan(**streams: Sequence[MonitorPlan]) -> Plan:
    """A plan; a stream's name with _ for @ and - (sodium_line_1)."""
    known = {"sodium_line_1": (SODIUM, "mmol/L"), "sodium_line_2": (SODIUM_2, "mmol/L"), "tsh_line_1": (TSH, "mIU/L")}
    return Plan(
        made=MADE,
        streams={
            str(known[key][0]): StreamPlan(
                unit=known[key][1], verdict="useful", reason="for a test", results_per_day=100, monitors=tuple(monitors)
            )
            for key, monitors in streams.items()
        },
    )


def monitor_plan(tracker: Tracker, preparation: Preparation, limits: Limits, spread: float) -> MonitorPlan:
    """The plan of a monitor, from the numbers that methods work with."""
    named = tracker.named
    keys: dict[str, object] = {
        name: named[name] for name in ("weight", "reference", "exponent", "level") if name in named
    }
    if "window" in named:
        keys["window"] = int(named["window"])
    if "low" in named:
        keys["outside"] = Outside(low=named["low"], high=named["high"])
    if tracker.statistic in ("sd", "share"):
        keys["level"] = 0.0
    baseline = preparation.baseline
    return MonitorPlan(
        admit=Admit(
            low=preparation.low if np.isfinite(preparation.low) else None,
            high=preparation.high if np.isfinite(preparation.high) else None,
            mode="winsorize" if preparation.winsorize else "truncate",
        ),
        transform=preparation.transform,
        transform_lambda=preparation.transform_lambda if preparation.transform == "boxcox" else None,
        baseline=None if baseline is None else baseline_in_plan(baseline),
        statistic=tracker.statistic,
        centre=limits.centre,
        limits=ControlLimits(low=limits.low, high=limits.high),
        rearm=limits.rearm,
        budget_per_day=0.033,
        spread=spread,
        **keys,
    )


def results(values: Iterable[float], stream: StreamName = SODIUM, start: int = START, first: int = 1) -> list[Result]:
    """A result a minute, each of its own specimen."""
    return [
        Result(start + n * MINUTE, stream, float(value), 0, f"31-{stream.analyser}-{first + n:06d}", "ED")
        for n, value in enumerate(values)
    ]


def shifted_values(seed: int, count: int, shifts: dict[int, float]) -> Floats:
    """Normal values about 140, rounded to 1; from each index of `shifts` on shifted by so much."""
    values = np.random.default_rng(seed).normal(140, 3, count)
    for start, shift in shifts.items():
        values[start:] += shift
    return np.round(values)


CSV_HEADER = "reported_at,test,line,result,unit,specimen,location,kind,patient"


def csv_lines(some: Iterable[Result]) -> list[str]:
    """The results as the laboratory's export writes them."""
    units = {"sodium": "mmol/L", "tsh": "uIU/mL"}
    return [
        f"{_iso(one.time)},{one.stream.analyte},{one.stream.analyser},{'<' * (one.censor < 0)}{one.value:g},"
        f"{units[one.stream.analyte]},{one.specimen},{one.ward},P,{one.patient}"
        for one in some
    ]


def _iso(time: int) -> str:
    return datetime.fromtimestamp(time / 1e6, UTC).isoformat()


def write_folder(folder: Path, chosen: Plan) -> Path:
    """The laboratory's folder with lab.toml and plan.toml."""
    folder.mkdir(exist_ok=True)
    (folder / "lab.toml").write_text(LAB_TOML)
    write_plan(folder / "plan.toml", chosen)
    return folder


def two_lines(seed: int, count: int) -> list[Result]:
    """Sodium of two lines and TSH in turn; sodium on line-1 shifts up by 4 in the middle and back, on line-2 down."""
    third = count // 3
    first = results(shifted_values(seed, third, {third // 2: 4.0, third * 3 // 4: -4.0}), SODIUM)
    second = results(shifted_values(seed + 1, third, {third // 2: -3.0}), SODIUM_2, START + 10_000_000)
    tsh = np.round(np.random.default_rng(seed + 2).lognormal(0.5, 0.6, third), 2)
    return list(itertools.chain.from_iterable(zip(first, second, results(tsh, TSH, START + 20_000_000), strict=True)))


def every_line() -> Plan:
    """A plan for the streams of `two_lines`: one by EWMA, one by moving mean and median, one on the logarithm."""
    mean = ewma(statistic="mean", weight=None, window=20, limits={"low": 138.4, "high": 141.6})
    median = ewma(statistic="median", weight=None, window=15, limits={"low": 138.0, "high": 142.0})
    log = ewma(0.5, 0.12, transform="log", admit={"low": 0.2, "high": 8.0, "mode": "winsorize"}, spread=0.6)
    return plan(sodium_line_1=[ewma()], sodium_line_2=[mean, median], tsh_line_1=[log])
