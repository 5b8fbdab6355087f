"""Connections of senders: who is let in, how much each may hold, and when it is answered."""

import contextlib
import os
import shutil
import signal
import socket
import ssl
import subprocess
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from pbm.errors import InputError, StoreWaits
from pbm.io import feeds, feeds_mllp
from pbm.io.feeds import run
from pbm.io.feeds_mllp import MOST_UNANSWERED, MllpFeed, listen
from pbm.io.hl7_message import MessageReader
from pbm.io.mllp import framed
from pbm.io.tls import server_context
from pbm.records.feed import FeedSettings
from pbm.records.reading import Chunk
from tests.io.hl7_text import oru
from tests.live_laboratory import laboratory

LAB = laboratory()


@dataclass
class Served:
    """What came of it."""

    taken: list[Chunk] = field(default_factory=list)
    told: list[str] = field(default_factory=list)
    failed: list[BaseException] = field(default_factory=list)

    @property
    def messages(self) -> int:
        return sum(len(chunk.messages) for chunk in self.taken)


def served(
    senders: Callable[[int], None],
    settings: FeedSettings | None = None,
    take: Callable[[Sequence[Chunk]], None] | None = None,
    tls: ssl.SSLContext | None = None,
) -> Served:
    """Run a feed until its senders have done what they do."""
    known, found = settings or FeedSettings(), Served()
    listening = listen("mllp://127.0.0.1:0", known)
    feed = MllpFeed("mllp://x", listening, known, MessageReader(LAB), "", found.told.append, tls)

    def send() -> None:
        try:
            senders(int(listening.getsockname()[1]))
        except BaseException as error:
            found.failed.append(error)
        os.kill(os.getpid(), signal.SIGINT)

    thread = threading.Thread(target=send)
    thread.start()
    run([feed], lambda chunk: chunk, take or found.taken.extend)
    thread.join()
    assert not found.failed, found.failed
    return found


def connect(port: int) -> socket.socket:
    return socket.create_connection(("127.0.0.1", port), timeout=20)


def numbered(number: int) -> bytes:
    return framed(oru().replace(b"000001", b"%06d" % number))


def test_a_message_is_answered_once_it_is_kept() -> None:
    kept: list[float] = []

    def take(chunks: Sequence[Chunk]) -> None:
        time.sleep(0.2)
        kept.append(time.monotonic())

    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            assert b"MSA|AA|000001" in one.recv(4096)
            answered.append(time.monotonic())

    answered: list[float] = []
    served(sender, take=take)
    assert kept[0] <= answered[0]


def test_nobody_is_answered_while_the_store_waits_and_the_same_batch_is_tried_again(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(feeds, "AGAIN", 0.05)
    tried: list[Sequence[Chunk]] = []

    def take(chunks: Sequence[Chunk]) -> None:
        tried.append(chunks)
        if len(tried) < 4:
            raise StoreWaits("the disk is full")

    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            assert b"MSA|AA|000001" in one.recv(4096)
            assert len(tried) == 4

    served(sender, take=take)
    assert all(one is tried[0] for one in tried)


def test_a_sender_that_never_reads_its_answers_is_read_no_further() -> None:
    def sender(port: int) -> None:
        with connect(port) as one:
            one.settimeout(1.0)
            with pytest.raises(TimeoutError):
                for number in range(200_000):
                    one.sendall(numbered(number))
            sent.append(number)

    sent: list[int] = []
    found = served(sender)
    assert found.messages < sent[0] < 200_000


def test_a_sender_that_does_not_wait_is_read_no_further_while_too_much_is_unanswered() -> None:
    go_on = threading.Event()
    first: list[int] = []

    def take(chunks: Sequence[Chunk]) -> None:
        go_on.wait(20)
        first.append(sum(len(chunk.messages) for chunk in chunks))

    def sender(port: int) -> None:
        with connect(port) as one:
            sending = threading.Thread(target=one.sendall, args=(b"".join(map(numbered, range(2_000))),))
            sending.start()
            time.sleep(0.5)
            go_on.set()
            answers = b""
            while answers.count(b"\x1c\r") < 2_000:
                answers += one.recv(65_536)
            sending.join()

    served(sender, take=take)
    assert sum(first) == 2_000
    # What one read may bring beyond the bound: 256 KiB.
    assert max(first) <= MOST_UNANSWERED + 2**18 // len(numbered(1))


def test_a_peer_that_is_not_named_is_turned_away_and_told() -> None:
    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            with contextlib.suppress(ConnectionResetError):
                assert one.recv(4096) == b""

    found = served(sender, FeedSettings(peers=("192.0.2.0/24",)))
    assert found.messages == 0
    assert found.told == ["mllp://x, 127.0.0.1: not among feed.peers in lab.toml, turned away"]


@pytest.mark.parametrize("peers", [("127.0.0.1",), ("192.0.2.1", "127.0.0.0/8")])
def test_a_peer_that_is_named_may_send(peers: tuple[str, ...]) -> None:
    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            assert b"MSA|AA|" in one.recv(4096)

    assert served(sender, FeedSettings(peers=peers)).messages == 1


def test_connections_are_limited() -> None:
    def sender(port: int) -> None:
        with connect(port) as one, connect(port) as two:
            for other in (one, two):
                other.sendall(numbered(1))
                assert b"MSA|AA|" in other.recv(4096)
            with connect(port) as three, contextlib.suppress(ConnectionResetError):
                assert three.recv(4096) == b""
            one.sendall(numbered(2))
            assert b"MSA|AA|" in one.recv(4096)

    found = served(sender, FeedSettings(connections=2))
    assert found.told == ["mllp://x, 127.0.0.1: more connections than feed.connections in lab.toml, turned away"]


def test_a_connection_on_which_nothing_comes_is_closed(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(feeds_mllp, "_LOOK", 0.05)

    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            assert b"MSA|AA|" in one.recv(4096)
            assert one.recv(4096) == b""

    found = served(sender, FeedSettings(idle_minutes=0.3 / 60))
    assert "silent for too long" in found.told[0]


def test_a_message_whose_rest_does_not_come_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(feeds_mllp, "_LOOK", 0.05)
    monkeypatch.setattr(feeds_mllp, "UNFINISHED_SECONDS", 0.2)

    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1)[:-30])
            assert one.recv(4096) == b""

    found = served(sender)
    assert "the rest of a message did not come" in found.told[0]
    assert found.messages == 0


def test_a_signal_takes_in_nothing_more_and_answers_what_was_taken() -> None:
    def take(chunks: Sequence[Chunk]) -> None:
        os.kill(os.getpid(), signal.SIGTERM)
        time.sleep(0.3)

    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            assert b"MSA|AA|000001" in one.recv(4096)
            assert one.recv(4096) == b""

    served(sender, take=take)


def test_an_address_beyond_this_computer_needs_named_peers() -> None:
    with pytest.raises(InputError, match="can be reached from other computers"):
        listen("mllp://0.0.0.0:0", FeedSettings())
    listen("mllp://0.0.0.0:0", FeedSettings(peers=("10.0.0.0/8",))).close()
    listen("mllps://0.0.0.0:0", FeedSettings()).close()


@pytest.mark.parametrize(
    ("address", "told"),
    [
        ("mllp://[::1", "is no address"),
        ("mllp://127.0.0.1:port", "is no address"),
        ("mllp://somebody@127.0.0.1:2575", "is no address"),
        ("mllp://127.0.0.1:2575/path", "is no address"),
        ("mllp://127.0.0.1", "is no address"),
        ("mllp://a..b:2575", "Nothing can listen at"),
        ("mllp://nowhere.invalid:2575", "Nothing can listen at"),
    ],
)
def test_what_is_no_address_is_told(address: str, told: str) -> None:
    with pytest.raises(InputError, match=told):
        listen(address, FeedSettings())


def test_without_a_host_only_this_computer_can_reach_it() -> None:
    with listen("mllp://:0", FeedSettings()) as one:
        assert one.getsockname()[0] == "127.0.0.1"
    with listen("mllp://localhost:0", FeedSettings()) as one:
        assert one.getsockname()[0] == "127.0.0.1"


# Certificates


@pytest.fixture(scope="module")
def certificates(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A certificate of the watch; an authority, a sender that it vouches for, and a stranger."""
    if not shutil.which("openssl"):
        pytest.skip("openssl is needed to make certificates")
    folder = tmp_path_factory.mktemp("certificates")
    new = ["openssl", "req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:P-256", "-nodes", "-days", "2"]

    def make(name: str, *more: str) -> None:
        files = ["-keyout", f"{name}.key", "-out", f"{name}.crt", "-subj", f"/CN={name}"]
        subprocess.run([*new, *files, *more], cwd=folder, check=True, capture_output=True)

    make("watch", "-addext", "subjectAltName=IP:127.0.0.1")
    make("authority")
    make("stranger")
    make("sender", "-CA", "authority.crt", "-CAkey", "authority.key")
    return folder


SECURE = FeedSettings(certificate="watch.crt", key="watch.key", clients="authority.crt")


def client(folder: Path, name: str = "") -> ssl.SSLContext:
    context = ssl.create_default_context(cafile=str(folder / "watch.crt"))
    if name:
        context.load_cert_chain(folder / f"{name}.crt", folder / f"{name}.key")
    return context


def test_a_sender_that_an_authority_vouches_for_may_send(certificates: Path) -> None:
    def sender(port: int) -> None:
        with client(certificates, "sender").wrap_socket(connect(port), server_hostname="127.0.0.1") as one:
            assert one.version() in ("TLSv1.2", "TLSv1.3")
            one.sendall(numbered(1))
            assert b"MSA|AA|000001" in one.recv(4096)

    assert served(sender, SECURE, tls=server_context(SECURE, certificates)).messages == 1


@pytest.mark.parametrize("name", ["", "stranger"])
def test_a_sender_that_nobody_vouches_for_may_not(certificates: Path, name: str) -> None:
    def sender(port: int) -> None:
        with pytest.raises((ssl.SSLError, ConnectionError)):
            talk(client(certificates, name), port)

    def talk(context: ssl.SSLContext, port: int) -> None:
        with context.wrap_socket(connect(port), server_hostname="127.0.0.1") as one:
            one.sendall(numbered(1))
            if one.recv(4096) == b"":
                raise ConnectionError

    assert served(sender, SECURE, tls=server_context(SECURE, certificates)).messages == 0


def test_a_sender_that_does_not_speak_tls_may_not(certificates: Path) -> None:
    def sender(port: int) -> None:
        with connect(port) as one:
            one.sendall(numbered(1))
            with contextlib.suppress(ConnectionResetError):
                assert b"MSA" not in one.recv(4096)

    assert served(sender, SECURE, tls=server_context(SECURE, certificates)).messages == 0


@pytest.mark.parametrize(
    ("given", "told"),
    [
        ({}, "needs certificate, key and clients"),
        ({"certificate": "none.crt", "key": "watch.key", "clients": "authority.crt"}, "There is no file"),
        (
            {"certificate": "watch.crt", "key": "stranger.key", "clients": "authority.crt"},
            "are no certificate and its key",
        ),
        ({"certificate": "watch.crt", "key": "watch.key", "clients": "watch.key"}, "holds no certificates"),
    ],
    ids=["none", "missing", "another key", "no certificates"],
)
def test_certificates_that_do_not_fit_are_told(certificates: Path, given: dict[str, Any], told: str) -> None:
    with pytest.raises(InputError, match=told):
        server_context(FeedSettings(**given), certificates)
