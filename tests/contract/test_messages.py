"""HL7 messages, CSV lines and NDJSON lines of the same results are read alike."""

from collections.abc import Iterable
from pathlib import Path

import pytest

from pbm.io.follow import FollowedFile
from pbm.io.hl7_message import MessageReader
from pbm.io.lab_file import read_lab
from pbm.io.mllp import Frame, Framer, framed
from pbm.io.ndjson import read_line
from pbm.records.laboratory import Lab
from pbm.records.reading import Chunk, Item
from pbm.records.result import Result
from pbm.stages.live import read_chunk
from pbm.stages.reading import Reader
from synthetic_streams import write_laboratory


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("laboratory")
    write_laboratory(made, days=1)
    return made


def in_order(items: Iterable[Item]) -> list[Result]:
    """Results in an order of their own; nothing else may be among them."""
    found = list(items)
    assert all(isinstance(one, Result) for one in found)
    return sorted(
        (one for one in found if isinstance(one, Result)), key=lambda one: (one.time, one.stream, one.specimen)
    )


def by_lines(path: Path, lab: Lab) -> list[Result]:
    file = FollowedFile(path, lab.extract)
    items: list[Item] = []
    reader = Reader(lab, lab.extract.decimal, lab.extract.time_format, kinds_given=lab.extract.kind is not None)
    while chunk := file.read():
        items += read_chunk(chunk, reader).items
    file.close()
    return in_order(items)


def by_ndjson(path: Path, lab: Lab) -> list[Result]:
    lines = path.read_bytes().splitlines()
    return in_order(read_chunk(Chunk("", 1, [read_line(1, one) for one in lines], ""), Reader(lab)).items)


def by_messages(path: Path, lab: Lab) -> list[Result]:
    reader, framer = MessageReader(lab), Framer(10_000)
    items: list[Item] = []
    content = path.read_bytes().replace(b"\rMSH|", b"\r\x1c\r\x0bMSH|")
    for event in framer.feed(framed(content)):
        assert isinstance(event, Frame)
        found = reader.read(event.content, 1, 5)
        assert found.message is not None
        items += read_chunk(Chunk("", 1, found.items, "", [found.message]), Reader(lab, patient_kinds=("P",))).items
    return in_order(items)


def test_the_live_days_of_the_invented_laboratory_are_read_alike_by_every_door(folder: Path) -> None:
    lab = read_lab(folder / "lab.toml")
    lines = by_lines(folder / "live.csv", lab)
    assert by_ndjson(folder / "live.ndjson", lab) == lines
    assert by_messages(folder / "messages.hl7", lab) == lines
    assert len(lines) > 1_000
    assert any(one.censor for one in lines) and all(one.sex and one.ward for one in lines)
    assert len({one.age for one in lines}) > 3
