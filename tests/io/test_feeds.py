"""The feeds at work: what queued goes into one batch, a signal or an error ends the run and loses nothing that was read."""

import os
import signal
import threading
import time
from collections.abc import AsyncGenerator, Sequence
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.errors import FeedError, InputError
from pbm.io.feeds import QUEUE, Feed, FileFeed, LineFeed, PacedFeed, run
from pbm.io.follow import FollowedFile
from pbm.io.ndjson import LONGEST_LINE
from pbm.records.reading import Chunk, Reading, SetAside
from tests.live_laboratory import CSV_HEADER, MINUTE, csv_lines, laboratory, results

COLUMNS = laboratory().extract


def chunks(count: int) -> list[Chunk]:
    return [Chunk("a feed", 1, results([n]), str(n)) for n in range(count)]


def as_it_is(chunk: Chunk) -> Chunk:
    return chunk


class Listed(Feed):
    """A feed that brings what it is given."""

    def __init__(self, items: Sequence[Chunk | Exception], then: threading.Event | None = None) -> None:
        self.items, self.then = items, then

    async def chunks(self) -> AsyncGenerator[Chunk]:
        import asyncio

        for item in self.items:
            if isinstance(item, Exception):
                raise item
            yield item
        while self.then and not self.then.is_set():
            await asyncio.sleep(0.01)


def test_every_chunk_is_handed_over_once_and_in_order() -> None:
    taken: list[Chunk] = []
    run([Listed(chunks(50))], as_it_is, taken.extend)
    assert taken == chunks(50)


def test_what_queued_while_a_batch_was_kept_goes_into_the_next() -> None:
    sizes: list[int] = []

    def slow(batch: Sequence[Chunk]) -> None:
        sizes.append(len(batch))
        time.sleep(0.02)

    run([Listed(chunks(30))], as_it_is, slow)
    assert sum(sizes) == 30
    assert max(sizes) == QUEUE


def test_each_chunk_is_prepared_before_it_is_handed_over() -> None:
    taken: list[Chunk] = []
    run([Listed(chunks(9))], lambda chunk: replace(chunk, items=[]), taken.extend)
    assert [chunk.position for chunk in taken] == [chunk.position for chunk in chunks(9)]
    assert not any(chunk.items for chunk in taken)


def test_several_feeds_end_when_all_have_ended() -> None:
    taken: list[Chunk] = []
    run([Listed(chunks(5)), Listed([]), Listed(chunks(7))], as_it_is, taken.extend)
    assert len(taken) == 12


def test_an_error_of_a_feed_comes_out_after_what_was_read_before_it() -> None:
    taken: list[Chunk] = []
    with pytest.raises(InputError, match="broken off"):
        run([Listed([*chunks(3), InputError("broken off")])], as_it_is, taken.extend)
    assert taken == chunks(3)


def test_a_defect_of_a_feed_does_not_hang_the_run() -> None:
    with pytest.raises(ZeroDivisionError):
        run([Listed([*chunks(2), ZeroDivisionError()]), Listed([], threading.Event())], as_it_is, lambda batch: None)


def test_an_error_while_keeping_ends_the_run() -> None:
    def full(batch: Sequence[Chunk]) -> None:
        raise FeedError("the disk is full")

    with pytest.raises(FeedError, match="the disk is full"):
        run([Listed(chunks(30), threading.Event())], as_it_is, full)


def test_when_nothing_comes_the_taker_is_called_with_nothing_and_no_chunk_is_lost() -> None:
    come, taken, idle = threading.Event(), list[Chunk](), list[int]()

    def take(batch: Sequence[Chunk]) -> None:
        taken.extend(batch)
        if not batch:
            idle.append(len(taken))
            come.set()

    run([Listed(chunks(3), come), Listed(chunks(2))], as_it_is, take, every=0.01)
    assert idle and len(taken) == 5


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_ends_the_run_after_the_batch_in_hand(number: signal.Signals) -> None:
    taken: list[Chunk] = []

    def stop(batch: Sequence[Chunk]) -> None:
        os.kill(os.getpid(), number)
        time.sleep(0.05)
        taken.extend(batch)

    run([Listed(chunks(2), threading.Event())], as_it_is, stop)
    assert taken == chunks(2)


def test_a_growing_file_is_followed_until_a_signal(tmp_path: Path) -> None:
    path = tmp_path / "live.csv"
    taken: list[object] = []
    lines = csv_lines(results([140, 141, 142]))
    path.write_text(f"{CSV_HEADER}\n{lines[0]}\n")

    def take(batch: Sequence[Chunk]) -> None:
        taken.extend(item for chunk in batch for item in chunk.items)
        if len(taken) < 3:
            with path.open("a") as file:
                file.write(f"{lines[len(taken)]}\n")
        else:
            os.kill(os.getpid(), signal.SIGINT)

    run([FileFeed(FollowedFile(path, COLUMNS), once=False)], as_it_is, take)
    assert [item.specimen for item in taken if isinstance(item, Reading)] == [
        one.specimen for one in results([1, 2, 3])
    ]


def test_once_ends_where_the_file_ends(tmp_path: Path) -> None:
    path = tmp_path / "live.csv"
    taken: list[Chunk] = []
    path.write_text("\n".join([CSV_HEADER, *csv_lines(results([140] * 1200))]) + "\n")
    run([FileFeed(FollowedFile(path, COLUMNS), once=True)], as_it_is, taken.extend)
    assert sum(len(chunk.items) for chunk in taken) == 1200


def piped(*pieces: bytes) -> list[Chunk]:
    """What a feed of lines makes of pieces written to a pipe."""
    reading, writing = os.pipe()
    taken: list[Chunk] = []

    def write() -> None:
        for piece in pieces:
            os.write(writing, piece)
            time.sleep(0.005)
        os.close(writing)

    writer = threading.Thread(target=write)
    writer.start()
    run([LineFeed("standard input", reading, "4")], as_it_is, taken.extend)
    writer.join()
    os.close(reading)
    return taken


def items(some: list[Chunk]) -> list[object]:
    return [item for chunk in some for item in chunk.items]


def test_lines_are_put_together_from_the_pieces_of_a_pipe() -> None:
    whole = items(piped(b'{"ward":"a"}\n{"ward":"b"}\n\n{"ward":"c"}'))
    assert [getattr(item, "ward", None) for item in whole] == ["a", "b", None, "c"]
    assert [item.place for item in whole if isinstance(item, Reading | SetAside)] == [1, 2, 3, 4]
    assert items(piped(*(bytes([sign]) for sign in b'{"ward":"a"}\n{"ward":"b"}\n\n{"ward":"c"}'))) == whole


def test_standard_input_cannot_be_read_again_and_so_is_another_edition_each_time() -> None:
    [chunk] = piped(b'{"ward":"a"}\n')
    assert (chunk.edition, chunk.position) == (5, "5")


def test_a_line_without_end_takes_bounded_memory_and_only_itself_with_it() -> None:
    block = b"x" * 65_536
    found = items(piped(b'{"ward":"a"}\n', *[block] * 20, b'\n{"ward":"b"}\n'))
    assert [item.reason for item in found if isinstance(item, SetAside)] == ["line too long"]
    assert [item.ward for item in found if isinstance(item, Reading)] == ["a", "b"]
    assert len(block) * 20 > LONGEST_LINE


def test_a_replay_keeps_the_pace_of_its_times() -> None:
    some = [Chunk("history", 1, [one], "") for one in results([1, 2, 3])]
    begun = time.monotonic()
    taken: list[Chunk] = []
    run([PacedFeed(some, 60.0 / 0.05)], as_it_is, taken.extend)
    assert len(taken) == 3
    assert time.monotonic() - begun >= 2 * MINUTE / 1e6 / (60.0 / 0.05)
