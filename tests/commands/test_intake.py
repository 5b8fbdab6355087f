"""`pbm intake`: the account comes out, bad input gets one paragraph and exit code 2, and history/ changes whole or not at all."""

import gzip
import json
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pbm.commands.main import main
from pbm.io.history import history_mark, read_extracts, read_history, read_streams, stream_sizes
from pbm.records.stream import StreamName
from synthetic_streams import write_laboratory

LAB = """
[laboratory]
name = "Tern Bay District Laboratory"
timezone = "Atlantic/Azores"

[extract]
time = "reported_at"
analyte = "test"
analyser = "line"
value = "result"
unit = "unit"
specimen = "specimen"
ward = "location"
patient = "patient"
kind = "kind"

[analytes.sodium]
unit = "mmol/L"
step = 1
allowable_error = { absolute = 4.0 }
analytic_sd = { absolute = 0.9 }
names = ["NA"]

[analytes.glucose]
unit = "mmol/L"
step = 0.1
allowable_error = { percent = 8 }
analytic_sd = { cv_percent = 2 }
names = ["GLU"]
"""
HEADER = "reported_at,test,line,result,unit,specimen,location,patient,kind"


def row(
    minute: int,
    test: str = "NA",
    value: str = "138",
    specimen: str | None = None,
    line: str = "line-1",
    kind: str = "P",
) -> str:
    hours, minutes = divmod(minute, 60)
    stem = f"S-{minute}" if specimen is None else specimen
    return f"2031-03-{2 + hours // 24:02d}T{hours % 24:02d}:{minutes:02d}:00Z,{test},{line},{value},mmol/L,{stem},ED,p{minute},{kind}"


Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "lab.toml").write_text(LAB)
    return tmp_path


@pytest.fixture
def run(folder: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """`pbm intake` in the laboratory's folder: exit code, stdout, stderr."""

    def intake(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["pbm", "intake", "--lab", str(folder), *arguments])
        try:
            main()
            code = 0
        except SystemExit as left:
            code = int(left.code or 0)
        told = capsys.readouterr()
        return code, told.out, told.err

    return intake


def put(folder: Path, name: str, *rows: str) -> str:
    (folder / name).write_text("\n".join([HEADER, *rows]) + "\n")
    return str(folder / name)


MESS = (
    row(0),
    row(1, value="<60"),
    row(2, kind="Q"),
    row(3, kind="Q"),
    row(4, value="HEM"),
    row(5, test="LIPAEMIA"),
    row(0),
    row(9, specimen="S-1", value="61"),
    row(10, test="GLU", value="5.5", line="line-2"),
    "",
)


def test_the_account_comes_out(folder: Path, run: Run) -> None:
    code, out, err = run(put(folder, "export.csv", *MESS))
    assert (code, err) == (0, "")
    for expected in (
        "export.csv: 10 rows, 3 taken",
        "columns parted by comma, text in UTF-8",
        "rows read  10",
        "taken       3",
        "left out    7",
        "   2  not a patient result  (Q 2)",
        "   1  duplicate",
        "   1  rerun of the specimen",
        "   1  blank line",
        "sodium@line-1   2      2           50.0%     2031-03-01 23:00  2031-03-01 23:01",
        "Look at this: more than half of the rows were left out",
        "Look at this: sodium@line-1: 50% of the results are censored",
    ):
        assert expected in out
    left = pq.read_table(folder / "history" / "left-out.parquet").to_pylist()
    assert {one["line"]: one["reason"] for one in left} == {
        4: "not a patient result",
        5: "not a patient result",
        6: "not a number",
        7: "unknown test",
        8: "duplicate",
        9: "rerun of the specimen",
        11: "blank line",
    }


def test_json_says_the_same_to_a_program(folder: Path, run: Run) -> None:
    code, out, _ = run("--json", put(folder, "export.csv", *MESS))
    told = json.loads(out)
    assert code == 0
    assert told["rows"] == told["taken"] + sum(told["left_out"].values()) == 10
    assert told["found"]["not a patient result"] == {"Q": 2}
    assert told["streams"]["glucose@line-2"] == {
        "taken": 1,
        "rows": 1,
        "censored": 0,
        "first": "2031-03-02T00:10:00+00:00",
        "last": "2031-03-02T00:10:00+00:00",
    }
    assert told["extracts"] == {
        "export.csv": {"rows": 10, "taken": 3, "guesses": ["columns parted by comma, text in UTF-8"]}
    }


def test_the_history_holds_the_results_and_no_patient(folder: Path, run: Run) -> None:
    run(put(folder, "export.csv", *MESS))
    stream = read_history(folder / "history", StreamName("sodium", "line-1"))
    assert list(stream.value) == [138.0, 60.0]
    assert list(stream.censor) == [0, -1]
    assert list(stream.specimen) == ["S-0", "S-1"]
    for path in (folder / "history").rglob("*.parquet"):
        assert "p1" not in str(pq.read_table(path, partitioning=None).to_pydict())


def test_the_same_file_is_not_taken_twice(folder: Path, run: Run) -> None:
    first, copy = put(folder, "export.csv", *MESS), put(folder, "copy.csv", *MESS)
    run(first)
    mark = history_mark(folder / "history")
    code, out, err = run(first, copy)
    assert (code, out) == (2, "")
    assert f"Nothing was taken: {first} was taken before, as export.csv; {copy} was taken before, as export.csv." in err
    assert history_mark(folder / "history") == mark
    code, out, _ = run(first, put(folder, "new.csv", row(100)))
    assert code == 0
    assert f"Passed over: {first} was taken before" in out
    (folder / "lab.toml").write_text(LAB + "# changed\n")
    assert "under another lab.toml (to take it under this one, delete history/ and take all again)" in run(first)[2]


def test_rows_that_extracts_share_are_taken_once_even_when_packed(folder: Path, run: Run) -> None:
    run(put(folder, "export.csv", row(0), row(1)))
    later = folder / "later.csv.gz"
    later.write_bytes(gzip.compress("\n".join([HEADER, row(1), row(2)]).encode()))
    code, out, _ = run(str(later))
    assert code == 0
    assert "  1  duplicate" in out
    assert stream_sizes(folder / "history") == {StreamName("sodium", "line-1"): 3}
    assert [one.taken for one in read_extracts(folder / "history")] == [2, 1]


def test_when_only_known_rows_come_nothing_is_taken_and_the_history_stays(folder: Path, run: Run) -> None:
    run(put(folder, "export.csv", row(0), row(1)))
    mark = history_mark(folder / "history")
    code, _, err = run(put(folder, "again.csv", row(1), row(0)))
    assert code == 2
    assert "Nothing was taken: 2 rows left out: duplicate." in err
    assert history_mark(folder / "history") == mark
    assert [one.name for one in read_extracts(folder / "history")] == ["export.csv"]


def test_an_earlier_run_that_comes_later_takes_the_place_of_its_rerun(folder: Path, run: Run) -> None:
    run(put(folder, "march.csv", row(5, specimen="S", value="150"), row(6)))
    code, out, _ = run(put(folder, "february.csv", row(1, specimen="S", value="139")))
    assert code == 0
    assert "rows taken before that gave way to earlier ones, which came only now: 1" in out
    assert list(read_history(folder / "history", StreamName("sodium", "line-1")).value) == [139.0, 138.0]


def test_files_of_one_name_are_told_apart(folder: Path, run: Run) -> None:
    (folder / "other").mkdir()
    run(put(folder, "export.csv", row(0)), put(folder / "other", "export.csv", row(1)))
    assert [one.name for one in read_extracts(folder / "history")] == ["export.csv", "export.csv (2)"]


def test_taking_files_together_or_one_by_one_gives_the_same_history(folder: Path, run: Run) -> None:
    files = [
        put(folder, f"{i}.csv", *(row(10 * i + j, value=str(130 + j), specimen=f"S-{7 * i + j}") for j in range(15)))
        for i in range(3)
    ]
    run(*files)
    together = history_mark(folder / "history")
    (folder / "history").rename(folder / "together")
    for file in files:
        run(file)
    assert history_mark(folder / "history") == together


def test_a_bad_file_among_good_ones_changes_nothing(folder: Path, run: Run) -> None:
    good = put(folder, "good.csv", row(0))
    broken = folder / "broken.csv.gz"
    broken.write_bytes(gzip.compress("\n".join([HEADER, *(row(i) for i in range(3000))]).encode())[:-9])
    code, out, err = run(good, str(broken))
    assert (code, out) == (2, "")
    assert "broken.csv.gz breaks off or is damaged" in err
    assert sorted(path.name for path in folder.iterdir()) == ["broken.csv.gz", "good.csv", "lab.toml"]


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", "is empty"),
        (b"\x00\x01\x02", "is not text"),
        (row(0).encode(), "has no header line"),
        (HEADER.replace("result", "value").encode(), 'lacks what lab.toml names under [extract]: value = "result"'),
        (HEADER.encode(), "bad.csv has a header line and no rows"),
        ("\n".join([HEADER, row(0, test="X")]).encode(), "Nothing was taken: 1 rows left out: unknown test"),
    ],
)
def test_bad_input_gets_one_paragraph_and_exit_code_two(folder: Path, run: Run, content: bytes, expected: str) -> None:
    (folder / "bad.csv").write_bytes(content)
    code, out, err = run(str(folder / "bad.csv"))
    assert (code, out) == (2, "")
    assert expected in err
    assert len(err.strip().splitlines()) == 1
    assert not (folder / "history").exists()


def test_a_wrong_lab_or_pattern_of_times_is_told(folder: Path, run: Run) -> None:
    file = put(folder, "export.csv", row(0))
    (folder / "lab.toml").write_text(LAB.replace("step = 1", "stp = 1"))
    assert "analytes.sodium.stp: unknown key" in run(file)[2]
    (folder / "lab.toml").write_text(LAB.replace("[extract]", '[extract]\ntime_format = "%Q"'))
    code, _, err = run(file)
    assert code == 2
    assert '"%Q" is not a pattern of dates and times' in err
    (folder / "lab.toml").unlink()
    assert "There is no lab.toml" in run(file)[2]


def test_a_folder_that_cannot_be_written_is_told(folder: Path, run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(**given: Any) -> str:
        raise PermissionError(13, "Permission denied", "history")

    monkeypatch.setattr("tempfile.mkdtemp", refuse)
    code, _, err = run(put(folder, "export.csv", row(0)))
    assert code == 2
    assert "cannot be written: [Errno 13] Permission denied" in err


def test_pooled_analysers_are_warned_of(folder: Path, run: Run) -> None:
    (folder / "lab.toml").write_text(LAB.replace('analyser = "line"\n', ""))
    code, out, _ = run(put(folder, "export.csv", row(0), row(1)))
    assert code == 0
    assert "Look at this: analysers pooled" in out
    assert read_streams(folder / "history") == [StreamName("sodium", "pooled")]


def test_help_has_an_example_and_does_not_load_what_reads_files() -> None:
    script = (
        "import sys; sys.argv = ['pbm', 'intake', '--help']\n"
        "from pbm.commands.main import main\n"
        "try: main()\n"
        "finally: print(sorted({'pandas', 'pyarrow'} & set(sys.modules)))"
    )
    told = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False).stdout
    assert "Example:  pbm intake export-2030.csv.gz export-2031.csv" in told
    assert told.strip().endswith("[]")


cells = st.sampled_from(
    [
        "",
        "NA",
        "GLU",
        "X",
        "138",
        "<5",
        "HEM",
        "mmol/L",
        "mg/dL",
        "P",
        "Q",
        "line-1",
        "2031-03-02 07:14",
        '"',
        'a"b',
        "µ",
    ]
)
mutations = st.lists(
    st.tuples(st.integers(0, 900), st.integers(0, 5), st.one_of(st.text(max_size=4), cells)), max_size=8
)


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(mutations=mutations)
def test_any_damage_to_an_extract_leaves_the_account_exact_and_gives_no_traceback(
    folder: Path, run: Run, mutations: list[tuple[int, int, str]]
) -> None:
    content = "\n".join([HEADER, *MESS, row(50), row(51)]) + "\n"
    for at, length, put_in in mutations:
        content = content[:at] + put_in + content[at + length :]
    (folder / "fuzz.csv").write_bytes(content.encode("utf-8", "surrogatepass"))
    code, out, err = run("--json", str(folder / "fuzz.csv"))
    if code == 0:
        told = json.loads(out)
        assert told["rows"] == told["taken"] + sum(told["left_out"].values())
        assert sum(stream_sizes(folder / "history").values()) == told["taken"]
        assert len(pq.read_table(folder / "history" / "left-out.parquet")) == told["rows"] - told["taken"]
        subprocess.run(["rm", "-r", str(folder / "history")], check=True)
    else:
        assert code == 2
        assert err.startswith("pbm: ")
        assert not (folder / "history").exists()


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.binary(max_size=400))
def test_random_bytes_give_one_paragraph(folder: Path, run: Run, content: bytes) -> None:
    (folder / "noise").write_bytes(content)
    code, _, err = run(str(folder / "noise"))
    assert code == 2
    assert err.startswith("pbm: ")
    assert not (folder / "history").exists()


def test_the_export_of_the_invented_laboratory_is_accounted_for_line_by_line(folder: Path, run: Run) -> None:
    write_laboratory(folder / "tern", seed=3, days=20)
    truth = json.loads((folder / "tern" / "truth.json").read_text())["export"]
    (folder / "lab.toml").write_bytes((folder / "tern" / "lab.toml").read_bytes())
    code, out, _ = run("--json", str(folder / "tern" / "extract" / "export.csv"))
    told = json.loads(out)
    assert code == 0
    assert told["rows"] == truth["rows"] + truth["blank_lines"]
    assert {name: one["taken"] for name, one in told["streams"].items()} == {
        name: count for name, count in truth["taken_by_stream"].items() if count
    }
    left = pq.read_table(folder / "history" / "left-out.parquet").to_pylist()
    reasons = {
        "rerun": "rerun of the specimen",
        "exact_duplicate": "duplicate",
        "comment": "not a number",
        "other_unit": "unit is not mmol/L",
        "unmapped_test": "unknown test",
        "wrong_field_count": "wrong number of columns",
    }
    for kind, reason in reasons.items():
        assert sorted(one["line"] for one in left if one["reason"] == reason) == truth["source_lines"][kind]
