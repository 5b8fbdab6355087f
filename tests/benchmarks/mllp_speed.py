"""How fast `pbm watch` takes HL7 messages over MLLP, every one answered after it is on the disk. Run by hand: it prints figures.

    python -m tests.benchmarks.mllp_speed [SECONDS]

Eight senders with ten results a message; one sender that waits for each answer, with ten results and with one; and from the first byte of a
message to its alarm line at 500 results a second. Beside them the time that the disk takes for one write that lasts: no sender who waits
for an answer can be served faster.
"""

import json
import os
import socket
import statistics
import sys
import tempfile
import threading
import time
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from itertools import islice
from pathlib import Path

import numpy as np

from pbm.io.plan_file import write_plan
from pbm.records.plan import ControlLimits, MonitorPlan, Plan, StreamPlan
from synthetic_streams.analytes import BY_KEY, CHEMISTRY, Analyte
from synthetic_streams.lab_file import lab_toml
from tests.message_laboratory import MADE, Watch

END = b"\x1c\r"
TESTS = (*(one for one in BY_KEY.values() if one.lines == CHEMISTRY), BY_KEY["haemoglobin"])
MESSAGES = 4_000  # built beforehand for each sender
PACE = 50  # messages a second of ten results


def main(seconds: float) -> None:
    """Measure and print."""
    with tempfile.TemporaryDirectory(dir=Path.cwd()) as place:
        say(f"a write that lasts: {fsync_seconds(Path(place)) * 1e6:,.0f} us in the median")
        for name, senders, results in (
            ("8 senders, 10 results a message", 8, 10),
            ("1 sender, 10 results a message", 1, 10),
            ("1 sender, 1 result a message", 1, 1),
        ):
            say(f"{name}: {throughput(Path(place) / name.replace(' ', '-'), senders, results, seconds)}")
        say(f"500 results a second: {latency(Path(place) / 'latency', seconds)}")


def say(text: str) -> None:
    sys.stdout.write(text + "\n")
    sys.stdout.flush()


def fsync_seconds(folder: Path) -> float:
    """Median time of a small write with fdatasync."""
    taken = []
    with (folder / "probe").open("wb") as file:
        for _ in range(200):
            file.write(b"x" * 16_384)
            file.flush()
            begun = time.perf_counter()
            os.fdatasync(file.fileno())
            taken.append(time.perf_counter() - begun)
    return statistics.median(taken)


def message(number: int, sender: int, tests: tuple[Analyte, ...], time_us: int, high: bool = False) -> bytes:
    """One specimen's results; `high` ones are four analytic ranges too high."""
    stamp = datetime.fromtimestamp(time_us / 1e6, UTC).strftime("%Y%m%d%H%M%S+0000")
    line = CHEMISTRY[sender % 2]
    specimen = f"31-{sender}-{number:07d}"
    noise = np.random.default_rng(number).normal(size=len(tests))
    segments = [
        f"MSH|^~\\&|SENDER-{sender}|TBDL|PBM|TBDL|{stamp}||ORU^R01^ORU_R01|{number:08d}|P|2.5.1||||||UNICODE UTF-8",
        "PID|1||a1b2c3^^^TBDL^PI||^^^^^^S||19600102|F",
        "PV1|1|I|MED",
        f"OBR|1||{specimen}-{line}^TBDL|CHEM^Chemistry panel^L|||{stamp}|||||||||||||||{stamp}|||F",
    ]
    for place, (one, z) in enumerate(zip(tests, noise, strict=True), start=1):
        value = sum(one.levels) / 2 + z * float(one.sd(np.array(one.levels[0]))) + 1000 * high
        analyser = line if line in one.lines else one.lines[0]
        code = f"{one.loinc}^{one.title}^LN^{one.code}^{one.title}^L"
        segments.append(
            f"OBX|{place}|NM|{code}||{value:.{one.decimals}f}|{one.unit}|||||F|||{stamp}||||{analyser}^TBDL|{stamp}"
        )
    segments.append(f"SPM|1|{specimen}||SER^Serum^HL70487|||||||P^Patient^HL70369||||||{stamp}")
    return ("\r".join(segments) + "\r").encode()


def framed(content: bytes) -> bytes:
    return b"\x0b" + content + END


def write_folder(folder: Path, weight: float, half_width: float) -> Path:
    """A folder whose plan watches every stream that the messages fill."""
    folder.mkdir()
    (folder / "lab.toml").write_text(lab_toml(), encoding="utf-8")
    streams = {}
    for one in TESTS:
        for line in one.lines:
            centre = sum(one.levels) / 2
            limits = ControlLimits(low=centre - half_width, high=centre + half_width)
            monitor = MonitorPlan(
                statistic="ewma", weight=weight, centre=centre, limits=limits, budget_per_day=0.03, spread=1.0
            )
            streams[f"{one.key}@{line}"] = StreamPlan(
                unit=one.unit, verdict="useful", reason="to measure", results_per_day=100, monitors=(monitor,)
            )
    write_plan(folder / "plan.toml", Plan(made=MADE, streams=streams))
    return folder


@dataclass
class Sender:
    """Sends messages one after the other, each when the one before is answered."""

    port: int
    messages: list[bytes]
    until: float = 0.0
    answered: int = 0

    def run(self) -> None:
        with socket.create_connection(("127.0.0.1", self.port)) as connection:
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            for one in self.messages:
                if time.perf_counter() > self.until:
                    return
                connection.sendall(one)
                answer = b""
                while not answer.endswith(END):
                    answer += connection.recv(65_536)
                if b"MSA|AA|" not in answer:
                    raise AssertionError(answer)
                self.answered += 1


def throughput(folder: Path, count: int, results: int, seconds: float) -> str:
    """Messages answered in so many seconds."""
    watch = Watch(write_folder(folder, 0.05, 1e6), "mllp://127.0.0.1:0")
    start = 1_930_000_000_000_000
    every = [
        [framed(message(n, sender, TESTS[:results], start + n * 1_000_000)) for n in range(MESSAGES)]
        for sender in range(count)
    ]
    senders = [Sender(watch.port(), given) for given in every]
    begun, used = time.perf_counter(), processor(watch.process.pid)
    for one in senders:
        one.until = begun + seconds
    threads = [threading.Thread(target=one.run) for one in senders]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    elapsed, work = time.perf_counter() - begun, processor(watch.process.pid) - used
    watch.stop()
    answered = sum(one.answered for one in senders)
    size = (folder / "watch.sqlite").stat().st_size / (answered * results)
    return (
        f"{answered / elapsed:,.0f} messages, {answered * results / elapsed:,.0f} results a second; "
        f"{answered / work:,.0f} messages, {answered * results / work:,.0f} results a second of a processor; "
        f"{size:.0f} bytes a result in the store"
    )


def processor(pid: int) -> float:
    """Seconds of a processor that a process has used."""
    fields = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def latency(folder: Path, seconds: float) -> str:
    """From the first byte of a message to the alarm line that it raises; every tenth message raises some."""
    watch = Watch(write_folder(folder, 0.9, 100.0), "mllp://127.0.0.1:0", json=True)
    connection = socket.create_connection(("127.0.0.1", watch.port()))
    sent: dict[str, float] = {}
    seen: list[float] = []

    def read_lines() -> None:
        assert watch.process.stdout is not None
        for line in watch.process.stdout:
            seen.append(time.perf_counter() - sent[json.loads(line)["specimen"]])

    reading = threading.Thread(target=read_lines, daemon=True)
    reading.start()
    threading.Thread(target=lambda: [None for _ in iter(lambda: connection.recv(65_536), b"")], daemon=True).start()
    for n, one in islice(paced(), int(seconds * PACE)):
        sent[f"31-0-{n:07d}"] = time.perf_counter()
        connection.sendall(one)
    time.sleep(1)
    watch.process.terminate()
    watch.process.wait(30)
    reading.join(30)
    connection.close()
    p50, p99 = np.quantile(seen, [0.5, 0.99])
    return f"{len(seen)} alarm lines, {p50 * 1e3:.1f} ms in the median, {p99 * 1e3:.1f} ms in 99 of 100"


def paced() -> Iterator[tuple[int, bytes]]:
    """Messages, each when it is due."""
    begun, n = time.perf_counter(), 0
    while True:
        made = framed(message(n, 0, TESTS, 1_930_000_000_000_000 + n * 1_000_000, high=n % 10 == 9))
        time.sleep(max(0.0, begun + n / PACE - time.perf_counter()))
        yield n, made
        n += 1


if __name__ == "__main__":
    main(float(sys.argv[1]) if len(sys.argv) > 1 else 10.0)
