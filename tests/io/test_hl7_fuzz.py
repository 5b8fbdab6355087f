"""No bytes make the framer or the reader of messages fail, hang or hold more than a frame: hypothesis, and a corpus of mutated messages."""

import random
import tracemalloc
from collections.abc import Iterator

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.io.hl7_message import MessageReader
from pbm.io.mllp import Frame, Framer, framed
from pbm.records.reading import Chunk, Item
from pbm.stages.live import read_chunk
from pbm.stages.reading import Reader
from synthetic_streams import Laboratory
from synthetic_streams.analytes import STREAMS
from synthetic_streams.messages import messages
from tests.io.hl7_text import MSH, OBR, PID, PV1, SPM, message, obx, oru
from tests.live_laboratory import laboratory

LAB = laboratory()
LARGEST = 4_000
# Signs that mean something in a frame, a message, a number or a time, and some that do not.
SIGNS = [
    b"|",
    b"^",
    b"~",
    b"\\",
    b"&",
    b"\r",
    b"\n",
    b"\x0b",
    b"\x1c",
    b"\x1c\r",
    b"\0",
    b"\xff",
    b"\xc2\xb5",
    b"9",
    b"-",
    b"<",
]
SIGNS += [
    b'""',
    b"MSH",
    b"OBX|",
    b"\rSPM|",
    b"\rPID|",
    b"\rOBR|",
    b"\\X",
    b"\\S\\",
    b"1e999",
    b"20310302",
    b"\xef\xbb\xbf",
    b" ",
]
WHOLE = [
    oru(),
    oru(
        obx("<^5", "SN"),
        obx("138~139"),
        obx("HEM", "ST", flags="<~QCF"),
        obx("1", status="C"),
        msh=f"{MSH}|||AL|AL||8859/1",
    ),
    message(
        SPM, "SAC|||C-1", OBR, obx(analyser=""), "PRT||||||||||line-1", "DEV||x", msh=MSH.replace("ORU^R01", "OUL^R22")
    ),
    message(PID, PV1, OBR, obx(time=""), msh=MSH.replace("2.5.1", "2.3")),
]


def read(content: bytes) -> list[Item]:
    """All the way to results, as the watch does."""
    found = MessageReader(LAB).read(content, 1, 5)
    for answer in found.answers:
        assert answer.endswith(b"\r") and b"\x0b" not in answer and b"\x1c" not in answer
        assert b"\rMSA|" in answer or b"|" not in answer[3:4]
    messages_ = [found.message] if found.message else []
    return list(
        read_chunk(Chunk("x", 1, found.items, "", messages_), Reader(LAB, patient_kinds=("P",), patient_key=b"k")).items
    )


@st.composite
def mutated(draw: st.DrawFn) -> bytes:
    """A message in which pieces were cut out, doubled, or replaced by signs."""
    content = draw(st.sampled_from(WHOLE))
    for _ in range(draw(st.integers(1, 8))):
        begin = draw(st.integers(0, len(content)))
        end = draw(st.integers(begin, min(len(content), begin + 40)))
        put = draw(
            st.one_of(st.just(b""), st.sampled_from(SIGNS), st.just(content[begin:end] * 2), st.binary(max_size=3))
        )
        content = content[:begin] + put + content[end:]
    return content


@given(mutated())
def test_a_mutated_message_is_read_or_refused(content: bytes) -> None:
    read(content)


@given(st.binary(max_size=300))
def test_any_bytes_are_refused(content: bytes) -> None:
    read(content)


@given(st.text(alphabet='|^~\\&\r\n"0159.-<>EFST ', max_size=300))
def test_any_text_behind_a_header_is_read(text: str) -> None:
    read(message(text))


@given(st.lists(mutated(), max_size=4), st.integers(1, 700))
def test_whole_and_byte_by_byte_give_the_same_readings(contents: list[bytes], largest: int) -> None:
    stream = b"".join(map(framed, contents))
    whole, single = Framer(largest), Framer(largest)
    by_whole = whole.feed(stream) + whole.end()
    by_byte = [event for one in stream for event in single.feed(bytes([one]))] + single.end()
    assert by_whole == by_byte
    for event in by_whole:
        if isinstance(event, Frame):
            read(event.content)


def corpus(count: int, seed: int) -> Iterator[bytes]:
    """Real messages of the invented laboratory with some bytes changed, cut out or put in; the same ones for the same seed."""
    chance = random.Random(seed)
    made = Laboratory(1, 0.05, 3)
    real = messages(made.draws, [made.sample(analyte, line) for analyte, line in STREAMS])
    for _ in range(count):
        content = bytearray(chance.choice(real))
        for _ in range(chance.randrange(1, 12)):
            place = chance.randrange(len(content))
            how = chance.randrange(4)
            if how == 0:
                content[place] ^= 1 << chance.randrange(8)
            elif how == 1:
                content[place] = chance.randrange(256)
            elif how == 2:
                del content[place : place + chance.randrange(30)]
            else:
                content[place:place] = chance.choice(SIGNS)
            content = content or bytearray(b"M")
        yield bytes(content)


def feed_corpus(count: int, seed: int) -> tuple[int, int]:
    """Feed the corpus as one connection would, in random pieces; messages met, and bytes that were held at most."""
    chance = random.Random(seed)
    framer, met, most = Framer(LARGEST), 0, 0
    for content in corpus(count, seed):
        stream = framed(content) if chance.random() < 0.9 else content
        while stream:
            size = chance.randrange(1, 2_000)
            for event in framer.feed(stream[:size]):
                if isinstance(event, Frame):
                    met += 1
                    read(event.content)
            stream = stream[size:]
            most = max(most, len(framer._held))
    return met, most


def test_a_corpus_of_mutated_messages_breaks_nothing() -> None:
    met, most = feed_corpus(1_500, 1)
    assert met > 1_000
    assert most <= LARGEST + 2


@pytest.mark.full
def test_a_large_corpus_of_mutated_messages_breaks_nothing() -> None:
    met, most = feed_corpus(200_000, 2)
    assert met > 100_000
    assert most <= LARGEST + 2


def test_a_frame_without_end_takes_no_more_memory_than_a_frame() -> None:
    framer = Framer(100_000)
    piece = b"x" * 10_000
    tracemalloc.start()
    framer.feed(b"\x0b")
    for _ in range(2_000):
        framer.feed(piece)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert peak < 400_000


def test_long_fields_that_differ_every_time_are_not_remembered() -> None:
    reader, law = MessageReader(LAB), Reader(LAB, patient_kinds=("P",), patient_key=b"k")

    def take(first: int, last: int) -> None:
        for number in range(first, last):
            long = f"{number}" + "9" * 20_000
            pid = f"PID|1||{long}||||19600101|{long}"
            given = oru(obx(test=long), obx(long), obx(unit=long), obx(analyser=long), obx(flags=long), pid=pid)
            content = given.replace(b"|ED", b"|" + long.encode())
            found = reader.read(content, number, 5)
            assert found.message
            read_chunk(Chunk("x", 1, found.items, "", [found.message]), law)

    take(0, 20)
    tracemalloc.start()
    take(20, 320)
    held, _ = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert held < 3_000_000
