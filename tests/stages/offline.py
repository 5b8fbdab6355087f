"""A small laboratory and invented histories of a stream, for the rooms that work on history."""

from typing import Any

import numpy as np

from pbm.records.laboratory import Lab
from pbm.records.stream import StreamHistory, StreamName

DAY, HOUR, MINUTE = 86_400_000_000, 3_600_000_000, 60_000_000
START = 1_900_000_000_000_000 // DAY * DAY
SODIUM = StreamName("sodium", "line-1")
ANALYTE: dict[str, Any] = {
    "unit": "mmol/L",
    "step": 1,
    "allowable_error": {"absolute": 4.0},
    "analytic_sd": {"absolute": 0.9},
    "controls": {"levels": [{"mean": 118, "sd": 1.0}, {"mean": 150, "sd": 1.2}]},
    "faults": [{"kind": "shift", "sizes": [0.5, 1.0], "unit": "TEa", "signs": "both"}],
}
SCHEDULE: dict[str, Any] = {"times": ["06:00", "14:00", "22:00"], "rules": ["1-3s", "2-2s", "R-4s"]}


def laboratory(
    controls: dict[str, Any] | None = None, lag: str = "10 results", zone: str = "UTC", **analyte: Any
) -> Lab:
    """One analyte, sodium, with what is given in place of the usual."""
    return Lab.model_validate(
        {
            "laboratory": {"name": "Tern Bay District Laboratory", "timezone": zone},
            "extract": {"time": "t", "analyte": "a", "value": "v"},
            "alarms": {"budget": "1 per 30 days", "response_lag": lag},
            "controls": SCHEDULE if controls is None else controls,
            "analytes": {"sodium": ANALYTE | analyte},
        }
    )


def times(days: int, per_day: int, seed: int = 1) -> Any:
    """Instants of so many results on each day, most of them by day."""
    random = np.random.default_rng([seed, days, per_day])
    by_day = np.sort(random.beta(3, 3, (days, per_day)), axis=1)
    return START + ((np.arange(days)[:, None] + by_day) * DAY).astype(np.int64).ravel()


def history(value: Any, time: Any, name: StreamName = SODIUM, **columns: Any) -> StreamHistory:
    """Results at the given instants; none censored and no ward unless given."""
    n = len(value)
    wards = columns.get("ward", [""] * n)
    return StreamHistory(
        name,
        np.asarray(time, dtype=np.int64),
        np.asarray(value, dtype=np.float64),
        np.asarray(columns.get("censor", np.zeros(n)), dtype=np.int8),
        np.array([f"s{i}" for i in range(n)], dtype=object),
        np.array(wards, dtype=object),
        np.array(columns.get("sex", [""] * n), dtype=object),
        np.array(columns.get("age", [""] * n), dtype=object),
    )


def sodium(days: int = 45, per_day: int = 120, seed: int = 1, name: StreamName = SODIUM) -> StreamHistory:
    """Whole numbers, normal about 139."""
    time = times(days, per_day, seed)
    return history(np.rint(np.random.default_rng(seed).normal(139, 3, len(time))), time, name)
