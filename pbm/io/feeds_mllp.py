"""HL7 messages over MLLP: connections, who may make them and how much they may hold, and answers once what they brought is kept.

Messages are read in order of arrival, as many at once as came while the last ones were kept. Each connection gets its answers in the order
of its messages. One that does not wait for them is read no further while too much of it is unanswered. Without a store that can be written
nobody is answered, so that every sender keeps what it has and sends it again.
"""

import asyncio
import socket
import time
from collections import deque
from collections.abc import AsyncGenerator, Callable, Sequence
from ipaddress import ip_address, ip_network
from ssl import SSLContext
from urllib.parse import urlsplit

from pbm.errors import InputError
from pbm.io.feeds import Feed
from pbm.io.hl7_message import MessageReader, Received
from pbm.io.mllp import Event, Frame, Framer, framed
from pbm.records.feed import FeedSettings
from pbm.records.reading import Chunk, Item, Message, Remark

MOST_MESSAGES = 50  # in one chunk; a batch holds several
MOST_UNANSWERED = 100  # of one connection
UNFINISHED_SECONDS = 60.0  # for the rest of a message that has begun
_LOOK = 1.0  # seconds between two looks for connections that are idle
_FAREWELL = 2.0  # seconds for the last answers
_EDITION = 1  # messages are known again by their numbers, so there is no other one
_TOLD = {"outside": "bytes outside any message", "broken off": "a message that was broken off"}


def listen(address: str, settings: FeedSettings) -> socket.socket:
    """A socket at `mllp://HOST:PORT`; without a host only this computer can reach it.

    Raises
    ------
    InputError
        If it is no address, cannot be used, or would be open to anybody.
    """
    scheme = address.partition(":")[0]
    host, port = _host_and_port(address)
    if port is None:
        raise InputError(
            f'"{address}" is no address to listen at. Give {scheme}://HOST:PORT, such as {scheme}://127.0.0.1:2575.'
        )
    try:
        family, _, _, _, place = socket.getaddrinfo(host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE)[0]
        if not (ip_address(place[0]).is_loopback or settings.peers or scheme == "mllps"):
            raise InputError(
                f"{address} can be reached from other computers, and feed.peers in lab.toml does not say from which. Name them there "
                f'(peers = ["10.1.2.3"]), or listen at {scheme}://127.0.0.1:{port}.'
            )
        return socket.create_server((str(place[0]), port), family=family, backlog=128)
    except (OSError, UnicodeError) as error:
        said = getattr(error, "strerror", None) or "not the name of a computer"
        raise InputError(
            f"Nothing can listen at {address}: {said}. Another program may use the port, or the address is not of this computer."
        ) from None


def _host_and_port(address: str) -> tuple[str, int | None]:
    """Host and port of an address; no port if it is none."""
    try:
        parts = urlsplit(address)
        host, port = parts.hostname or "localhost", parts.port
    except ValueError:
        return "", None
    if parts.path not in ("", "/") or parts.query or parts.fragment or parts.username:
        return "", None
    return "127.0.0.1" if host == "localhost" else host, port  # "localhost" may be ::1 alone


class MllpFeed(Feed):
    """Messages that senders bring.

    Parameters
    ----------
    source
        Name of the feed.
    listening
        Socket at which senders connect.
    settings
        Who may send and how much.
    reader
        Of messages.
    position
        Where the feed was left: the number of its last message.
    tell
        Says something to a person.
    tls
        How connections are secured; None if they are not.
    """

    def __init__(
        self,
        source: str,
        listening: socket.socket,
        settings: FeedSettings,
        reader: MessageReader,
        position: str,
        tell: Callable[[str], None],
        tls: SSLContext | None = None,
    ) -> None:
        self.source, self.settings = source, settings
        self._socket, self._tls, self._reader = listening, tls, reader
        self._place = int(position or 0)
        self._told: dict[tuple[str, str], float] = {}
        self._tell = tell
        self._peers = [ip_network(one) for one in settings.peers]
        self._arrived = asyncio.Event()
        self._waiting: deque[tuple[Connection, Event]] = deque()
        self._unanswered: deque[list[tuple[Connection, int, Sequence[bytes]]]] = deque()
        self.connections: set[Connection] = set()

    @property
    def address(self) -> str:
        """Where it listens."""
        host, port = self._socket.getsockname()[:2]
        return f"{host}:{port}"

    async def chunks(self) -> AsyncGenerator[Chunk]:
        """What arrived since the last one was asked for."""
        server = await asyncio.get_running_loop().create_server(
            lambda: Connection(self), sock=self._socket, ssl=self._tls
        )
        looking = asyncio.create_task(self._look_for_idle())
        try:
            while True:
                await self._arrived.wait()
                yield self._chunk()
        finally:
            looking.cancel()
            server.close()
            for one in self.connections:
                one.stop_reading()

    def kept(self) -> None:
        """Answer what the oldest unanswered chunk brought."""
        for connection, size, answers in self._unanswered.popleft():
            connection.answer(size, answers)

    async def end(self) -> None:
        """Close every connection once its last answers are on their way."""
        for one in [*self.connections]:
            one.close()
        until = time.monotonic() + _FAREWELL
        while self.connections and time.monotonic() < until:
            await asyncio.sleep(0.01)

    # What connections say

    def take(self, connection: "Connection", events: Sequence[Event]) -> None:
        """Something came."""
        self._waiting += [(connection, one) for one in events]
        self._arrived.set()

    def allows(self, address: str) -> bool:
        """Whether a peer may send."""
        if not self._peers:
            return True
        own = ip_address(address.partition("%")[0])
        own = getattr(own, "ipv4_mapped", None) or own
        return any(own in network for network in self._peers)

    def say(self, kind: str, peer: str) -> None:
        """Tell a person, of one kind and peer at most once a minute."""
        now = time.monotonic()
        if now - self._told.get((kind, peer), -60.0) >= 60.0:
            if len(self._told) > 1000:
                self._told.clear()
            self._told[kind, peer] = now
            self._tell(f"{self.source}, {peer}: {kind}")

    # What becomes of it

    def _chunk(self) -> Chunk:
        messages: list[Message] = []
        items: list[Item] = []
        others: list[Item] = []
        answers: list[tuple[Connection, int, Sequence[bytes]]] = []
        at = time.time_ns() // 1_000
        for _ in range(min(len(self._waiting), MOST_MESSAGES)):
            connection, event = self._waiting.popleft()
            received = self._received(event, at)
            if received.message:
                messages.append(received.message)
                items += received.items
            else:
                others += received.items
            answers.append((connection, len(event.content) if isinstance(event, Frame) else 0, received.answers))
        if not self._waiting:
            self._arrived.clear()
        self._unanswered.append(answers)
        return Chunk(self.source, _EDITION, items + others, str(self._place), messages)

    def _received(self, event: Event, at: int) -> Received:
        self._place += 1
        if isinstance(event, Frame):
            return self._reader.read(event.content, self._place, at)
        if event.kind == "too long":
            return self._reader.refuse_too_long(event.head, self._place, at)
        return Received([Remark(self._place, _TOLD[event.kind], f"{event.length} bytes")], None, ())

    async def _look_for_idle(self) -> None:
        while True:
            await asyncio.sleep(_LOOK)
            now = asyncio.get_running_loop().time()
            for one in [*self.connections]:
                one.close_if_idle(now, self.settings.idle_minutes * 60)


class Connection(asyncio.Protocol):
    """One sender's connection."""

    def __init__(self, feed: MllpFeed) -> None:
        self._feed = feed
        self._framer = Framer(feed.settings.largest_message)
        self._clock = asyncio.get_running_loop().time
        self._heard = self._clock()
        self._messages = self._bytes = 0  # not answered yet
        self._paused = self._stopped = False
        self._unread = False  # answers that the sender has not read yet fill its buffer
        self._ended = False  # the sender sends no more
        self._transport: asyncio.Transport | None = None
        self._peer = "unknown"

    def connection_made(self, transport: asyncio.BaseTransport) -> None:
        assert isinstance(transport, asyncio.Transport)
        self._transport = transport
        self._peer = str((transport.get_extra_info("peername") or ("unknown",))[0])
        if not self._feed.allows(self._peer):
            self._turn_away("not among feed.peers in lab.toml, turned away")
        elif len(self._feed.connections) >= self._feed.settings.connections:
            self._turn_away("more connections than feed.connections in lab.toml, turned away")
        else:
            self._feed.connections.add(self)

    def _turn_away(self, why: str) -> None:
        self._feed.say(why, self._peer)
        self._stopped = True
        if self._transport:
            self._transport.abort()

    def data_received(self, data: bytes) -> None:
        if self._stopped:
            return
        self._heard = self._clock()
        if events := self._framer.feed(data):
            self._take(events)

    def _take(self, events: Sequence[Event]) -> None:
        self._messages += len(events)
        self._bytes += sum(len(one.content) for one in events if isinstance(one, Frame))
        self._feed.take(self, events)
        self._read_or_wait()

    def answer(self, size: int, answers: Sequence[bytes]) -> None:
        """Answer the oldest message that waits for it; its bytes are counted no more."""
        self._messages, self._bytes = self._messages - 1, self._bytes - size
        if self._transport is None or self._transport.is_closing():
            return
        if answers:
            self._transport.write(b"".join(map(framed, answers)))
        if self._ended and not self._messages:
            self._transport.close()
        self._read_or_wait()

    def pause_writing(self) -> None:
        self._unread = True
        self._read_or_wait()

    def resume_writing(self) -> None:
        self._unread = False
        self._read_or_wait()

    def _read_or_wait(self) -> None:
        """Read on, unless too much is unanswered or the sender does not read its answers."""
        if self._transport is None or self._transport.is_closing():
            return
        too_much = self._messages >= MOST_UNANSWERED or self._bytes >= self._feed.settings.largest_message
        wait = self._stopped or self._unread or too_much
        if wait != self._paused:
            self._paused = wait
            (self._transport.pause_reading if wait else self._transport.resume_reading)()

    def connection_lost(self, exc: Exception | None) -> None:
        self._feed.connections.discard(self)
        if not self._stopped and (events := self._framer.end()):
            self._take(events)
        self._transport = None

    def eof_received(self) -> bool:
        # A sender may close its side and still wait for answers.
        self._ended = True
        return self._messages > 0

    def close_if_idle(self, now: float, idle: float) -> None:
        """Close a connection on which nothing comes any more."""
        silent = now - self._heard
        if self._messages:
            return
        if silent >= idle:
            self._feed.say("silent for too long, closed (feed.idle_minutes in lab.toml)", self._peer)
            self.close()
        elif self._framer.in_hand and silent >= UNFINISHED_SECONDS:
            self._feed.say("the rest of a message did not come, closed", self._peer)
            self.close()

    def stop_reading(self) -> None:
        """Take nothing more; answers still go out."""
        self._stopped = True
        self._read_or_wait()

    def close(self) -> None:
        """Close it once what is written has gone out."""
        if self._transport:
            self._transport.close()
