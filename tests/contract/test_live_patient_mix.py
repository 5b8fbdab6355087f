"""The promise where a monitor adjusts for sex and age: restarted from what the store keeps of people, nothing changes."""

import itertools
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from pbm.io.store import Store
from pbm.records.alarm import Alarm
from pbm.records.plan import BaselinePlan
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.sex_and_age import AGE_BANDS
from pbm.records.snapshot import Earlier
from pbm.stages.live import Live
from tests.live_laboratory import SODIUM, SODIUM_2, ewma, laboratory, plan, results, shifted_values

LAB = laboratory()
HOURS = tuple(0.1 * (hour % 5) for hour in range(168))
PEOPLE = BaselinePlan(
    wards={"ED": 0.5}, hours=HOURS, sexes={"F": -2.0, "M": 2.0}, ages={"75 and over": 1.5, "under 1": -1.5}
)
OLDER = BaselinePlan(wards={"ED": 0.5}, hours=HOURS, ages={"75 and over": 2.5})
PLAN = plan(
    sodium_line_1=[ewma(), ewma(weight=0.05, centre=139.3, baseline=PEOPLE)],
    sodium_line_2=[ewma(weight=0.08, centre=139.3, baseline=OLDER)],
)


def people(some: list[Result], seed: int) -> list[Result]:
    """The results, each of somebody."""
    random = np.random.default_rng(seed)
    sex, age = random.choice(["F", "M", ""], len(some)), random.choice([*AGE_BANDS, ""], len(some))
    return [replace(one, sex=str(s), age=str(a)) for one, s, a in zip(some, sex, age, strict=True)]


def feed() -> list[Result]:
    lines = [
        people(results(shifted_values(seed, 400, {150: 3, 250: -3}), name), seed)
        for seed, name in ((1, SODIUM), (2, SODIUM_2))
    ]
    return sorted((one for line in lines for one in line), key=lambda one: one.time)


FEED = feed()


def watched(store: Path, pieces: list[list[Result]]) -> tuple[list[Alarm], list[bytes]]:
    """The alarms and last states of a watch that is stopped and started again after each piece."""
    alarms: list[Alarm] = []
    for number, piece in enumerate(pieces):
        with Store(store) as kept:
            live = Live(LAB, PLAN, "sha")
            if number == 0:
                kept.begin(1, "begun", "sha", "", [one.snapshot() for one in live.monitors])
            live.go_on(kept.snapshots(), kept.newest_times(), kept.recent_results)
            batch = live.take([Chunk("feed", 1, piece, str(number))], Earlier())
            kept.keep(batch)
            alarms += [alarm for _, alarm in batch.alarms]
    return alarms, [one.to_bytes() for one in live.monitors]


@pytest.mark.parametrize("cuts", [(1,), (333,), (400, 401), (200, 310, 420, 530, 640, 750)], ids=str)
def test_restarted_from_the_store_every_alarm_and_state_is_the_same(cuts: tuple[int, ...], tmp_path: Path) -> None:
    whole = watched(tmp_path / "whole.sqlite", [FEED])
    edges = [0, *cuts, len(FEED)]
    pieces = [FEED[first:last] for first, last in itertools.pairwise(edges)]
    assert watched(tmp_path / "cut.sqlite", pieces) == whole
    assert len(whole[0]) >= 5
    assert {alarm.stream for alarm in whole[0]} == {SODIUM, SODIUM_2}
    assert any(alarm.estimate for alarm in whole[0])


def test_the_store_keeps_of_people_what_the_monitors_need_and_no_more(tmp_path: Path) -> None:
    watched(tmp_path / "watch.sqlite", [FEED])
    with Store(tmp_path / "watch.sqlite") as store:
        one, other = (store.recent_results(name, 400) for name in (SODIUM, SODIUM_2))
    given = {stream: [result for result in FEED if result.stream == stream] for stream in (SODIUM, SODIUM_2)}
    assert [(x.sex, x.age) for x in one] == [(x.sex, x.age) for x in given[SODIUM]]
    assert [(x.sex, x.age) for x in other] == [("", x.age) for x in given[SODIUM_2]]
