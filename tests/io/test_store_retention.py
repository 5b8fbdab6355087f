"""Old results go, and neither an alarm nor a state nor what is known of copies changes by it; the file stops growing."""

import itertools
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from pbm.io import store_retention
from pbm.io.store import Store
from pbm.io.store_place import Place
from pbm.io.store_reader import StoreReader
from pbm.io.store_retention import KEPT_RESULTS, Sweep
from pbm.records.message import Answered, MessageKey
from pbm.records.reading import Chunk, SetAside
from pbm.records.result import Result
from pbm.records.snapshot import Batch, KeptResult
from pbm.stages.estimate import WINDOW
from pbm.stages.live import Live
from tests.io.store_samples import ALARM, FEED, batch, begun, tables
from tests.live_laboratory import MINUTE, SODIUM, START, every_line, laboratory, results, two_lines

DAY = 24 * 60 * MINUTE


def sweep(store: Store, before: int, at: int = 7) -> int:
    """All steps of a removal; how many results went."""
    going: Sweep | None = Sweep(before)
    removed = 0
    while going:
        removed = going.removed
        going = store.remove_old(going, at)
    return removed


def kept(values: Sequence[float], **more: Any) -> list[KeptResult]:
    return [KeptResult(one, "", FEED) for one in results(values, **more)]


def test_results_before_the_time_go_and_the_last_thousand_of_a_stream_stay(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(results=kept([140] * 2500), alarms=[]))
        assert sweep(store, START + 900 * MINUTE) == 900
        assert [row[0] for row in tables(place)["results"]] == list(range(901, 2501))
        assert sweep(store, START + 9999 * MINUTE) == 600
        assert [row[0] for row in tables(place)["results"]] == list(range(1501, 2501))
        assert sweep(store, START + 9999 * MINUTE) == 0


def test_the_last_thousand_are_those_that_count(place: Place) -> None:
    late = [KeptResult(one, "too late", FEED) for one in results([141] * 300, first=9000)]
    with begun(place) as store:
        store.keep(batch(results=[*kept([140] * 1100), *late], alarms=[]))
        assert sweep(store, START + 9999 * MINUTE) == 100
        assert len(store.recent_results(SODIUM, 9999)) == KEPT_RESULTS


def test_as_many_stay_as_an_onset_is_estimated_from() -> None:
    assert KEPT_RESULTS >= WINDOW


def test_a_result_that_an_alarm_is_about_stays(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(results=kept([140] * 1500), alarms=[(7, ALARM), (80, replace(ALARM, monitor=1))]))
        assert sweep(store, START + 9999 * MINUTE) == 498
    assert [row[0] for row in tables(place)["results"]][:3] == [8, 81, 501]


def test_a_removal_leaves_one_mark_in_the_audit_and_its_count_with_the_feed(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(results=kept([140] * 3500), alarms=[]))
        sweep(store, START + 9999 * MINUTE, at=99)
        sweep(store, START + 9999 * MINUTE)
    assert [row[1:3] for row in tables(place)["audit"]] == [(1, "watch begun"), (99, "old results removed")]
    assert "but for the last 1,000 of each stream and those of alarms" in tables(place)["audit"][-1][5]
    assert [row[4] for row in tables(place)["feeds"]] == [2500]


def test_old_messages_go_and_young_ones_stay(place: Place) -> None:
    some = [Answered(MessageKey(f"LIS-{n % 3}", f"{n:05d}", f"{n:064x}"), "AA", n) for n in range(2600)]
    with begun(place) as store:
        store.keep(Batch(messages=some))
        sweep(store, 2000)
        assert {row[4] for row in tables(place)["messages"]} == set(range(2000, 2600))


def test_of_what_was_set_aside_the_last_pieces_stay(place: Place, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(store_retention, "KEPT_ASIDE", 30)
    with begun(place) as store:
        store.keep(Batch(set_aside=[("-", SetAside(n, "not JSON")) for n in range(1500)], positions={"-": ""}))
        sweep(store, 1)
        store.keep(Batch(set_aside=[("-", SetAside(9999, "not JSON"))], positions={"-": ""}))
    assert [row[0] for row in tables(place)["set_aside"]] == [*range(1471, 1501), 1501]
    assert [row[4] for row in tables(place)["feeds"]] == [1470]


def test_alarms_and_states_are_the_same_with_and_without_retention(place: Place, tmp_path: Path) -> None:
    feed = spread(two_lines(7, 9000))
    feed += [replace(one, time=one.time + MINUTE) for one in feed[-40:]] + feed[-60:]
    ends = [
        watched(where, feed, keep_days=keep_days) for where, keep_days in ((place, 30), (tmp_path / "all.sqlite", None))
    ]
    assert ends[0] == ends[1]
    assert len(ends[0][0]) > 10
    assert len(tables(place)["results"]) < 5500 < len(tables(tmp_path / "all.sqlite")["results"])


def spread(some: Sequence[Result]) -> list[Result]:
    """The same results, three an hour in place of three a minute."""
    return [replace(one, time=START + (one.time - START) * 60) for one in some]


def watched(place: Place, feed: Sequence[Result], keep_days: int | None) -> tuple[Any, ...]:
    """Alarms and states after a watch with a restart after every few batches, and with a removal going on between them."""
    lab, plan = laboratory(), every_line()
    batches = iter(itertools.batched(feed, 150) if hasattr(itertools, "batched") else pieces(feed, 150))
    while some := list(itertools.islice(batches, 7)):
        with Store(place) as store:
            live, going = Live(lab, plan, "sha"), None
            live.go_on(store.snapshots(), store.newest_times(), store.recent_results)
            store.begin(1, "watch begun", "sha", "", [one.snapshot() for one in live.monitors])
            for part in some:
                store.keep(live.take([Chunk("live.csv", 1, part, "")], store.earlier(part)))
                if keep_days is not None:
                    going = store.remove_old(going or Sweep(part[-1].time - keep_days * DAY), 1)
            assert [one.snapshot() for one in live.monitors] == store.snapshots()
    reader = StoreReader(place)
    return reader.alarms(9999), reader.snapshots(), tables(place)["tallies"]


def pieces(feed: Sequence[Result], size: int) -> list[Sequence[Result]]:
    return [feed[start : start + size] for start in range(0, len(feed), size)]


def test_a_file_under_retention_stops_growing(tmp_path: Path) -> None:
    path, sizes = tmp_path / "watch.sqlite", []
    begun(path).close()
    for n in range(30):
        some = kept([140] * 1000, start=START + n * DAY, first=n * 1000)
        with Store(path) as store:
            store.keep(batch(results=some, alarms=[], set_aside=[]))
            sweep(store, START + (n - 4) * DAY)
        sizes.append(path.stat().st_size)
    assert max(sizes[20:]) <= 1.1 * max(sizes[5:12])
    assert sizes[3] > 2 * sizes[0], "it does grow until there is something to remove"


def test_the_room_of_what_is_removed_is_given_back(tmp_path: Path) -> None:
    path = tmp_path / "watch.sqlite"
    with begun(path) as store:
        store.keep(batch(results=kept([140] * 20_000), alarms=[]))
    large = path.stat().st_size
    with Store(path) as store:
        assert sweep(store, START + 99_999 * MINUTE) == 19_000
    assert path.stat().st_size < large / 3


@pytest.mark.parametrize("through_messages", [False, True])
def test_a_result_costs_less_than_300_bytes(tmp_path: Path, through_messages: bool) -> None:
    """Even where every message holds one result only."""
    path, lab, plan = tmp_path / "watch.sqlite", laboratory(), every_line()
    feed = two_lines(1, 30_000)
    live = Live(lab, plan, "sha")
    with Store(path) as store:
        store.begin(1, "watch begun", "sha", "", [one.snapshot() for one in live.monitors])
        for first, part in enumerate(pieces(feed, 500)):
            taken = live.take([Chunk("mllp://127.0.0.1:2575", 1, part, "")], store.earlier(part))
            if through_messages:
                keys = (
                    MessageKey("LIS^TERN BAY", f"{first * 500 + n:010d}", f"{hash((first, n)) % 2**256:064x}")
                    for n in range(500)
                )
                taken = replace(taken, messages=[Answered(key, "AA", START) for key in keys])
            store.keep(taken)
    assert path.stat().st_size / len(feed) < 300
