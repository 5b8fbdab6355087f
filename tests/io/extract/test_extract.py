"""Extracts are read with an exact account, whatever their delimiter, encoding and mishaps; what cannot be read is told in one paragraph."""

import csv
import gzip
import io
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from pbm.errors import InputError
from pbm.io.extract import decoding, delimited, extract_fingerprint, open_extract
from pbm.io.extract.by_line import Lines, read_by_line
from pbm.records.laboratory import Extract

COLUMNS = Extract(time="when", analyte="test", value="result", ward="location")
HEADER = "when,test,result,location,comment"
ROWS = ["t1,NA,138,ED,", "t2,K,4.1,,fine", "t3,NA,<5,MED,"]


def read(
    path: Path, columns: Extract = COLUMNS
) -> tuple[list[tuple[int, str, str, str, str]], list[tuple[int, str, str]], list[str]]:
    """Rows (line, time, analyte, value, ward), lines left out (line, reason, found), guesses."""
    extract = open_extract(path, "name", columns)
    rows, left = [], []
    for block in extract.blocks():
        texts = [block.columns[role].to_pylist() for role in ("time", "analyte", "value", "ward")]
        rows += list(zip(block.line.tolist(), *texts, strict=True))
        left += [(row["line"], row["reason"], row["found"]) for row in block.left_out.to_pylist()]
    return rows, left, list(extract.guesses)


def put(folder: Path, content: str | bytes, name: str = "export.csv") -> Path:
    (folder / name).write_bytes(content.encode() if isinstance(content, str) else content)
    return folder / name


def text(*lines: str, end: str = "\n") -> str:
    return end.join([HEADER, *lines]) + end


PLAIN = [(2, "t1", "NA", "138", "ED"), (3, "t2", "K", "4.1", ""), (4, "t3", "NA", "<5", "MED")]


def test_rows_come_with_their_source_lines(tmp_path: Path) -> None:
    assert read(put(tmp_path, text(*ROWS))) == (PLAIN, [], ["columns parted by comma, text in UTF-8"])


@pytest.mark.parametrize(("sign", "name"), [(",", "comma"), (";", "semicolon"), ("\t", "tab"), ("|", "vertical bar")])
def test_the_delimiter_is_guessed_and_the_guess_told(tmp_path: Path, sign: str, name: str) -> None:
    rows, _, guesses = read(put(tmp_path, text(*ROWS).replace(",", sign)))
    assert rows == PLAIN
    assert guesses == [f"columns parted by {name}, text in UTF-8"]


def test_a_delimiter_of_the_laboratory_is_taken(tmp_path: Path) -> None:
    columns = COLUMNS.model_copy(update={"delimiter": "~"})
    assert read(put(tmp_path, text(*ROWS).replace(",", "~")), columns)[0] == PLAIN


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-32"])
def test_encodings_with_a_mark_are_recognised(tmp_path: Path, encoding: str) -> None:
    rows, left, guesses = read(put(tmp_path, text("t1,NA,138,Ä日,").encode(encoding)))
    assert rows == [(2, "t1", "NA", "138", "Ä日")]
    assert left == []
    assert guesses == [f"columns parted by comma, text in {encoding.upper()}"]


def test_bytes_that_are_not_utf8_are_read_as_latin1_and_that_is_told(tmp_path: Path) -> None:
    content = text("t1,NA,138,Ä日,", "t2,NA,138,XX,").encode().replace(b"XX", b"\xb5g")
    rows, _, guesses = read(put(tmp_path, content))
    assert [row[4] for row in rows] == ["Ä日", "µg"]
    assert guesses[1].startswith("text that is not UTF-8 (first in line 3) was read as Latin-1")


def test_an_encoding_of_the_laboratory_is_taken_and_must_hold(tmp_path: Path) -> None:
    columns = COLUMNS.model_copy(update={"encoding": "cp1252"})
    assert read(put(tmp_path, text("t1,NA,138,€,").encode("cp1252")), columns)[0][0][4] == "€"
    strict = COLUMNS.model_copy(update={"encoding": "utf-8"})
    with pytest.raises(InputError, match=r"is not utf-8 throughout: .* Correct extract.encoding"):
        read(put(tmp_path, b"when,test,result,location\nt,NA,1,\xb5\n"), strict)


@pytest.mark.parametrize("end", ["\r\n", "\r"])
def test_line_ends_of_other_systems_are_line_ends(tmp_path: Path, end: str) -> None:
    assert read(put(tmp_path, text(*ROWS, end=end)))[:2] == (PLAIN, [])


def test_a_last_line_without_a_line_end_counts(tmp_path: Path) -> None:
    assert read(put(tmp_path, text(*ROWS).rstrip()))[0] == PLAIN


def test_gzip_is_known_by_its_bytes(tmp_path: Path) -> None:
    assert read(put(tmp_path, gzip.compress(text(*ROWS).encode()), "export.txt"))[:2] == (PLAIN, [])


def test_lines_above_the_header_are_left_out(tmp_path: Path) -> None:
    rows, left, _ = read(put(tmp_path, "Results of March\n\n" + text(*ROWS)))
    assert [row[0] for row in rows] == [4, 5, 6]
    assert left == [(1, "above the header line", ""), (2, "above the header line", "")]


def test_lines_of_another_width_are_left_out_and_never_shown(tmp_path: Path) -> None:
    rows, left, _ = read(put(tmp_path, text(ROWS[0], "t2,K", ROWS[1], "a,b,c,d,e,f", "   ", ROWS[2], "Total;3")))
    assert [row[0] for row in rows] == [2, 4, 7]
    assert sorted(left) == [
        (3, "wrong number of columns", "columns: 2, not 5"),
        (5, "wrong number of columns", "columns: 6, not 5"),
        (6, "blank line", ""),
        (8, "wrong number of columns", "columns: 1, not 5"),
    ]


def test_an_empty_line_is_a_row_without_anything(tmp_path: Path) -> None:
    assert read(put(tmp_path, text(ROWS[0], "", ROWS[1])))[0][1] == (3, "", "", "", "")


def test_a_quote_never_closed_costs_its_own_line_only(tmp_path: Path) -> None:
    lines = [ROWS[0], 't2,"K,4.1,,', *(f"t{i},NA,{i},," for i in range(100)), ROWS[2]]
    rows, left, _ = read(put(tmp_path, text(*lines)))
    assert len(rows) == 102
    assert left == [(3, "quote not closed", "")]


def test_two_quotes_never_closed_do_not_swallow_the_lines_between(tmp_path: Path) -> None:
    lines = [ROWS[0], 't2,K,4,,"a', ROWS[1], 't3,K,4,,"b', ROWS[2]]
    rows, left, _ = read(put(tmp_path, text(*lines)))
    assert [row[0] for row in rows] == [2, 4, 6]
    assert left == [(3, "quote not closed", ""), (5, "quote not closed", "")]


def test_a_line_end_inside_quotes_stays_in_its_row(tmp_path: Path) -> None:
    rows, left, _ = read(put(tmp_path, text(ROWS[0], 't2,K,4.1,,"see\nnote, ""urgent"""', ROWS[2])))
    assert rows == [PLAIN[0], PLAIN[1], (5, "t3", "NA", "<5", "MED")]
    assert left == []


def test_a_quote_inside_a_field_is_a_sign_like_others(tmp_path: Path) -> None:
    assert read(put(tmp_path, text('t1,NA,138,5" tube,')))[0] == [(2, "t1", "NA", "138", '5" tube')]


def test_a_lone_carriage_return_does_not_end_a_line(tmp_path: Path) -> None:
    rows, left, _ = read(put(tmp_path, text("t1,NA,138,E\rD,", ROWS[1])))
    assert rows == [(2, "t1", "NA", "138", "E\rD"), PLAIN[1]]
    assert left == []


def told(path: Path, columns: Extract = COLUMNS) -> str:
    with pytest.raises(InputError) as error:
        read(path, columns)
    assert str(path) in str(error.value)
    assert "\n" not in str(error.value)
    return str(error.value)


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", "is empty. An extract holds a header line"),
        (b" \n\n", "is empty"),
        (b"\xef\xbb\xbf", "is empty"),
        (b"\x00\x01\x02\xff" * 100, "is not text, not a text table"),
        (b"PK\x03\x04 and more", "is a spreadsheet or a zip archive"),
        (b"%PDF-1.7", "is a PDF"),
        ("when;test".encode("utf-16-le"), 'extract.encoding = "utf-16-le"'),
        (
            "\n".join(ROWS).encode(),
            'has no header line: none of the columns that lab.toml names ("when", "test", "result", "location")',
        ),
        (
            b"When,test,result,ward\n",
            'lacks what lab.toml names under [extract]: time = "when" (did you mean "When"?), ward = "location"',
        ),
        (b"when,test,result,result,location\n", 'more than one column named "result"'),
        (b"PAR1 is not enough", "not a whole Parquet file"),
        (gzip.compress(text(*ROWS).encode(), mtime=0)[:-12], "breaks off or is damaged"),
        (b"\x1f\x8b not gzip at all", "breaks off or is damaged"),
    ],
)
def test_what_is_no_extract_is_told_in_one_paragraph(tmp_path: Path, content: bytes, expected: str) -> None:
    assert expected in told(put(tmp_path, content))


def test_no_line_of_the_file_is_shown_in_an_error(tmp_path: Path) -> None:
    assert "Somebody" not in told(put(tmp_path, "Somebody,1970-03-02,138\n"))


def test_a_missing_file_and_a_folder_are_told(tmp_path: Path) -> None:
    assert "cannot be read: No such file" in told(tmp_path / "nothing.csv")
    assert "cannot be read: Is a directory" in told(tmp_path)
    with pytest.raises(InputError, match="cannot be read"):
        extract_fingerprint(tmp_path)


def test_a_file_without_line_ends_does_not_fill_the_memory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(decoding, "_LONGEST_LINE", 1000)
    monkeypatch.setattr(decoding, "BLOCK", 100)
    assert "holds a line of more than" in told(put(tmp_path, text(*ROWS) + "x" * 5000))


def parquet(folder: Path, **columns: Any) -> Path:
    pq.write_table(pa.table(columns), folder / "export.dat")
    return folder / "export.dat"


def test_parquet_of_text_reads_like_csv(tmp_path: Path) -> None:
    path = parquet(
        tmp_path,
        when=["t1", "t2"],
        test=pa.array(["NA", None]).dictionary_encode(),
        result=["138", "<5"],
        location=["ED", None],
    )
    assert read(path) == ([(1, "t1", "NA", "138", "ED"), (2, "t2", "", "<5", "")], [], [])


def test_numbers_and_times_of_parquet_become_text_that_says_the_same(tmp_path: Path) -> None:
    times = pa.array([0, 10**18 + 123_456_789], pa.timestamp("ns", tz="Europe/Paris"))
    path = parquet(tmp_path, when=times, test=[7, 8], result=[138.0, 0.1], location=[True, None])
    rows, _, _ = read(path, COLUMNS.model_copy(update={"decimal": ",", "time_format": "%d.%m.%Y"}))
    assert [row[2:] for row in rows] == [("7", "138", "true"), ("8", "0.1", "")]
    assert rows[1][1] == "2001-09-09 01:46:40.123456Z"
    block = next(
        open_extract(path, "name", COLUMNS.model_copy(update={"decimal": ",", "time_format": "%d.%m.%Y"})).blocks()
    )
    assert (block.decimal, block.time_format) == (".", None)


def test_parquet_with_lists_or_without_a_column_is_told(tmp_path: Path) -> None:
    assert 'column "result" holds list' in told(parquet(tmp_path, when=["t"], test=["NA"], result=[[1]], location=[""]))
    assert 'time = "when" (did you mean "then"?)' in told(
        parquet(tmp_path, then=["t"], test=["NA"], result=["1"], location=[""])
    )


def test_a_damaged_part_of_parquet_is_told(tmp_path: Path) -> None:
    path = parquet(
        tmp_path, when=["t"] * 999, test=["NA"] * 999, result=[str(i) for i in range(999)], location=[""] * 999
    )
    content = bytearray(path.read_bytes())
    content[4:2000] = bytes(1996)
    path.write_bytes(content)
    assert "is damaged" in told(path)


def test_the_fingerprint_is_of_the_bytes(tmp_path: Path) -> None:
    assert extract_fingerprint(put(tmp_path, "a")) == "ca978112ca1bbdcafac231b39a23dc4da786eff8147c4e72b9807785afee48bb"


fields = st.text(st.characters(codec="utf-8", exclude_characters="\0", exclude_categories=["Cs"]), max_size=6)


@given(
    st.lists(st.lists(fields, min_size=5, max_size=5), max_size=8),
    st.sampled_from([16, 64, 1 << 20]),
    st.sampled_from(["\n", "\r\n"]),
)
def test_well_formed_text_reads_as_pythons_csv_reads_it_whatever_the_size_of_blocks(
    tmp_path_factory: pytest.TempPathFactory, rows: list[list[str]], size: int, end: str
) -> None:
    written = io.StringIO()
    csv.writer(written, lineterminator=end, quoting=csv.QUOTE_ALL).writerows([HEADER.split(","), *rows])
    path = put(tmp_path_factory.getbasetemp(), written.getvalue())
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(decoding, "BLOCK", size)
        found, left, _ = read(path)
    assert [row[1:] for row in found] == [tuple(row[:4]) for row in rows]
    assert left == []


LINES = [
    *ROWS,
    "",
    "a,b",
    't2,K,4.1,,"see',
    'note"',
    '"',
    't5,"K,1,,',
    't6,K,"1",,',
    "x\ry,a,b,c,d",
    '"a"b,c,d,e,f',
    "\xff\udce4,a,b,c,d",
]


@given(st.lists(st.sampled_from(LINES), max_size=40), st.sampled_from([16, 50, 200]))
@example(lines=['t2,K,4.1,,"see'] * 30 + ['note"'] + ROWS, size=16)
def test_every_line_is_a_row_left_out_or_inside_quotes_whatever_the_size_of_blocks(
    tmp_path_factory: pytest.TempPathFactory, lines: list[str], size: int
) -> None:
    path = put(tmp_path_factory.getbasetemp(), text(*lines).encode("utf-8", "surrogateescape"))
    whole = read(path)
    used = [row[0] for row in whole[0]] + [line for line, _, _ in whole[1]]
    assert len(set(used)) == len(used)
    assert set(used) <= set(range(2, 2 + len(lines)))
    if '"' not in "".join(lines):
        assert sorted(used) == list(range(2, 2 + len(lines)))
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(decoding, "BLOCK", size)
        patch.setattr(decoding, "_HEAD", 64)
        parts = read(path)
    if '"' not in "".join(lines):
        assert parts[:2] == (whole[0], whole[1])


@given(st.binary(max_size=300))
@example(b"\xff\xfe")
@example(b"\xff\xfew\xd8")
def test_any_bytes_give_rows_or_one_input_error(tmp_path_factory: pytest.TempPathFactory, content: bytes) -> None:
    for whole in (content, HEADER.encode() + b"\n" + content, gzip.compress(content), b"PAR1" + content):
        path = put(tmp_path_factory.getbasetemp(), whole)
        try:
            read(path)
        except InputError as error:
            assert str(path) in str(error)


def test_an_irregular_block_is_read_line_by_line_and_a_regular_one_is_not(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    slow: list[bytes] = []

    def watched(block: bytes, delimiter: str, width: int, places: set[int], final: bool) -> Lines:
        slow.append(block)
        return read_by_line(block, delimiter, width, places, final)

    monkeypatch.setattr(delimited, "read_by_line", watched)
    read(put(tmp_path, text(*ROWS, 't4,"K",4.1,,"fine, too"')))
    assert slow == []
    read(put(tmp_path, text('t2,K,4.1,,"see\nnote"')))
    assert len(slow) == 1
