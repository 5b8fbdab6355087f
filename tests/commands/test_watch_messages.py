"""`pbm watch --from mllp://...`, a process of its own: killed and restarted, cut off, sent the same again, it counts every result once."""

import contextlib
import random
import re
import socket
import sqlite3
import threading
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest
from hl7.client import MLLPClient

from pbm.io.lab_file import read_lab
from pbm.io.mllp import framed
from pbm.records.intake import ROLES
from tests.io.hl7_text import MSH, obx, oru
from tests.message_laboratory import Watch, kept, laboratory, replayed, sent, write_folder
from tests.small_disk import enlarge, small_disk

PATIENCE = 60.0  # seconds for one answer


def free_port() -> int:
    with socket.create_server(("127.0.0.1", 0)) as one:
        return int(one.getsockname()[1])


@dataclass
class Sender:
    """Another library's client that sends every message until it is answered; sometimes twice, sometimes half of it and hangs up."""

    port: int
    messages: Sequence[bytes]
    seed: int
    answered: int = 0
    again: int = 0
    cut: int = 0
    failed: list[BaseException] = field(default_factory=list)

    def run(self) -> None:
        try:
            self._send_all()
        except BaseException as error:
            self.failed.append(error)

    def _send_all(self) -> None:
        chance, client = random.Random(self.seed), None
        for one in self.messages:
            done = False
            while not done:
                try:
                    client = client or self._connect()
                    if chance.random() < 0.02:
                        self._hang_up_half_way(client, one, chance)
                        client = None
                        continue
                    done = self._is_answered(client, one)
                    if done and chance.random() < 0.05:
                        self.again += self._is_answered(client, one)
                except OSError:
                    done = False
                if not done and client:
                    client.close()
                    client = None
            self.answered += 1
        if client:
            client.close()

    def _connect(self) -> MLLPClient:
        until = time.monotonic() + PATIENCE
        while True:
            try:
                client = MLLPClient("127.0.0.1", self.port)
                client.socket.settimeout(PATIENCE)
                return client
            except ConnectionRefusedError:
                assert time.monotonic() < until, "the watch did not come back"
                time.sleep(0.05)

    def _hang_up_half_way(self, client: MLLPClient, one: bytes, chance: random.Random) -> None:
        whole = framed(one)
        client.socket.sendall(whole[: chance.randrange(1, len(whole))])
        client.close()
        self.cut += 1

    def _is_answered(self, client: MLLPClient, one: bytes) -> bool:
        """Whether the message was taken; False if the connection ended before an answer."""
        answer = client.send_message(one)
        if not answer:
            return False
        number = one.split(b"|")[9]
        assert answer.startswith(b"\x0bMSH|") and b"\rMSA|AA|" + number + b"\r" in answer, answer
        return True


def through_kills(folder: Path, by_analyser: dict[str, list[bytes]], kills: int, seed: int) -> list[Sender]:
    """Send messages, one sender an analyser, while the watch is killed so often and started again."""
    chance, port = random.Random(seed), free_port()
    senders = [Sender(port, one, seed + n) for n, one in enumerate(by_analyser.values())]
    total = sum(map(len, by_analyser.values()))
    watch = Watch(folder, f"mllp://127.0.0.1:{port}")
    threads = [threading.Thread(target=one.run, daemon=True) for one in senders]
    for thread in threads:
        thread.start()
    for at in sorted(chance.sample(range(1, total - 1), kills)):
        while sum(one.answered for one in senders) < at and any(thread.is_alive() for thread in threads):
            time.sleep(0.002)
        watch.kill()
        watch = Watch(folder, f"mllp://127.0.0.1:{port}")
    for thread in threads:
        thread.join()
    watch.stop()
    return senders


def check_exactly_once(place: Path, results: int, kills: int, seed: int) -> None:
    made, samples = laboratory(results)
    given = sent(made, samples)
    assert len(given.ndjson) >= results
    live, plain = write_folder(place / "live", samples), write_folder(place / "plain", samples)
    senders = through_kills(live, given.by_analyser, kills, seed)
    replayed(plain, given.ndjson)
    assert [one.failed for one in senders] == [[]] * len(senders)
    assert [one.answered for one in senders] == list(map(len, given.by_analyser.values()))
    assert sum(one.again for one in senders) > 0 and sum(one.cut for one in senders) > 0
    by_messages, by_replay = kept(live), kept(plain)
    assert by_messages == by_replay
    assert len(by_messages["results"]) == len(given.ndjson)
    assert by_messages["alarms"]
    assert count(live, "messages") == sum(map(len, given.by_analyser.values()))


def count(folder: Path, table: str) -> int:
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        return int(connection.execute(f"select count(*) from {table}").fetchone()[0])


@pytest.mark.slow
def test_killed_cut_off_and_sent_twice_it_counts_every_result_once(tmp_path: Path) -> None:
    check_exactly_once(tmp_path, results=1_000, kills=3, seed=1)


@pytest.mark.full
@pytest.mark.timeout(3600)
def test_a_hundred_thousand_results_and_twenty_kills(tmp_path: Path) -> None:
    check_exactly_once(tmp_path, results=100_000, kills=20, seed=2)


# One watch for several questions


@contextlib.contextmanager
def watching(folder: Path, *more: str, feed: str = "") -> Iterator[tuple[Watch, MLLPClient]]:
    """A watch and a client of it."""
    write_folder(folder, [], feed)
    watch = Watch(folder, "mllp://127.0.0.1:0", *more)
    try:
        with MLLPClient("127.0.0.1", watch.port()) as client:
            client.socket.settimeout(PATIENCE)
            yield watch, client
    finally:
        if watch.process.poll() is None:
            watch.kill()


@dataclass(frozen=True)
class Open:
    """A watch that runs while the tests of this file are run; each test has specimens of its own."""

    folder: Path
    watch: Watch
    port: int

    def client(self) -> MLLPClient:
        client = MLLPClient("127.0.0.1", self.port)
        client.socket.settimeout(PATIENCE)
        return client

    def ask(self, question: str, *given: str) -> list[tuple[Any, ...]]:
        with contextlib.closing(sqlite3.connect(self.folder / "watch.sqlite")) as connection:
            return connection.execute(question, given).fetchall()

    def results(self, specimen: str) -> list[tuple[float, str]]:
        """Values of specimens whose number begins so, and why they do not count."""
        return self.ask("select value, left_out from results where specimen like ? || '%' order by seq", specimen)

    def tally(self, reason: str) -> int:
        return sum(count for (count,) in self.ask("select count from tallies where reason = ?", reason))


@pytest.fixture(scope="module")
def running(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Open]:
    folder = tmp_path_factory.mktemp("running")
    with watching(folder, feed="largest_message = 5000") as (watch, client):
        yield Open(folder, watch, int(client.socket.getpeername()[1]))
        watch.stop()


def code(answer: bytes) -> str:
    found = re.search(rb"\rMSA\|(\w\w)\|", answer)
    return found[1].decode() if found else ""


def of(specimen: str, content: bytes, number: str = "") -> bytes:
    """The message with another specimen and another number."""
    return content.replace(b"31-000123", specimen.encode()).replace(b"000001", (number or specimen).encode())


def test_the_same_message_again_is_answered_again_and_counted_once(running: Open) -> None:
    with running.client() as client:
        before = running.tally("message sent again")
        assert [code(client.send_message(of("twice", oru()))) for _ in range(3)] == ["AA"] * 3
        assert running.tally("message sent again") == before + 2
        other = of("twice", oru(obx("139"))).replace(b"SPM|1|twice", b"SPM|1|twice-other")
        assert code(client.send_message(other)) == "AA"
    assert running.results("twice") == [(138.0, ""), (139.0, "")]
    running.watch.wait_for(r"a control id met before, with other content: taken as a new message \(twice\)")


def test_a_preliminary_result_and_its_final_count_once_and_a_correction_rewrites_nothing(running: Open) -> None:
    with running.client() as client:
        for n, one in enumerate((obx(status="P"), obx(), obx("141", status="C"), obx('""', status="D"))):
            assert code(client.send_message(of("words", oru(one), f"words-{n}"))) == "AA"
    assert running.results("words") == [(138.0, "")]
    words = running.ask("select status, value from annotations where specimen = 'words' order by id")
    assert words == [("C", "141"), ("D", "")]
    running.watch.wait_for("later word on a result .OBX-11 C")


def test_controls_are_counted_and_kept_apart(running: Open) -> None:
    before = running.tally("not a patient result")
    with running.client() as client:
        assert code(client.send_message(of("control", oru(spm="SPM|1|31-000123||SER|||||||Q")))) == "AA"
    assert running.tally("not a patient result") == before + 1
    assert running.results("control") == []


def test_messages_that_are_no_results_of_patients_are_refused_and_the_connection_goes_on(running: Open) -> None:
    with running.client() as client:
        assert code(client.send_message(of("refused", oru(msh=MSH.replace("|P|", "|T|"))))) == "AR"
        assert code(client.send_message(of("refused", oru(msh=MSH.replace("ORU^R01", "ADT^A01"))))) == "AR"
        assert code(client.send_message(b"nonsense \xff")) == "AR"
        assert code(client.send_message(of("refused", oru(msh=MSH.replace("000001", ""))))) == "AE"
        assert code(client.send_message(of("refused", oru(obx("9" * 6000))))) == "AE"
        assert code(client.send_message(of("refused", oru()))) == "AA"
        client.socket.sendall(b"\r\n stray \x0bhalf a message")
        assert code(client.send_message(of("refused", oru()))) == "AA"
    running.watch.wait_for("bytes outside any message")
    running.watch.wait_for("broken off")
    [(refused,)] = running.ask("select count(*) from set_aside where reason like 'message refused%'")
    assert refused == 5
    assert running.results("refused") == [(138.0, "")]


def test_enhanced_mode_gets_both_answers_once_the_results_are_kept(running: Open) -> None:
    with running.client() as client:
        answers = b""
        client.socket.sendall(framed(of("enhanced", oru(msh=f"{MSH}|||AL|AL"))))
        while answers.count(b"\x1c\r") < 2:
            answers += client.socket.recv(4096)
    assert re.findall(rb"MSA\|(\w\w)\|", answers) == [b"CA", b"AA"]
    assert running.results("enhanced") == [(138.0, "")]


def test_a_sender_that_does_not_wait_gets_every_answer_in_order(running: Open) -> None:
    numbers = [f"pipe-{n:06d}" for n in range(400)]
    every = b"".join(framed(of(one, oru())) for one in numbers)
    with running.client() as client:
        threading.Thread(target=client.socket.sendall, args=(every,), daemon=True).start()
        answers = b""
        while answers.count(b"\x1c\r") < len(numbers):
            part = client.socket.recv(65_536)
            assert part, answers
            answers += part
    assert [one.decode() for one in re.findall(rb"MSA\|AA\|([^\r]+)\r", answers)] == numbers
    assert len(running.results("pipe-")) == len(numbers)


def test_a_sender_that_ends_its_side_still_gets_its_answers(running: Open) -> None:
    with running.client() as client:
        client.socket.sendall(framed(of("ended", oru())))
        client.socket.shutdown(socket.SHUT_WR)
        answer = b""
        while part := client.socket.recv(4096):
            answer += part
    assert code(answer) == "AA"


def test_by_default_only_this_computer_can_reach_it(running: Open) -> None:
    # 127.0.0.1, its bytes in the order of the machine
    assert listening(running.watch.process.pid) == {("0100007F", running.port)}


def listening(pid: int) -> set[tuple[str, int]]:
    """Addresses and ports at which a process listens, as `ss -ltn` shows them (from /proc)."""
    own = set()
    for handle in Path(f"/proc/{pid}/fd").iterdir():
        with contextlib.suppress(OSError):
            own.add(str(handle.readlink()))
    found = set()
    for table in ("tcp", "tcp6"):
        for line in Path(f"/proc/{pid}/net/{table}").read_text().splitlines()[1:]:
            fields = line.split()
            if fields[3] == "0A" and f"socket:[{fields[9]}]" in own:
                address, port = fields[1].split(":")
                found.add((address, int(port, 16)))
    return found


def test_the_message_of_the_guide_is_taken(running: Open) -> None:
    guide = (Path(__file__).parents[2] / "docs" / "guide" / "messages.md").read_text(encoding="utf-8")
    shown = re.findall(r"^    ((?:MSH|PID|PV1|OBR|OBX|SPM)\|.*)$", guide, re.MULTILINE)
    [specimen] = [one.split("|")[2] for one in shown if one.startswith("SPM")]
    with running.client() as client:
        assert code(client.send_message("\r".join(shown) + "\r")) == "AA"
    assert len(running.results(specimen)) == sum(one.startswith("OBX") for one in shown) > 0


SECRETS = ("DOE", "JANE", "19601231", "1960-12-31", "a1b2c3", "SOME STREET", "555-0199", "KIN")


def test_nothing_about_a_person_is_found_in_any_file_and_no_message_counts_twice_after_a_restart(
    tmp_path: Path,
) -> None:
    pid = "PID|1|a1b2c3|a1b2c3^^^TBDL^PI||DOE^JANE||19601231|F|||SOME STREET 1||555-0199\rNK1|1|KIN^JOHN"
    words = [
        obx(),
        obx("DOE JANE 555-0199", "TX"),
        obx("JANE", "ST"),
        obx("see DOE 19601231", "ST"),
        obx("DOE", "ST", test="GPNAME^Practitioner^L"),
        obx("JANE", "ST", status="C"),
        obx("141", status="C"),
        "NTE|1||JANE DOE was called",
    ]
    given = [
        of("person-1", oru(*words, pid=pid)),
        of("person-2", oru(*words, pid=pid, msh=MSH.replace("|P|", "|T|"))),
        of("person-3", oru(obx(test="NOBODY"), pid=pid, spm="SPM|1|31-9||SER|||||||Q")),
        of("person-4", oru(obx("DOE", "ST", test="NOBODY"), pid=pid)),
    ]
    told = ""
    for _ in range(2):
        with watching(tmp_path) as (watch, client):
            assert [code(client.send_message(one)) for one in given] == ["AA", "AR", "AA", "AA"]
            told += watch.stop() + watch.told
    files = [path for path in tmp_path.rglob("*") if path.is_file() and path.name not in ("lab.toml", "plan.toml")]
    assert (tmp_path / "watch.sqlite") in files
    assert (count(tmp_path, "results"), count(tmp_path, "messages"), count(tmp_path, "annotations")) == (1, 3, 2)
    for secret in SECRETS:
        assert secret not in told
        assert not [path for path in files if secret.encode() in path.read_bytes()], secret


def test_messages_and_a_file_are_watched_at_once(tmp_path: Path) -> None:
    other = tmp_path / "other.csv"
    columns = read_lab(write_folder(tmp_path, []) / "lab.toml").extract.model_dump()
    row = {
        "time": "2031-03-02T07:15:00+00:00",
        "analyte": "NA",
        "analyser": "line-1",
        "value": "140",
        "unit": "mmol/L",
        "specimen": "31-2",
        "kind": "P",
    }
    roles = [role for role in ROLES if columns[role]]
    header = ",".join(str(columns[role]) for role in roles)
    other.write_text(f"{header}\n{','.join(row.get(role, '') for role in roles)}\n")
    with watching(tmp_path, str(other)) as (watch, client):
        assert code(client.send_message(oru())) == "AA"
        until = time.monotonic() + PATIENCE
        while count(tmp_path, "results") < 2 and time.monotonic() < until:
            time.sleep(0.05)
        watch.stop()
    with sqlite3.connect(tmp_path / "watch.sqlite") as connection:
        found = connection.execute("select specimen from results order by specimen").fetchall()
    assert found == [("31-000123",), ("31-2",)]


# When it cannot keep, or cannot listen


@pytest.mark.slow
def test_on_a_full_disk_nobody_is_answered_and_with_room_again_nothing_is_lost(tmp_path: Path) -> None:
    with small_disk(tmp_path, "3M"), watching(tmp_path) as (watch, client):
        (tmp_path / "fills").write_bytes(b"x" * 1_200_000)
        client.socket.settimeout(1.0)
        answered, n = 0, 0
        with pytest.raises(TimeoutError):
            for n in range(20_000):
                assert (
                    code(
                        client.send_message(
                            oru(*[obx()] * 20, spm=f"SPM|1|31-{n}||SER").replace(b"000001", b"%06d" % n)
                        )
                    )
                    == "AA"
                )
                answered += 1
        watch.wait_for("is full. Free some space.")
        assert 0 < answered == n
        enlarge(tmp_path, "30M")
        client.socket.settimeout(PATIENCE)
        assert code(client.socket.recv(4096)) == "AA", "what was not answered is answered when it is kept"
        watch.wait_for("takes results again; nothing was lost")
        assert code(client.send_message(oru(spm=f"SPM|1|31-{n}||SER").replace(b"000001", b"999999"))) == "AA"
        watch.stop()
        assert count(tmp_path, "results") == answered + 1
        assert count(tmp_path, "messages") == answered + 2


@pytest.mark.slow
def test_while_another_program_locks_the_store_nobody_is_answered(tmp_path: Path) -> None:
    with watching(tmp_path) as (watch, client):
        assert code(client.send_message(oru())) == "AA"
        other = sqlite3.connect(tmp_path / "watch.sqlite", isolation_level=None)
        other.execute("begin immediate")
        client.socket.settimeout(0.5)
        with pytest.raises(TimeoutError):
            client.send_message(oru().replace(b"000001", b"000002").replace(b"31-000123", b"31-000124"))
        watch.wait_for("locked by another program")
        other.execute("rollback")
        other.close()
        client.socket.settimeout(PATIENCE)
        assert code(client.socket.recv(4096)) == "AA"
        watch.stop()
    assert count(tmp_path, "results") == 2


@pytest.mark.parametrize(
    ("source", "feed", "told"),
    [
        ("mllp://0.0.0.0:2575", "", "can be reached from other computers"),
        ("mllp://127.0.0.1", "", "is no address to listen at"),
        ("mllp://127.0.0.1:99999", "", "is no address to listen at"),
        ("mllp://203.0.113.1:2575", 'peers = ["10.0.0.0/8"]', "Nothing can listen at"),
        ("mllps://127.0.0.1:0", "", "mllps:// needs certificate, key and clients"),
    ],
)
def test_an_address_that_cannot_be_used_is_told_in_one_paragraph(
    tmp_path: Path, source: str, feed: str, told: str
) -> None:
    write_folder(tmp_path, [], feed)
    watch = Watch(tmp_path, source)
    assert watch.process.wait(PATIENCE) == 2
    watch.kill()
    assert told in watch.told and "Traceback" not in watch.told


def test_a_port_in_use_is_told(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        write_folder(tmp_path, [])
        watch = Watch(tmp_path, f"mllp://127.0.0.1:{taken.getsockname()[1]}")
        assert watch.process.wait(PATIENCE) == 2
        watch.kill()
    assert "Another program may use the port" in watch.told
