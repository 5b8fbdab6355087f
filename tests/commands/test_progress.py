"""Progress goes by the sizes of streams, and its time left comes true on unequal ones."""

import heapq
import io
import sys

import pytest

from pbm.commands.progress import Pace, Progress
from pbm.records.stream import StreamName

SIZES = [400, 300, 250, *[100] * 6, *[40] * 20, *[5] * 31]  # thousand results, the longest first
NAMES = [StreamName("sodium", f"line-{number}") for number in range(len(SIZES))]


def finishing(sizes: list[int], workers: int) -> list[tuple[float, int]]:
    """When each stream ends, where a worker takes the next one when it is free, and a thousand results take a second."""
    free = [0.0] * workers
    ends = []
    for number, size in enumerate(sizes):
        end = heapq.heappop(free) + size
        heapq.heappush(free, end)
        ends.append((end, number))
    return sorted(ends)


@pytest.mark.parametrize("workers", [1, 2, 4])
def test_the_time_left_comes_true_on_unequal_streams(workers: int) -> None:
    pace = Pace(dict(zip(NAMES, SIZES, strict=True)), workers)
    ends = finishing(SIZES, workers)
    last = ends[-1][0]
    for now, number in ends[:-1]:
        pace.done(NAMES[number], now)
        assert pace.left(now) == pytest.approx(last - now, abs=0.02 * last)
        assert pace.left(now + 3) == pytest.approx(max(last - now - 3, 0), abs=0.02 * last)


def test_no_time_is_told_before_a_stream_is_done_nor_after_the_last() -> None:
    pace = Pace({NAMES[0]: 30, NAMES[1]: 10}, 1)
    assert pace.left(7.0) is None
    pace.done(NAMES[0], 30.0)
    assert pace.left(30.0) == pytest.approx(10)
    pace.done(NAMES[1], 40.0)
    assert pace.left(40.0) is None


def test_a_stream_done_out_of_turn_does_no_harm() -> None:
    pace = Pace({NAMES[0]: 30, NAMES[1]: 20, NAMES[2]: 10}, 1)
    pace.done(NAMES[2], 10.0)
    assert pace.left(10.0) == pytest.approx(50)
    pace.done(NAMES[1], 30.0)
    pace.done(NAMES[0], 60.0)
    assert pace.left(60.0) is None


class Terminal(io.StringIO):
    """A stderr that is a terminal."""

    def isatty(self) -> bool:
        return True


def test_a_terminal_shows_streams_done_and_time_left(monkeypatch: pytest.MonkeyPatch) -> None:
    stderr = Terminal()
    monkeypatch.setattr(sys, "stderr", stderr)
    sizes = {StreamName("sodium", line): size for line, size in (("a", 900), ("b", 90), ("c", 10))}
    with Progress("Tuning", sizes, 1) as progress:
        progress.step(StreamName("sodium", "a"))
        shown = stderr.getvalue()
        assert "90%" in shown
        assert "1 of 3 streams, about 0 s left" in shown
        progress.step(StreamName("sodium", "c"))
        progress.step(StreamName("sodium", "b"))
    assert "3 of 3 streams" in stderr.getvalue()
