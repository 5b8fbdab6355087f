"""The feeds at work: a file polled, standard input read, a history paced; what they bring is handed over while more is being read.

Everything that queued while the last batch was kept goes into the next one, up to `QUEUE` chunks: nothing ever waits for a clock. SIGINT
and SIGTERM stop the feeds; what was read by then is still handed over. This is the only module that knows asyncio.
"""

import asyncio
import os
import signal
import threading
from collections.abc import AsyncIterator, Callable, Iterable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from typing import Protocol

from pbm.io.follow import FollowedFile
from pbm.io.ndjson import LONGEST_LINE, read_line
from pbm.records.reading import Chunk
from pbm.records.result import Result

QUEUE = 4
POLL = 0.15  # seconds
_READ = 2**16
_MICROSECONDS = 1e6

Prepare = Callable[[Chunk], Chunk]
Take = Callable[[Sequence[Chunk]], None]


class Feed(Protocol):
    """Where results come from."""

    def chunks(self) -> AsyncIterator[Chunk]:
        """What it brings, until it ends."""


class FileFeed:
    """A growing file, polled; with `once` it ends where the file ends."""

    def __init__(self, file: FollowedFile, *, once: bool) -> None:
        self._file, self._once = file, once

    async def chunks(self) -> AsyncIterator[Chunk]:
        """Whole lines as they come."""
        while True:
            if chunk := self._file.read():
                yield chunk
            elif self._once:
                return
            else:
                await asyncio.sleep(POLL)


class PacedFeed:
    """Results with their times, replayed so many times faster than they happened; without `speed` as fast as it goes."""

    def __init__(self, chunks: Iterable[Chunk], speed: float | None) -> None:
        self._chunks, self._speed = chunks, speed

    async def chunks(self) -> AsyncIterator[Chunk]:
        """Each chunk when its first result is due."""
        clock, begun, first = asyncio.get_running_loop().time, asyncio.get_running_loop().time(), None
        for chunk in self._chunks:
            if self._speed and isinstance(result := chunk.items[0], Result):
                first = result.time if first is None else first
                due = begun + (result.time - first) / _MICROSECONDS / self._speed
                await asyncio.sleep(max(0.0, due - clock()))
            yield chunk


class LineFeed:
    """NDJSON from an open file descriptor, such as standard input, until it ends.

    Parameters
    ----------
    source
        Name of the feed.
    descriptor
        Open for reading; a thread waits for it, since not every kind of file can be waited for otherwise.
    position
        Of the same feed before: what cannot be read again is another edition each time.
    """

    def __init__(self, source: str, descriptor: int, position: str) -> None:
        self._source, self._descriptor = source, descriptor
        self._edition = int(position or 0) + 1

    async def chunks(self) -> AsyncIterator[Chunk]:
        """Lines as they come."""
        loop, queue = asyncio.get_running_loop(), asyncio.Queue[list[bytes] | None](1)

        def hand_over(lines: list[bytes] | None) -> None:
            # When the loop has ended meanwhile nobody waits for the lines any more.
            with suppress(RuntimeError, asyncio.CancelledError):
                asyncio.run_coroutine_threadsafe(queue.put(lines), loop).result()

        def wait_for_lines() -> None:
            for lines in _lines(self._descriptor):
                hand_over(lines)
            hand_over(None)

        threading.Thread(target=wait_for_lines, daemon=True).start()
        place = 0
        while lines := await queue.get():
            yield Chunk(
                self._source,
                self._edition,
                [read_line(number, line) for number, line in enumerate(lines, start=place + 1)],
                str(self._edition),
            )
            place += len(lines)


def _lines(descriptor: int) -> Iterator[list[bytes]]:
    """Whole lines, as many as there are; of a line too long only its begin, so that memory is bounded."""
    held = b""
    while block := os.read(descriptor, _READ):
        *lines, rest = block.split(b"\n")
        if lines:
            lines[0] = held + lines[0]
            held = rest
            yield lines
        else:
            held += rest
        held = held[: LONGEST_LINE + 1]
    if held:
        yield [held]


def run(feeds: Sequence[Feed], prepare: Prepare, take: Take) -> None:
    """Read feeds until all have ended or a signal stops them.

    Parameters
    ----------
    feeds
        Where results come from.
    prepare
        Called with each chunk as it comes, while the batch before is being kept.
    take
        Called in a thread of its own, one call at a time, with the prepared chunks that queued meanwhile; its errors end the run.
    """
    asyncio.run(_run(feeds, prepare, take))


async def _run(feeds: Sequence[Feed], prepare: Prepare, take: Take) -> None:
    queue = asyncio.Queue[Chunk | None](QUEUE)
    reading = asyncio.create_task(_read_until_stopped(feeds, prepare, queue))
    loop = asyncio.get_running_loop()
    with ThreadPoolExecutor(1) as worker:
        try:
            while batch := await _queued(queue):
                await loop.run_in_executor(worker, take, batch)
        except BaseException:
            reading.cancel()
            with suppress(BaseException):
                await reading
            raise
    await reading


async def _queued(queue: asyncio.Queue[Chunk | None]) -> list[Chunk]:
    """What is queued, at least one chunk; nothing when all has been read."""
    batch: list[Chunk] = []
    chunk = await queue.get()
    while chunk is not None:
        batch.append(chunk)
        if queue.empty() or len(batch) == QUEUE:
            return batch
        chunk = queue.get_nowait()
    queue.put_nowait(None)  # met again when this batch is done
    return batch


async def _read_until_stopped(feeds: Sequence[Feed], prepare: Prepare, queue: asyncio.Queue[Chunk | None]) -> None:
    """Fill the queue until every feed has ended, one has failed, or a signal came; then mark its end."""
    stopped = asyncio.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        asyncio.get_running_loop().add_signal_handler(number, stopped.set)
    stop = asyncio.create_task(stopped.wait())
    readers: asyncio.Future[list[None]] = asyncio.gather(*(_fill(feed, prepare, queue) for feed in feeds))
    try:
        ended, _ = await asyncio.wait((stop, readers), return_when=asyncio.FIRST_COMPLETED)
    finally:
        stop.cancel()
        readers.cancel()
        await asyncio.gather(readers, return_exceptions=True)  # what was stopped is no error, and is not told as one
    await queue.put(None)
    if readers in ended:
        readers.result()  # raises what a feed raised


async def _fill(feed: Feed, prepare: Prepare, queue: asyncio.Queue[Chunk | None]) -> None:
    async for chunk in feed.chunks():
        await queue.put(prepare(chunk))
