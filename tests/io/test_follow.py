"""A growing file: whole lines, a position to go on from, rotation and truncation."""

import random
from pathlib import Path

import pytest

from pbm.errors import InputError
from pbm.io.follow import MOST_LINES, FollowedFile
from pbm.records.reading import Chunk, Reading, SetAside
from pbm.records.result import Result
from tests.live_laboratory import CSV_HEADER, csv_lines, laboratory, results

COLUMNS = laboratory().extract


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "live.csv"


def lines(count: int, first: int = 0) -> str:
    return "".join(f"{line}\n" for line in csv_lines(results([140 + n % 5 for n in range(count)], first=first + 1)))


def rows(count: int, first: int = 0) -> list[str]:
    """Specimens of `lines`."""
    return [one.specimen for one in results([0] * count, first=first + 1)]


def drain(file: FollowedFile) -> list[Chunk]:
    chunks = []
    while chunk := file.read():
        chunks.append(chunk)
    return chunks


def specimens(chunks: list[Chunk]) -> list[str]:
    return [item.specimen for chunk in chunks for item in chunk.items if isinstance(item, Reading)]


def append(path: Path, text: str) -> None:
    with path.open("a") as file:
        file.write(text)


def test_lines_are_read_once_as_they_come(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(3)}")
    file = FollowedFile(path, COLUMNS)
    assert specimens(drain(file)) == rows(3)
    assert file.read() is None
    append(path, lines(2, 3))
    assert specimens(drain(file)) == rows(2, 3)


def test_a_reading_says_on_which_line_it_stands(path: Path) -> None:
    path.write_text(f"a title\n{CSV_HEADER}\n{lines(2)}\n{lines(1, 2)}")
    [above, chunk] = drain(FollowedFile(path, COLUMNS))
    assert above.items == [SetAside(1, "above the header line")]
    assert [item.place for item in chunk.items if not isinstance(item, Result)] == [3, 4, 5, 6]


def test_a_last_line_without_a_line_end_waits(path: Path) -> None:
    whole = lines(2)
    path.write_text(f"{CSV_HEADER}\n{whole[:-5]}")
    file = FollowedFile(path, COLUMNS)
    assert specimens(drain(file)) == rows(1)
    assert file.unread > 0
    append(path, whole[-5:])
    assert specimens(drain(file)) == rows(2)[1:]
    assert file.unread == 0


def test_an_empty_file_waits_for_its_header(path: Path) -> None:
    path.write_text("")
    file = FollowedFile(path, COLUMNS)
    assert file.read() is None
    append(path, CSV_HEADER)
    assert file.read() is None
    append(path, f"\n{lines(1)}")
    assert specimens(drain(file)) == rows(1)


def test_a_long_file_comes_in_pieces(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(2 * MOST_LINES + 7)}")
    chunks = drain(FollowedFile(path, COLUMNS))
    assert max(len(chunk.items) for chunk in chunks) == MOST_LINES
    assert specimens(chunks) == rows(2 * MOST_LINES + 7)


def test_after_any_chunk_the_position_goes_on_where_it_stopped(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(1200)}")
    for chunk_number in range(4):
        file = FollowedFile(path, COLUMNS)
        before = [file.read() for _ in range(chunk_number + 1)]
        taken = [one for one in before if one]
        again = FollowedFile(path, COLUMNS, taken[-1].position)
        assert specimens([*taken, *drain(again)]) == rows(1200)
        assert not again.notices


@pytest.mark.parametrize("seed", range(5))
def test_written_in_any_pieces_and_stopped_anywhere_every_line_is_read_once(path: Path, seed: int) -> None:
    chance = random.Random(seed)
    content = f"{CSV_HEADER}\n{lines(400)}"
    path.write_text("")
    position, chunks, written = "", [], 0
    while written < len(content):
        size = chance.randint(1, 3000)
        append(path, content[written : written + size])
        written += size
        file = FollowedFile(path, COLUMNS, position)
        for _ in range(chance.randint(0, 3)):
            if chunk := file.read():
                chunks.append(chunk)
                position = chunk.position
        assert not file.notices
        file.close()
    chunks += drain(FollowedFile(path, COLUMNS, position))
    assert specimens(chunks) == rows(400)


def test_a_file_cut_short_is_read_anew_as_another_edition(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(30)}")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    path.write_text(f"{CSV_HEADER}\n{lines(3, 30)}")
    [above, chunk] = drain(file)
    assert (above.edition, chunk.edition) == (2, 2)
    assert specimens([chunk]) == rows(3, 30)
    assert "no longer the file that was read up to line 31" in file.notices[0]


def test_another_file_of_the_same_length_or_more_is_noticed(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(30)}")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    path.write_text(f"{CSV_HEADER}\n{lines(40, 30)}")
    assert specimens(drain(file)) == rows(40, 30)
    assert file.notices


def test_a_renamed_file_is_read_to_its_end_before_the_new_one(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(3)}")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    append(path, lines(2, 3))
    path.rename(path.with_suffix(".old"))
    path.write_text(f"{CSV_HEADER}\n{lines(4, 10)}")
    assert specimens(drain(file)) == rows(2, 3)
    append(path.with_suffix(".old"), lines(1, 5))
    assert specimens(drain(file)) == rows(1, 5)
    assert drain(file) == []
    assert specimens(drain(file)) == rows(4, 10)


def test_a_line_without_an_end_in_a_renamed_file_is_set_aside(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(3)}20")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    path.rename(path.with_suffix(".old"))
    path.write_text(f"{CSV_HEADER}\n{lines(1, 10)}")
    found = [item for _ in range(4) for chunk in drain(file) for item in chunk.items]
    assert found[0] == SetAside(5, "line without an end")
    assert [item.specimen for item in found[1:] if isinstance(item, Reading)] == rows(1, 10)


def test_while_the_name_has_no_file_the_old_one_is_followed(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(3)}")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    path.rename(path.with_suffix(".old"))
    assert file.read() is None
    append(path.with_suffix(".old"), lines(1, 3))
    assert specimens(drain(file)) == rows(1, 3)


def test_a_file_written_anew_with_more_lines_at_its_end_goes_on(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(3)}")
    file = FollowedFile(path, COLUMNS)
    drain(file)
    whole = path.with_suffix(".new")
    whole.write_text(f"{CSV_HEADER}\n{lines(5)}")
    whole.rename(path)
    found = [specimen for _ in range(4) for specimen in specimens(drain(file))]
    assert found == rows(5)[3:]
    assert not file.notices


def test_a_row_over_several_lines_waits_for_its_end(path: Path) -> None:
    path.write_text(f'{CSV_HEADER}\n{lines(1)}2031-03-02T07:14:05Z,NA,line-1,140,mmol/L,31-9,"ED\n')
    file = FollowedFile(path, COLUMNS)
    assert specimens(drain(file)) == rows(1)
    append(path, 'bay 3",P,\n')
    [chunk] = drain(file)
    assert chunk.items == [
        Reading(3, "2031-03-02T07:14:05Z", "NA", "line-1", "140", "mmol/L", "31-9", "ED\nbay 3", "P")
    ]


def test_a_quote_that_is_never_closed_costs_its_line_only(path: Path) -> None:
    path.write_text(f'{CSV_HEADER}\n{lines(1)}2031-03-02T07:14:05Z,NA,line-1,140,mmol/L,31-9,"ED,P,\n{lines(30, 1)}')
    chunks = drain(FollowedFile(path, COLUMNS))
    assert specimens(chunks) == rows(31)
    assert [item for chunk in chunks for item in chunk.items if isinstance(item, SetAside)] == [
        SetAside(3, "quote not closed")
    ]


def test_a_line_longer_than_any_row_does_not_stop_the_feed(path: Path) -> None:
    path.write_text(f"{CSV_HEADER}\n{lines(1)}{'x' * 700_000}\n{lines(1, 1)}")
    chunks = drain(FollowedFile(path, COLUMNS))
    assert specimens(chunks) == rows(2)
    assert any(
        isinstance(item, SetAside) and item.reason == "line too long" for chunk in chunks for item in chunk.items
    )


def test_bytes_that_are_not_utf_8_are_read_as_latin_1(path: Path) -> None:
    path.write_bytes(f"{CSV_HEADER}\n".encode() + lines(1).encode().replace(b"ED", b"\xc9D"))
    [_, chunk] = drain(FollowedFile(path, COLUMNS))
    assert isinstance(reading := chunk.items[0], Reading)
    assert reading.ward == "ÉD"


def test_the_encoding_of_the_laboratory_is_kept_to(path: Path) -> None:
    path.write_bytes(f"{CSV_HEADER}\n".encode() + lines(1).encode().replace(b"ED", b"\x81D"))
    [_, chunk] = drain(FollowedFile(path, COLUMNS.model_copy(update={"encoding": "cp437"})))
    assert isinstance(reading := chunk.items[0], Reading)
    assert reading.ward == "üD"


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"a,b,c\n1,2,3\n", "has no header line"),
        (
            CSV_HEADER.replace(",result", "").encode() + b"\n",
            'lacks what lab.toml names under .extract.: value = "result"',
        ),
        (f"{CSV_HEADER}\n".encode("utf-16"), "is UTF-16, which cannot be followed"),
    ],
)
def test_a_file_that_cannot_be_used_is_told(path: Path, content: bytes, told: str) -> None:
    path.write_bytes(content)
    with pytest.raises(InputError, match=told):
        FollowedFile(path, COLUMNS).read()


def test_what_is_no_file_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be read: No such file"):
        FollowedFile(tmp_path / "nowhere.csv", COLUMNS)
    with pytest.raises(InputError, match="is not a file"):
        FollowedFile(tmp_path, COLUMNS)
