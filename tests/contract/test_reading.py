"""The live watch reads a file as intake does: the same results in the same streams, and the same lines left out for the same reasons."""

from pathlib import Path

import pytest

from pbm.io.extract import open_extract
from pbm.io.follow import FollowedFile
from pbm.io.lab_file import read_lab
from pbm.records.laboratory import Lab
from pbm.records.reading import SetAside
from pbm.records.result import Result
from pbm.stages.intake import RowReader
from pbm.stages.live import read_chunk
from pbm.stages.reading import Reader
from synthetic_streams import write_laboratory

Results = list[tuple[str, int, float, int, str, str]]
LeftOut = list[tuple[int, str, str]]


def as_intake_reads(path: Path, lab: Lab) -> tuple[Results, LeftOut]:
    results: Results = []
    left: LeftOut = []
    reader = RowReader(lab, b"a key")
    for block in open_extract(path, path.name, lab.extract).blocks():
        parsed = reader.parse(block)
        rows = iter(parsed.results.to_pylist())
        for name, count in parsed.streams:
            for _, row in zip(range(count), rows, strict=False):
                time = round(row["time"].timestamp() * 1e6)
                results.append((str(name), time, row["value"], row["censor"], row["specimen"], row["ward"]))
        left += [(row["line"], row["reason"], row["stream"]) for row in parsed.left_out.to_pylist()]
    return sorted(results), sorted(left)


def as_watch_reads(path: Path, lab: Lab) -> tuple[Results, LeftOut]:
    results: Results = []
    left: LeftOut = []
    columns = lab.extract
    reader = Reader(
        lab,
        columns.decimal,
        columns.time_format,
        units_given=columns.unit is not None,
        kinds_given=columns.kind is not None,
    )
    file = FollowedFile(path, columns)
    while chunk := file.read():
        for item in read_chunk(chunk, reader).items:
            if isinstance(item, Result):
                results.append((str(item.stream), item.time, item.value, item.censor, item.specimen, item.ward))
            elif isinstance(item, SetAside):
                left.append((item.place, item.reason, item.stream))
    file.close()
    return sorted(results), sorted(left)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = tmp_path_factory.mktemp("laboratory")
    write_laboratory(made, days=20, volume=0.4)
    return made


def test_the_export_of_the_invented_laboratory_is_read_alike(folder: Path) -> None:
    lab = read_lab(folder / "lab.toml")
    intake, watch = (
        as_intake_reads(folder / "extract" / "export.csv", lab),
        as_watch_reads(folder / "extract" / "export.csv", lab),
    )
    assert watch == intake
    assert len(intake[0]) > 10_000
    assert len({reason for _, reason, _ in intake[1]}) >= 4, "the export must hold several kinds of mess"


AWKWARD = """title of a report

reported_at,test,line,result,unit,specimen,location,sex,age,patient,kind
2031-03-02T07:14:05Z,NA,line-2,138,mmol/L,31-1,ED,F,61,p1,P
2031-03-02T07:14:05Z,NA,line-2," 139 ",mmol/L,"31-2","a ""ward"" so named",F,61,p1,P
2031-03-02T07:14:05Z,NA,line-2,140,mmol/L,31-3,"two
lines, one row",F,61,p1,P
2031-03-02T07:14:05Z,NA,line-2,141,mmol/L,31-4,"never closed,F,61,p1,P
2031-03-02T07:14:05Z,NA,line-2,142,mmol/L,31-5,ED,F,61,p1
2031-03-02T07:14:05Z,NA,line-2,143,mmol/L,31-6,ED,F,61,p1,P,more
reported_at,test,line,result,unit,specimen,location,sex,age,patient,kind
2031-03-02T07:14:05,NA,,144,mmol/L,31-7,ED,F,61,p1,P
2031-03-02T07:14:05,NA,line-2,>200,mmol/L,31-8,\xb5,F,61,p1,P
2031-03-02T07:14:05,NA,line-2,145,,31-9,ED,F,61,p1,P
2031-03-02T07:14:05,LI,line-2,0.8,mmol/L,31-9,ED,F,61,p1,Q

,,,,,,,,,,P
2031-03-02T07:14:05,NA,line-2,146,mmol/L,31-10,ED,F,61,p1,P
"""
ORDINARY = "2031-03-02T07:14:05,NA,line-2,147,mmol/L,31-11,ED,F,61,p1,P\n"


@pytest.mark.parametrize("encoding", ["utf-8", "latin-1", "utf-8-sig"])
@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_an_awkward_file_is_read_alike(folder: Path, tmp_path: Path, encoding: str, line_end: str) -> None:
    path = tmp_path / "awkward.csv"
    # A followed file waits where a quote is open, since its end may still come; so lines enough to know better follow.
    path.write_bytes((AWKWARD + ORDINARY * 30).replace("\n", line_end).encode(encoding))
    lab = read_lab(folder / "lab.toml")
    lab = lab.model_copy(update={"extract": lab.extract.model_copy(update={"lot": None})})
    intake, watch = as_intake_reads(path, lab), as_watch_reads(path, lab)
    assert watch == intake
    assert len({reason for _, reason, _ in intake[1]}) >= 8, "the file must be awkward in many ways"
