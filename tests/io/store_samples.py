"""What tests of the store keep in one, and a look at all of its rows."""

from dataclasses import replace
from typing import Any

from sqlalchemy import select, text

from pbm.io.store import Store
from pbm.io.store_engine import reading_engine
from pbm.io.store_place import Place
from pbm.io.store_schema import metadata
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.reading import SetAside
from pbm.records.snapshot import Batch, Edition, KeptResult, Snapshot
from tests.live_laboratory import SODIUM, results

FEED = Edition("live.csv", 1)
ESTIMATE = OnsetEstimate(5, 1, 9, 41, 2.1, 0.525, 3.2)
ALARM = Alarm(SODIUM, 0, 7, "31-1", "HIGH", "ewma", 141.6, 141.3, 141.6, 141.3, ESTIMATE, 3, "sha")
SNAPSHOT = Snapshot(SODIUM, 0, "settings", b"state", 10, 9, 0, 141.6, 1)


def batch(**changed: Any) -> Batch:
    """Three results, an alarm, a piece set aside."""
    given: dict[str, Any] = {
        "results": [KeptResult(one, "", FEED) for one in results([140, 141, 142])],
        "alarms": [(2, ALARM)],
        "snapshots": [SNAPSHOT],
        "newest": {SODIUM: [1, 2, 3]},
        "set_aside": [("live.csv", SetAside(4, "not a number", "HEM", "sodium@line-1"))],
        "tallies": {"not a number": 1},
        "positions": {"live.csv": "17"},
    }
    return Batch(**(given | changed))


def results_kept(first: int, count: int = 2) -> list[KeptResult]:
    """Results that count, of specimens numbered from `first`."""
    return [KeptResult(one, "", FEED) for one in results([140, 141] * (count // 2), first=first)]


def begun(place: Place) -> Store:
    """A store with one monitor."""
    store = Store(place)
    store.begin(1, "watch begun", "sha", "", [replace(SNAPSHOT, state=b"", taken=0, episode=0)])
    return store


def tables(place: Place) -> dict[str, list[tuple[Any, ...]]]:
    """All rows of all tables."""
    with reading_engine(place).connect() as connection:
        return {
            table.name: sorted(map(tuple, connection.execute(select(table))), key=_by_columns)
            for table in metadata.sorted_tables
        }


def _by_columns(row: tuple[Any, ...]) -> list[Any]:
    return [(value is None, value) for value in row]


def spoil(place: Place, *statements: str) -> None:
    """Change a store behind the back of pbm."""
    import sqlite3
    from pathlib import Path

    if isinstance(place, Path):
        with sqlite3.connect(place) as connection:
            connection.executescript(";".join(statements))
        return
    from sqlalchemy import create_engine

    with create_engine(place).begin() as connection:
        for one in ("SET search_path TO watch", *statements):
            connection.execute(text(one))
