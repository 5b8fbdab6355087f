"""The feeds at work: a file polled, standard input read, a history paced; what they bring is handed over in batches.

Everything that came while the last batch was kept goes into the next one, up to `QUEUE` chunks: nothing ever waits for a clock. A batch is
taken in the thread that reads: the way to another thread and back would be a tenth or more of the work on the message of a sender that
waits for its answer, and would win no more than the wait for the disk. When nothing comes for a while the taker is called with nothing,
since silence may mean something too. A feed is told when its chunk is kept. While the store cannot take a batch it is tried again and
again, and nothing more is read. SIGINT and SIGTERM stop the feeds; what was read by then is still handed over. Only this module and
feeds_mllp.py know asyncio.
"""

import asyncio
import os
import queue
import signal
import threading
from collections.abc import AsyncGenerator, Callable, Iterable, Iterator, Sequence
from contextlib import aclosing, suppress

from pbm.errors import StoreWaits
from pbm.io.follow import FollowedFile
from pbm.io.ndjson import LONGEST_LINE, read_line
from pbm.records.reading import Chunk
from pbm.records.result import Result

QUEUE = 4
POLL = 0.15  # seconds
AGAIN = 1.0  # seconds until a batch is tried again
IDLE = 1.0  # seconds
_READ = 2**16
_MICROSECONDS = 1e6

Prepare = Callable[[Chunk], Chunk]
Take = Callable[[Sequence[Chunk]], None]


class Feed:
    """Where results come from."""

    def chunks(self) -> AsyncGenerator[Chunk]:
        """What it brings, until it ends."""
        raise NotImplementedError

    def kept(self) -> None:
        """The oldest of its chunks that was not kept yet has been kept."""

    async def end(self) -> None:
        """All is kept that will be."""


class FileFeed(Feed):
    """A growing file, polled; with `once` it ends where the file ends."""

    def __init__(self, file: FollowedFile, *, once: bool) -> None:
        self._file, self.once = file, once

    async def chunks(self) -> AsyncGenerator[Chunk]:
        """Whole lines as they come."""
        while True:
            if chunk := self._file.read():
                yield chunk
            elif self.once:
                return
            else:
                await asyncio.sleep(POLL)


class PacedFeed(Feed):
    """Results with their times, replayed so many times faster than they happened; without `speed` as fast as it goes."""

    def __init__(self, chunks: Iterable[Chunk], speed: float | None) -> None:
        self._chunks, self._speed = chunks, speed

    async def chunks(self) -> AsyncGenerator[Chunk]:
        """Each chunk when its first result is due."""
        clock, begun, first = asyncio.get_running_loop().time, asyncio.get_running_loop().time(), None
        for chunk in self._chunks:
            if self._speed and isinstance(result := chunk.items[0], Result):
                first = result.time if first is None else first
                due = begun + (result.time - first) / _MICROSECONDS / self._speed
                await asyncio.sleep(max(0.0, due - clock()))
            yield chunk


class LineFeed(Feed):
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

    async def chunks(self) -> AsyncGenerator[Chunk]:
        """Lines as they come."""
        loop, come = asyncio.get_running_loop(), asyncio.Event()
        read: queue.Queue[list[bytes] | None] = queue.Queue(QUEUE)

        def hand_over(lines: list[bytes] | None) -> None:
            read.put(lines)
            # When the loop has ended meanwhile nobody waits for the lines any more.
            with suppress(RuntimeError):
                loop.call_soon_threadsafe(come.set)

        def wait_for_lines() -> None:
            for lines in _lines(self._descriptor):
                hand_over(lines)
            hand_over(None)

        threading.Thread(target=wait_for_lines, daemon=True).start()
        place = 0
        while await come.wait():
            come.clear()
            while not read.empty():
                if (lines := read.get_nowait()) is None:
                    return
                items = [read_line(number, line) for number, line in enumerate(lines, start=place + 1)]
                yield Chunk(self._source, self._edition, items, str(self._edition))
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


def run(feeds: Sequence[Feed], prepare: Prepare, take: Take, every: float = IDLE) -> None:
    """Read feeds until all have ended or a signal stops them.

    Parameters
    ----------
    feeds
        Where results come from.
    prepare
        Called with each chunk as it comes.
    take
        Called with the prepared chunks that queued; nothing is read until it returns. If it raises `StoreWaits` it is called again with
        the same ones until it does not, or until a signal comes; its other errors end the run.
    every
        When no chunk came for so many seconds, `take` is called without any.
    """
    asyncio.run(_Run(feeds, prepare, take, every).until_the_end())


class _Run:
    """One run of the feeds."""

    def __init__(self, feeds: Sequence[Feed], prepare: Prepare, take: Take, every: float) -> None:
        self._feeds, self._prepare, self._take, self._every = feeds, prepare, take, every
        self._queue = asyncio.Queue[tuple[Feed, Chunk] | None](QUEUE)
        self._stopped = asyncio.Event()

    async def until_the_end(self) -> None:
        for number in (signal.SIGINT, signal.SIGTERM):
            asyncio.get_running_loop().add_signal_handler(number, self._stopped.set)
        reading = asyncio.create_task(self._read_until_stopped())
        try:
            while batch := await self._queued():
                await self._keep([chunk for _, chunk in batch])
                for feed, _ in batch:
                    feed.kept()
        except BaseException:
            reading.cancel()
            with suppress(BaseException):
                await reading
            raise
        finally:
            for feed in self._feeds:
                await feed.end()
        await reading

    async def _keep(self, chunks: Sequence[Chunk]) -> None:
        """Have a batch kept, however long the store cannot take it."""
        while True:
            try:
                return self._take(chunks)
            except StoreWaits:
                if self._stopped.is_set():
                    raise
                with suppress(TimeoutError):
                    await asyncio.wait_for(self._stopped.wait(), AGAIN)

    async def _queued(self) -> list[tuple[Feed, Chunk]]:
        """What is queued, at least one chunk; nothing when all has been read."""
        batch: list[tuple[Feed, Chunk]] = []
        given = await self._next()
        while given is not None:
            batch.append(given)
            if self._queue.empty() or len(batch) == QUEUE:
                return batch
            given = self._queue.get_nowait()
        self._queue.put_nowait(None)  # met again when this batch is done
        return batch

    async def _next(self) -> tuple[Feed, Chunk] | None:
        """The next of the queue; while there is none, the taker is called now and then."""
        while True:
            try:
                async with asyncio.timeout(self._every):
                    return await self._queue.get()
            except TimeoutError:
                await self._keep([])

    async def _read_until_stopped(self) -> None:
        """Fill the queue until every feed has ended, one has failed, or a signal came; then mark its end."""
        stop = asyncio.create_task(self._stopped.wait())
        readers: asyncio.Future[list[None]] = asyncio.gather(*map(self._fill, self._feeds))
        try:
            ended, _ = await asyncio.wait((stop, readers), return_when=asyncio.FIRST_COMPLETED)
        finally:
            stop.cancel()
            readers.cancel()
            await asyncio.gather(
                readers, return_exceptions=True
            )  # what was stopped is no error, and is not told as one
        await self._queue.put(None)
        if readers in ended:
            readers.result()  # raises what a feed raised

    async def _fill(self, feed: Feed) -> None:
        async with aclosing(feed.chunks()) as chunks:
            async for chunk in chunks:
                await self._queue.put((feed, self._prepare(chunk)))
